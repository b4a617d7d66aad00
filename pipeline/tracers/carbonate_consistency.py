"""Which of three measured quantities of the carbonate system is at fault where they contradict each other.

Three quantities have two degrees of freedom: that they disagree is certain, and nothing in them says why. What stands
above and below in the cast may: the one at fault lies off its line by as much as the other two ask it to be moved.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.tracers.carbonate import conditions_of, measured_of
from pipeline.tracers.carbonate_pairs import PAIRS, QUANTITIES, solved, state

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.carbonate_settings import CarbonateSettings
    from pipeline.tables import FloatArray
    from pipeline.tracers.carbonate import CarbonateSystem
    from pipeline.usable import Rows

    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

RESIDUALS = {"ph": "ph_residual", "fco2": "fco2_residual"}
UNDECIDED = -1
# What lies off the line between its neighbours by half of what is asked of it, or twice, is at fault; and the other
# two have to lie nearer to theirs. Between that nothing is decided (our choice, no source).
_LEAST, _MOST = 0.5, 2.0
_CAST_WIDTH = 1e5  # further apart than any pressure of the ocean
_SAME_TEMPERATURE = 0.1  # degC within which measurements of pH or gas can be compared with each other


@dataclass(frozen=True, slots=True)
class Disagreement:
    """Samples in which a third quantity contradicts the pair, (n,) each."""

    rows: IntArray
    third: int  # of QUANTITIES
    away: FloatArray  # measured less computed
    uncertainty: FloatArray
    fault: IntArray  # of QUANTITIES, or UNDECIDED
    asked: FloatArray  # by how much the one at fault is off what the other two give; NaN where undecided
    by_fourth: BoolArray  # whether a fourth quantity that agrees with the pair decided


def disagreements(data: Rows, system: CarbonateSystem, settings: CarbonateSettings) -> list[Disagreement]:
    """Return, by third quantity, the samples in which it contradicts the pair, and what is at fault in each."""
    found, agreeing = [], {}
    for quantity, residual in RESIDUALS.items():
        away, uncertainty = system.columns[residual], system.columns[f"{residual}_uncertainty"]
        with np.errstate(invalid="ignore"):
            agreeing[quantity] = np.abs(away) <= settings.consistency * uncertainty
        rows = np.flatnonzero(~np.isnan(away) & ~agreeing[quantity])
        if len(rows):
            found.append((quantity, rows, away[rows], uncertainty[rows]))
    told = []
    for quantity, rows, away, uncertainty in found:
        third = QUANTITIES.index(quantity)
        fault, asked = _faults(data, system, rows, third, agreeing[quantity], settings)
        fourth = agreeing["fco2" if quantity == "ph" else "ph"][rows]
        fault, asked = np.where(fourth, third, fault), np.where(fourth, away, asked)
        told.append(Disagreement(rows, third, away, uncertainty, fault, asked, fourth))
    return _reconciled(told)


def _faults(
    data: Rows,
    system: CarbonateSystem,
    rows: IntArray,
    third: int,
    agreeing: BoolArray,
    settings: CarbonateSettings,
) -> tuple[IntArray, FloatArray]:
    """Return which quantity is at fault in each of some rows, by what stands above and below, and how far it is off."""
    fault, size = np.full(len(rows), UNDECIDED), np.full(len(rows), np.nan)
    for number in np.unique(system.pair[rows]):
        mine = np.flatnonzero(system.pair[rows] == number)
        three = (*PAIRS[number], third)
        sound = agreeing & (system.pair == number)
        asked = _asked(system, rows[mine], three, settings)
        with np.errstate(invalid="ignore", divide="ignore"):
            parts = [_off(data, system, rows[mine], sound, one, asked[one]) for one in three]
            for one, part in zip(three, parts, strict=True):
                others = [other for other in parts if other is not part]
                alone = (
                    (part > _LEAST)
                    & (part < _MOST)
                    & (np.abs(others[0]) < _LEAST)
                    & (np.abs(others[1]) < _LEAST)
                )
                fault[mine[alone]], size[mine[alone]] = one, asked[one][alone]
    return fault, size


def _asked(
    system: CarbonateSystem, rows: IntArray, three: tuple[int, ...], settings: CarbonateSettings
) -> dict[int, FloatArray]:
    """Return by how much each of three quantities is off what the other two give, (n,) each."""
    conditions = conditions_of(system.inputs, rows, settings)
    measured = measured_of(system.inputs, rows, conditions)
    asked = {}
    for one in three:
        others = tuple(sorted(set(three) - {one}))
        pair = np.full(len(rows), PAIRS.index(others))
        with np.errstate(all="ignore"):
            dic, alkalinity = solved(measured, pair, conditions)
            match QUANTITIES[one]:
                case "dic":
                    given = dic
                case "alkalinity":
                    given = alkalinity
                case "ph":
                    given = state(dic, alkalinity, conditions.of_ph).ph
                case _:
                    given = state(dic, alkalinity, conditions.of_gas).fco2
        asked[one] = getattr(measured, QUANTITIES[one]) - given
    return asked


def _off(
    data: Rows, system: CarbonateSystem, rows: IntArray, sound: BoolArray, quantity: int, asked: FloatArray
) -> FloatArray:
    """Return how far a quantity lies off the line between sound samples above and below, in what is asked of it, (n,).

    NaN where there are none, or where they were measured at another temperature or as another quantity.
    """
    chosen = system.inputs.quantities[QUANTITIES[quantity]]
    columns = (chosen.values, np.nan_to_num(chosen.temperature), chosen.column.astype(np.float64))
    place = data.casts * _CAST_WIDTH + system.inputs.pressure
    values, temperature, column = (_between(place, data.casts, array, sound, rows) for array in columns)
    alike = np.abs(temperature - columns[1][rows]) < _SAME_TEMPERATURE
    alike &= column == columns[2][rows]
    return np.where(alike, (chosen.values[rows] - values) / asked, np.nan)


def _between(
    place: FloatArray, casts: IntArray, values: FloatArray, sound: BoolArray, rows: IntArray
) -> FloatArray:
    """Return what a line between the sound samples next above and below in the cast gives at some rows, (n,).

    Parameters
    ----------
    place
        Of every row on one axis, on which a cast lies apart from the next, (n_row,).
    casts, values, sound
        Of every row, (n_row,).
    rows
        Which are wanted, (n,).

    """
    theirs = np.flatnonzero(sound & ~np.isnan(place + values))
    theirs = theirs[np.lexsort((values[theirs], place[theirs]))]
    if not len(theirs):
        return np.full(len(rows), np.nan)
    below = np.searchsorted(place[theirs], place[rows])
    up, down = (theirs[np.clip(at, 0, len(theirs) - 1)] for at in (below - 1, below))
    known = (below > 0) & (below < len(theirs)) & (casts[up] == casts[rows]) & (casts[down] == casts[rows])
    part = (place[rows] - place[up]) / np.where(place[down] > place[up], place[down] - place[up], np.nan)
    return np.where(known, (1.0 - part) * values[up] + part * values[down], np.nan)


def _reconciled(told: list[Disagreement]) -> list[Disagreement]:
    """Return disagreements of pH and of the gas that blame the same sample's pair alike, or leave it undecided."""
    if len(told) < 2:
        return told
    one, other = told
    _, here, there = np.intersect1d(one.rows, other.rows, assume_unique=True, return_indices=True)
    for i, j in zip(here.tolist(), there.tolist(), strict=True):
        faults = {int(one.fault[i]), int(other.fault[j])} - {UNDECIDED}
        of_pair = faults - {one.third, other.third}
        if not of_pair:
            continue
        agreed = of_pair.pop() if len(faults) == 1 else UNDECIDED
        asked = one.asked[i] if one.fault[i] == agreed else other.asked[j]
        for which, at in ((one, i), (other, j)):
            which.fault[at], which.asked[at] = agreed, asked if agreed != UNDECIDED else np.nan
    return told
