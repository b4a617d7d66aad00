"""A whole quantity of a cruise against what its other quantities imply: notes with the size of the offset."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import plausible
from pipeline.checking.ratios import DEEP, N_PER_P, N_STAR_OFFSET, nitrate
from pipeline.checking.saturation import SURFACE
from pipeline.findings import Severity

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]

_NAME = "cruise-offset"
# Alkalinity at a salinity of 35 (common practice, no source), and the salinities of the open ocean's surface.
_ALKALINITY, _SALINITY, _OPEN_OCEAN = 2300.0, 35.0, (33.0, 37.5)
# Nearer to the poles upwelled deep water has more (our choice of latitude).
_POLAR = 55.0
# umol/kg of phosphate that the deep samples must span for a slope, and samples thinned to for the median slope.
_PHOSPHATE_SPAN, _MOST_FOR_SLOPE = 0.6, 300
# Part of the samples that lies outside where it is told.
_MANY = 0.5


def cruise_offset(data: Rows, settings: Settings) -> list[Mark]:
    """A quantity that is too high or too low throughout the cruise, by what its other quantities imply."""
    if not data.is_bottle:
        return []
    return [*_deep_nitrate(data, settings), *_surface_alkalinity(data, settings), *_carbon(data, settings)]


def _deep_nitrate(data: Rows, settings: Settings) -> list[Mark]:
    """Compare deep nitrate with deep phosphate: the offset N*, and the slope where there is one."""
    checks = settings.checks
    name, nitrates = nitrate(data)
    phosphates = plausible(data, "phosphate")
    with np.errstate(invalid="ignore"):
        rows = np.flatnonzero((hydrography(data).pressure > DEEP) & ~np.isnan(nitrates + phosphates))
    if len(rows) < checks.whole_column_samples:
        return []
    offset = float(np.median(nitrates[rows] - N_PER_P * phosphates[rows] + N_STAR_OFFSET))
    if abs(offset) > checks.n_star:
        words = (
            f"gives an N* of {{value}} umol/kg with PHSPHT in the median of {len(rows)} samples below {DEEP:g} dbar:"
            f" nitrate is {'high' if offset > 0 else 'low'} by that, or phosphate"
            f" {'low' if offset > 0 else 'high'} by {abs(offset) / N_PER_P:.2f}, or nitrate is lost here"
        )
        return [
            Mark(_NAME, Severity.NOTE, name, rows, [f"{offset:+.1f}"], words, f"within {checks.n_star:g} umol/kg",
                 together=True)
        ]  # fmt: skip
    slope = _median_slope(phosphates[rows], nitrates[rows])
    low, high = checks.nitrate_phosphate_slope
    if np.isnan(slope) or low - (high - low) / 2 <= slope <= high + (high - low) / 2:
        return []
    words = f"rises by {{value}} for each umol/kg of PHSPHT in {len(rows)} samples below {DEEP:g} dbar"
    limit = f"about {low:g} to {high:g}; a factor in one of the two changes it"
    return [Mark(_NAME, Severity.NOTE, name, rows, [f"{slope:.1f}"], words, limit, together=True)]


def _median_slope(x: FloatArray, y: FloatArray) -> float:
    """Return the median slope between samples of the lower and of the upper half of ``x``, (n,) each.

    A Theil-Sen slope of far pairs; NaN where ``x`` spans too little.
    """
    order = np.argsort(x, kind="stable")
    order = order[:: max(1, len(order) // _MOST_FOR_SLOPE)]
    x, y = x[order], y[order]
    third = len(x) // 3
    if third < 3 or x[-third:].mean() - x[:third].mean() < _PHOSPHATE_SPAN:
        return float("nan")
    run = x[-third:, None] - x[None, :third]
    rise = y[-third:, None] - y[None, :third]
    return float(np.median(rise / np.maximum(run, _PHOSPHATE_SPAN / 10)))


def _surface_alkalinity(data: Rows, settings: Settings) -> list[Mark]:
    checks = settings.checks
    water = hydrography(data)
    alkalinity = plausible(data, "alkalinity")
    with np.errstate(invalid="ignore"):
        open_ocean = (water.salinity >= _OPEN_OCEAN[0]) & (water.salinity <= _OPEN_OCEAN[1])
        open_ocean &= np.abs(data.floats("latitude")) < _POLAR
        rows = np.flatnonzero((water.pressure <= 2 * SURFACE) & open_ocean & ~np.isnan(alkalinity))
    if len(rows) < checks.whole_column_samples:
        return []
    by = float(np.median(alkalinity[rows] - _ALKALINITY * water.salinity[rows] / _SALINITY))
    if abs(by) <= checks.surface_alkalinity:
        return []
    words = f"is {{value}} umol/kg from 2300 S/35 in the median of {len(rows)} surface samples"
    limit = f"within {checks.surface_alkalinity:g} umol/kg in the open ocean"
    return [Mark(_NAME, Severity.NOTE, "alkalinity", rows, [f"{by:+.0f}"], words, limit, together=True)]


def _carbon(data: Rows, settings: Settings) -> list[Mark]:
    checks = settings.checks
    difference = plausible(data, "alkalinity") - plausible(data, "dic")
    rows = np.flatnonzero(~np.isnan(difference))
    if len(rows) < checks.whole_column_samples:
        return []
    low, high = checks.alkalinity_less_dic
    outside = (difference[rows] < low) | (difference[rows] > high)
    if outside.mean() < _MANY:
        return []
    by = float(np.median(difference[rows]))
    words = f"less TCARBN is {{value}} umol/kg in the median of {len(rows)} samples"
    return [
        Mark(_NAME, Severity.NOTE, "alkalinity", rows, [f"{by:.0f}"], words, f"{low:g} to {high:g} umol/kg",
             together=True)
    ]  # fmt: skip
