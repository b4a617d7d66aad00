"""Dissolved oxygen against what the water can hold."""

from __future__ import annotations

from typing import TYPE_CHECKING

import gsw
import numpy as np

from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import neighbours, plausible, unlike
from pipeline.findings import Severity
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]

_NAME = "oxygen-saturation"
_OXYGENS = ("bottle_oxygen", "ctd_oxygen")
# dbar that count as the surface.
SURFACE = 15.0
# % by which a low surface value has to differ from all its neighbours: ice, upwelling and winter are seen by several.
_ALONE = 15.0
# Casts by which the surface of a cruise is judged.
_FEWEST_CASTS = 5


def solubility(data: Rows) -> FloatArray:
    """Return oxygen at equilibrium with the air, umol/kg, (n_row,), NaN where salinity or temperature is missing.

    Garcia and Gordon 1992, eq. 8, with the coefficients of Benson and Krause, at potential temperature.
    """
    water = hydrography(data)
    return np.asarray(gsw.O2sol_SP_pt(water.salinity, water.potential_temperature), dtype=np.float64)


def oxygen_saturation(data: Rows, settings: Settings) -> list[Mark]:
    """Oxygen below zero, far above saturation, or at the surface far from it."""
    checks = settings.checks
    if not any(name in data.names for name in _OXYGENS):
        return []
    marks = []
    for name in _OXYGENS:
        if name in data.names:
            marks += _negative(data, name, checks.negative_oxygen)
    holds = solubility(data)
    saturations = {name: 100.0 * plausible(data, name) / holds for name in _OXYGENS if name in data.names}
    for name, saturation in saturations.items():
        others = [values for other, values in saturations.items() if other != name]
        marks += _supersaturated(data, name, saturation, others, settings)
        marks += _surface(data, name, saturation, checks.surface_saturation)
    return marks


def _negative(data: Rows, name: str, below_zero: float) -> list[Mark]:
    values = data.usable(name)
    limits = REGISTRY[name].plausible
    # Further out is garbage, of which another check tells.
    garbage = -np.inf if limits is None else limits[0] - (limits[1] - limits[0])
    with np.errstate(invalid="ignore"):
        rows = np.flatnonzero((values < -below_zero) & (values >= garbage))
    if not len(rows):
        return []
    return [
        Mark(
            _NAME, Severity.FAULT, name, rows, values[rows].tolist(), "is {value} umol/kg",
            f"at least -{below_zero:g} umol/kg: water without oxygen reads nearly zero",
        )
    ]  # fmt: skip


def _supersaturated(
    data: Rows, name: str, saturation: FloatArray, others: list[FloatArray], settings: Settings
) -> list[Mark]:
    """Return a doubt of what no neighbour and no second measurement supports: a bloom is seen by more than one."""
    most, usual = settings.checks.supersaturation, settings.checks.surface_saturation[1]
    with np.errstate(invalid="ignore"):
        rows = np.flatnonzero(saturation > most)
        if not len(rows):
            return []
        supported = np.any(neighbours(data, saturation, rows) > usual, axis=1)
        for other in others:
            supported |= other[rows] > usual
    rows = rows[~supported]
    if not len(rows):
        return []
    values = [f"{oxygen:g} umol/kg, {part:.0f} %" for oxygen, part in
              zip(data.floats(name)[rows], saturation[rows], strict=True)]  # fmt: skip
    words = "is {value} of what the water holds at its temperature and salinity, and no sample beside it is like that"
    return [Mark(_NAME, Severity.DOUBT, name, rows, values, words, f"at most {most:g} %")]


def _surface(data: Rows, name: str, saturation: FloatArray, usual: tuple[float, float]) -> list[Mark]:
    pressure = hydrography(data).pressure
    with np.errstate(invalid="ignore"):
        surface = (pressure <= SURFACE) & ~np.isnan(saturation)
        low = surface & (saturation < usual[0])
    marks = []
    if low.any():
        with np.errstate(invalid="ignore"):
            rows = np.flatnonzero(low)
            rows = rows[unlike(saturation[rows], neighbours(data, saturation, rows)) > _ALONE]
        if len(rows):
            values = [f"{part:.0f} %" for part in saturation[rows]]
            words = "is {value} of saturation at the surface, and no sample beside it is like that"
            marks.append(
                Mark(_NAME, Severity.DOUBT, name, rows, values, words, f"{usual[0]:g} to {usual[1]:g} %")
            )
    rows = np.flatnonzero(surface)
    if len(np.unique(data.casts[rows])) >= _FEWEST_CASTS:
        middle = float(np.median(saturation[rows]))
        if not usual[0] <= middle <= usual[1]:
            words = (
                f"is {{value}} % of saturation in the median of {len(rows)} surface values; sea ice, upwelling or a"
                " bloom can do that, and so can a wrong calibration or unit"
            )
            limit = f"{usual[0]:g} to {usual[1]:g} %"
            marks.append(
                Mark(_NAME, Severity.NOTE, name, rows, [f"{middle:.0f}"], words, limit, together=True)
            )
    return marks
