"""Nutrients against each other: nitrate and phosphate, nitrate beside nitrite, and values below zero."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import AFTER, BEFORE, BETWEEN, neighbours, plausible, unlike
from pipeline.findings import Severity
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]

# N* of Deutsch et al. 2001: NO3 - 16 PO4 + 2.9 (from memory).
N_PER_P, N_STAR_OFFSET = 16.0, 2.9
# Below this pressure the ratio of nitrate to phosphate is that of the deep ocean (common practice, no source).
DEEP = 500.0
# Where one of two departs so much more than the other from what stands beside it, it is the doubtful one.
_CLEARLY = 2.0
# Of the values that are near zero, in limits of detection, the number and the part below zero from which the blank is
# at fault: without a fault they scatter to both sides.
_NEAR_ZERO, _FEWEST_BELOW_ZERO, _BELOW_ZERO = 3.0, 10, 0.75
# umol/kg and part by which nitrate, nitrite and their sum may disagree, and nitrite that shows the difference.
_SUM_AGREES, _SUM_PART, _NITRITE_SEEN, _FEWEST_SUMS = 0.3, 0.03, 0.1, 10


def nitrate(data: Rows) -> tuple[str, FloatArray]:
    """Return where nitrate stands, and its plausible values, umol/kg, (n_row,).

    Where only the sum with nitrite was delivered, nitrite is taken off it where it is known.
    """
    if "nitrate" in data.names or "nitrate_plus_nitrite" not in data.names:
        return "nitrate", plausible(data, "nitrate")
    nitrite = plausible(data, "nitrite")
    both = plausible(data, "nitrate_plus_nitrite")
    return "nitrate_plus_nitrite", both - np.where(np.isnan(nitrite), 0.0, nitrite)


def nitrate_to_phosphate(data: Rows, settings: Settings) -> list[Mark]:
    """Nitrate and phosphate in a ratio, or with an N*, that neither the ocean nor the samples beside them have."""
    checks = settings.checks
    name, nitrates = nitrate(data)
    phosphates = plausible(data, "phosphate")
    pressure = hydrography(data).pressure
    star = nitrates - N_PER_P * phosphates + N_STAR_OFFSET
    low, high = checks.nitrate_to_phosphate
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        ratio = nitrates / phosphates
        odd = (np.abs(star) > checks.n_star) | ((pressure > DEEP) & ((ratio < low) | (ratio > high)))
    rows = np.flatnonzero(odd)
    with np.errstate(invalid="ignore"):
        # N loss and N fixation are real, and seen by more samples than one.
        rows = rows[unlike(star[rows], neighbours(data, star, rows)) > checks.n_star_departure]
    if not len(rows):
        return []
    of_nitrate = _departure(nitrates[rows], neighbours(data, nitrates, rows))
    of_phosphate = N_PER_P * _departure(phosphates[rows], neighbours(data, phosphates, rows))
    marks = []
    for variable, spared in (
        (name, of_phosphate > _CLEARLY * of_nitrate), ("phosphate", of_nitrate > _CLEARLY * of_phosphate),
    ):  # fmt: skip
        mine = rows[~spared]
        if len(mine):
            values = [f"{data.floats(variable)[row]:g} (NO3/PO4 is {ratio[row]:.1f}, N* is {star[row]:.1f} umol/kg)"
                      for row in mine]  # fmt: skip
            limit = (
                f"a ratio of {low:g} to {high:g} below {DEEP:g} dbar and N* within {checks.n_star:g} umol/kg"
            )
            words = "is {value}, and no sample beside it is like that"
            marks.append(Mark("nitrate-to-phosphate", Severity.DOUBT, variable, mine, values, words, limit))
    return marks


def nitrate_and_nitrite(data: Rows, settings: Settings) -> list[Mark]:
    """A nitrate column that holds nitrate and nitrite together, or whose sum with nitrite is another."""
    nitrates, nitrites, both = (
        plausible(data, name) for name in ("nitrate", "nitrite", "nitrate_plus_nitrite")
    )
    with np.errstate(invalid="ignore"):
        seen = nitrites > _NITRITE_SEEN
        rows = np.flatnonzero(seen & ~np.isnan(nitrates + both))
    if len(rows) < _FEWEST_SUMS:
        return []
    excess = float(np.median((nitrates + nitrites - both)[rows]))
    nitrite = float(np.median(nitrites[rows]))
    limit = "NITRAT and NITRIT to add up to NO2+NO3"
    if abs(excess - nitrite) < _NITRITE_SEEN / 2:
        words = f"is the same as NO2+NO3 in {{value}} samples with nitrite above {_NITRITE_SEEN:g} umol/kg"
        return [
            Mark("nitrate-and-nitrite", Severity.NOTE, "nitrate", rows, [len(rows)], words, limit, together=True)
        ]  # fmt: skip
    if abs(excess) > _SUM_AGREES + _SUM_PART * float(np.median(both[rows])):
        words = "and NITRIT are together {value} umol/kg more than NO2+NO3 in the median"
        return [
            Mark("nitrate-and-nitrite", Severity.NOTE, "nitrate", rows, [f"{excess:+.2f}"], words, limit,
                 together=True)
        ]  # fmt: skip
    return []


def negative_nutrient(data: Rows, settings: Settings) -> list[Mark]:
    """Nutrients further below zero than the limit of detection explains, and columns that often lie below it."""
    marks = []
    for name, below_zero in settings.checks.negative_nutrients:
        if name not in data.names:
            continue
        values = data.usable(name)
        limits = REGISTRY[name].plausible
        label = REGISTRY[name].exchange[0] if REGISTRY[name].exchange else name
        with np.errstate(invalid="ignore"):
            negative = values < -below_zero
            if limits is not None:
                negative &= values >= limits[0]  # of all others the gross range tells
            near = np.abs(values) < _NEAR_ZERO * below_zero
            little = near & (values < 0)
        rows = np.flatnonzero(negative)
        if len(rows):
            limit = f"at least -{below_zero:g} umol/kg, which the limit of detection explains"
            marks.append(
                Mark(
                    "negative-nutrient",
                    Severity.DOUBT,
                    name,
                    rows,
                    values[rows].tolist(),
                    "is {value}",
                    limit,
                )
            )
        count = int(little.sum())
        if count >= _FEWEST_BELOW_ZERO and count > _BELOW_ZERO * near.sum():
            rows = np.flatnonzero(little)
            words = (
                f"is below zero in {count} of the {int(near.sum())} samples that have nearly none, by {{value}} umol/kg"
                " in the median; the blank may be too large"
            )
            by = f"{-float(np.median(values[rows])):.2g}"
            limit = f"{label} to scatter to both sides of zero there"
            marks.append(
                Mark("negative-nutrient", Severity.NOTE, name, rows, [by], words, limit, together=True)
            )
    return marks


def _departure(values: FloatArray, beside: FloatArray) -> FloatArray:
    """Return how far values are from the line between their neighbours in the cast, else in other casts, (n_row,)."""
    away = np.abs(beside - values[:, None])
    sides = np.fmin(away[:, BEFORE], away[:, AFTER])
    return np.where(np.isnan(away[:, BETWEEN]), np.where(np.isnan(sides), 0.0, sides), away[:, BETWEEN])
