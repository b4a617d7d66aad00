"""Density that does not increase downwards."""

from __future__ import annotations

from typing import TYPE_CHECKING

import gsw
import numpy as np

from pipeline import seawater
from pipeline.checking.figures import beyond
from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import plausible
from pipeline.checking.profiles import limit_at
from pipeline.findings import Severity
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from pipeline.checking.hydrography import Hydrography
    from pipeline.settings import CheckSettings, Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

# Inversions of a cast, and part of its pairs that go the wrong way, where its pressures may stand in reverse (our
# choice, no source).
_FEWEST_TURNED, _MOSTLY = 5, 0.8


def density_inversion(data: Rows, settings: Settings) -> list[Mark]:
    """Water that is heavier than what lies under it, by potential density referred midway between the two.

    Of the pair, the one is doubted that is out of order with the next level beyond as well; both, where that
    does not tell. Its temperature and salinity are doubted, and the bottle's salinity alone where the CTD's
    puts the pair in order.
    """
    checks = settings.checks
    water = hydrography(data)
    known = ~np.isnan(water.conservative_temperature) & ~np.isnan(plausible(data, "temperature"))
    lowest, highest = REGISTRY["ctd_salinity"].plausible or (0.0, np.inf)
    known &= (water.salinity >= lowest) & (water.salinity <= highest)
    levels = water.order[known[water.order]]
    if len(levels) < 2:
        return []
    pair = levels[:-1], levels[1:]
    excess = inversion(water.absolute_salinity, water.conservative_temperature, water.pressure, *pair)
    most = _limit(data, water, pair[1], checks)
    apart = water.pressure[pair[1]] - water.pressure[pair[0]]
    paired = (data.casts[pair[0]] == data.casts[pair[1]]) & (
        apart > (checks.same_level if data.is_bottle else 0.0)
    )
    found = np.flatnonzero(paired & (excess > most))
    if not len(found):
        return []
    size, limit = excess[found], most[found]
    upper, lower = _culprits(data, water, levels, found, checks)
    turned = _turned(data, water, levels, found)
    salinity_alone = _in_order_by_ctd(data, water, pair[0][found], pair[1][found], limit)
    marks = _upside_down(data, levels, turned)
    told = ~np.isin(data.casts[pair[0][found]], [cast for cast, _, _ in turned])
    for alone in (False, True):
        chosen = np.flatnonzero(told & (salinity_alone == alone))
        names = ("bottle_salinity",) if alone else ("temperature", "bottle_salinity", "ctd_salinity")
        ends = [
            (row, beside, place)
            for place in chosen.tolist()
            for doubted, row, beside in (
                (upper[place], pair[0][found[place]], pair[1][found[place]]),
                (lower[place], pair[1][found[place]], pair[0][found[place]]),
            )
            if doubted
        ]
        marks += _marks(data, water, names, ends, size, limit)
    return marks


def _marks(
    data: Rows,
    water: Hydrography,
    names: Sequence[str],
    ends: Sequence[tuple[int, int, int]],
    size: FloatArray,
    limit: FloatArray,
) -> list[Mark]:
    """Return doubts of the levels of inverted pairs: a row, the other of its pair, and the place of the pair."""
    of_names: dict[tuple[str, ...], list[tuple[int, int, int]]] = {}
    delivered = [(name, data.usable(name)) for name in names if name in data.names]
    for row, beside, place in ends:
        there = tuple(name for name, values in delivered if not np.isnan(values[row]))
        if there:
            of_names.setdefault(there, []).append((row, beside, place))
    marks = []
    for there, members in of_names.items():
        rows, beside, places = np.array(members, dtype=np.int64).T
        figures = [beyond(float(size[i]), float(limit[i])) for i in places.tolist()]
        between = [np.sort(water.pressure[[row, other]]) for row, other, _ in members]
        marks.append(
            Mark(
                "density-inversion", Severity.DOUBT, there[0], rows,
                [f"{by} kg/m3 between {a:g} and {b:g} dbar" for (by, _), (a, b) in zip(figures, between, strict=True)],
                f"{'are' if len(there) > 1 else 'is'} part of a density inversion of {{value}}",
                [f"at most {most} kg/m3" for _, most in figures],
                also=there[1:], groups=places if data.is_bottle else None, beside=beside,
            )
        )  # fmt: skip
    return marks


def _turned(data: Rows, water: Hydrography, levels: IntArray, found: IntArray) -> list[tuple[int, int, int]]:
    """Return the casts of bottles whose density goes the wrong way nearly throughout.

    Each with the number of pairs where it does, and of all.
    """
    if not data.is_bottle:
        return []
    inverted = np.bincount(data.casts[levels[found]])
    turned: list[tuple[int, int, int]] = []
    for cast in np.flatnonzero(inverted >= _FEWEST_TURNED).tolist():
        rows = levels[data.casts[levels] == cast]
        reference = np.full(len(rows), float(np.median(water.pressure[rows])))
        density = _density(water.absolute_salinity[rows], water.conservative_temperature[rows], reference)
        lighter = int(np.count_nonzero(np.diff(density) < 0))
        if lighter > _MOSTLY * (len(rows) - 1):
            turned.append((cast, lighter, len(rows) - 1))
    return turned


def _upside_down(data: Rows, levels: IntArray, turned: Sequence[tuple[int, int, int]]) -> list[Mark]:
    """Return a doubt of the pressures of each cast that is turned."""
    marks = []
    for cast, inverted, pairs in turned:
        rows = np.sort(levels[data.casts[levels] == cast])
        station, number = (data.table.column(name)[int(rows[0])].as_py() for name in ("station", "cast"))
        words = (
            f"of station {station} cast {number} seems to stand in reverse order: in {{value}} pairs of levels"
            " the upper water is the heavier"
        )
        limit = "density that increases downwards, as it does with the pressures the other way round"
        marks.append(
            Mark(
                "density-inversion", Severity.DOUBT, "pressure", rows, [f"{inverted} of {pairs}"], words, limit,
                together=True,
            )
        )  # fmt: skip
    return marks


def inversion(
    salinity: FloatArray, heat: FloatArray, pressure: FloatArray, upper: IntArray, lower: IntArray
) -> FloatArray:
    """Return by how much upper levels are heavier than lower ones, kg/m3, (n_pair,), negative where lighter.

    Potential density is referred to the pressure midway between the two. Referred to the surface, deep water
    can seem unstable that is not, and the other way about.

    Parameters
    ----------
    salinity, heat, pressure
        Absolute Salinity (g/kg), Conservative Temperature (degC), sea pressure (dbar), (n_row,).
    upper, lower
        Rows of the pairs, (n_pair,).

    References
    ----------
    Argo quality control manual, doi 10.13155/33951, test 14.

    """
    midway = 0.5 * (pressure[upper] + pressure[lower])
    above, below = (_density(salinity[rows], heat[rows], midway) for rows in (upper, lower))
    return np.asarray(above - below)


def _density(salinity: FloatArray, heat: FloatArray, pressure: FloatArray) -> FloatArray:
    """Return potential density, kg/m3, (n,), NaN outside the bounds of the equation of state."""
    known = (
        seawater.ABSOLUTE_SALINITY.holds(salinity)
        & seawater.TEMPERATURE.holds(heat)
        & seawater.PRESSURE.holds(pressure)
    )
    found = np.full(len(salinity), np.nan)
    if known.any():
        found[known] = gsw.rho(salinity[known], heat[known], pressure[known])
    return found


def _limit(data: Rows, water: Hydrography, rows: IntArray, checks: CheckSettings) -> FloatArray:
    if not data.is_bottle:
        return np.full(len(rows), checks.inversion_ctd)
    return limit_at(checks.inversion_bottle, water.pressure[rows], checks)


def _culprits(
    data: Rows, water: Hydrography, levels: IntArray, found: IntArray, checks: CheckSettings
) -> tuple[BoolArray, BoolArray]:
    """Return whether the upper and whether the lower level of each inverted pair is doubted, (n_found,) each."""

    def inverted(upper: IntArray, lower: IntArray) -> BoolArray:
        there = (upper >= 0) & (lower < len(levels))
        up, low = levels[np.maximum(upper, 0)], levels[np.minimum(lower, len(levels) - 1)]
        there &= data.casts[up] == data.casts[low]
        size = inversion(water.absolute_salinity, water.conservative_temperature, water.pressure, up, low)
        return np.asarray(there & (size > 0.5 * _limit(data, water, low, checks)))

    across_lower = inverted(found, found + 2)  # the upper is too heavy for the next as well
    across_upper = inverted(found - 1, found + 1)  # the lower is too light for the one before as well
    return ~(across_upper & ~across_lower), ~(across_lower & ~across_upper)


def _in_order_by_ctd(
    data: Rows, water: Hydrography, upper: IntArray, lower: IntArray, most: FloatArray
) -> BoolArray:
    """Return where the CTD's salinity in place of the bottle's puts a pair in order, (n_pair,)."""
    rows = np.concatenate([upper, lower])
    ctd = data.usable("ctd_salinity")[rows]
    bottle = ~np.isnan(data.usable("bottle_salinity")[rows])
    latitude, longitude = data.floats("latitude")[rows], data.floats("longitude")[rows]
    pressure = water.pressure[rows]
    salinity = seawater.absolute_salinity(ctd, pressure, longitude, latitude)
    heat = seawater.conservative_temperature(salinity, water.temperature[rows], pressure)
    first, second = np.arange(len(upper)), np.arange(len(upper)) + len(upper)
    excess = inversion(salinity, heat, pressure, first, second)
    return np.asarray((bottle[first] | bottle[second]) & (excess <= most))
