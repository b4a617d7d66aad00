"""Sensors and columns that repeat one value, and casts whose content was delivered twice."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import plausible
from pipeline.checking.profiles import LIMITED, ladder
from pipeline.findings import Severity
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from pipeline.checking.profiles import Ladder
    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

# Beside a repeated value, the quantity has to change by this many of its digits: where it only just does not
# change, rounding repeats it. A parabola that rounding holds for n levels changes by 4.5 digits over the next n.
_DIGITS = 10.0
# A change worth the name is this many times the usual uncertainty of the quantity (our choice, no source).
_TIMES_UNCERTAINTY = 3.0
# Where a value stands for so many times the fewest levels, or in a whole cast, what is beside it need not tell:
# another quantity has to change by this many times such a change (our choice, no source).
_LONG, _TIMES_LONG = 5, 20.0
# What is used up in the water repeats its nothing: this part of the plausible range counts as nothing.
_NOTHING = 0.04
_FINEST = 6  # decimals
_MOST_RUNS = 1000  # the longest; a column that has more is too coarse to ask
# A cast with fewer levels in common with another is no copy (our choice, no source).
_FEWEST_COPIED = 4
_WITNESSES = ("temperature", "bottle_salinity", "ctd_salinity", "bottle_oxygen", "ctd_oxygen")
_MIX = tuple(np.array([0x9E3779B97F4A7C15, 0xC2B2AE3D27D4EB4F, 0x165667B19E3779F9], dtype=np.uint64))


def stuck_values(data: Rows, settings: Settings) -> list[Mark]:
    """One value to all digits over many levels, while another quantity changes.

    Told only where the quantity changes above and below, with that other one, so much that it ought to have
    changed here by more than its last digits: a mixed layer, a homogeneous deep layer, a used-up nutrient and
    an extremum that rounding flattens repeat a value as well.
    """
    checks = settings.checks
    fewest = checks.stuck_bottles if data.is_bottle else checks.stuck_levels
    apart = checks.same_level if data.is_bottle else 0.0
    others: dict[str, FloatArray] = {}
    marks = []
    for name in LIMITED:
        if name not in data.names:
            continue
        levels = ladder(data, plausible(data, name))
        values: list[str] = []
        found: list[IntArray] = []
        digit = _last_digit(levels.values)
        for start, stop in _runs(levels, fewest):
            others = others or _witnesses(data)
            if _is_stuck(others, name, levels, start, stop, digit, fewest, apart):
                found.append(levels.rows[start:stop])
                span = f"{levels.pressure[start]:g} to {levels.pressure[stop - 1]:g} dbar"
                values += [f"{levels.values[start]:g} at {stop - start} levels from {span}"] * (stop - start)
        if found:
            limit = "values that change as the water does"
            rows = np.concatenate(found)
            run = np.repeat(np.arange(len(found)), [len(one) for one in found])
            marks.append(
                Mark("stuck-values", Severity.DOUBT, name, rows, values, "is {value}", limit, groups=run)
            )
    return marks


def copied_cast(data: Rows, settings: Settings) -> list[Mark]:
    """Casts that hold the same temperatures, salinities and oxygens as another cast."""
    hashed = _hashed(data)
    known = np.flatnonzero(hashed != 0)
    if len(known) < 2 * _FEWEST_COPIED:
        return []
    casts = data.casts
    order = known[np.lexsort((casts[known], hashed[known]))]
    twin = (np.diff(hashed[order]) == 0) & (np.diff(casts[order]) != 0)
    if not twin.any():
        return []
    pairs = np.stack([casts[order[:-1]][twin], casts[order[1:]][twin]], axis=1)
    pairs, shared = np.unique(pairs, axis=0, return_counts=True)
    size = np.bincount(casts[known], minlength=int(casts.max()) + 1)
    least = np.maximum(settings.checks.copied_share * size[pairs].min(axis=1), _FEWEST_COPIED)
    first = np.unique(casts, return_index=True)[1]
    rows, values = [], []
    for (one, other), count in zip(pairs[shared >= least], shared[shared >= least], strict=True):
        station, cast = (data.table.column(name)[int(first[one])].as_py() for name in ("station", "cast"))
        rows.append(first[other])
        values.append(f"the values of station {station} cast {cast} at {count} of {size[other]} levels")
    if not rows:
        return []
    limit = "measurements of its own in every cast"
    return [
        Mark(
            "copied-cast", Severity.DOUBT, "station", np.array(rows, dtype=np.int64), values,
            "repeats {value}", limit,
        )
    ]  # fmt: skip


def _runs(levels: Ladder, fewest: int) -> list[tuple[int, int]]:
    """Return start and stop of the runs of one value in one cast that have at least ``fewest`` levels."""
    if len(levels.rows) < fewest:
        return []
    new = np.ones(len(levels.rows), dtype=bool)
    new[1:] = (np.diff(levels.values) != 0) | (np.diff(levels.cast) != 0)
    starts = np.flatnonzero(new)
    stops = np.append(starts[1:], len(new))
    length = stops - starts
    long = np.flatnonzero(length >= fewest)
    long = np.sort(long[np.argsort(-length[long], kind="stable")][:_MOST_RUNS])
    return list(zip(starts[long].tolist(), stops[long].tolist(), strict=True))


def _is_stuck(
    others: Mapping[str, FloatArray],
    name: str,
    levels: Ladder,
    start: int,
    stop: int,
    digit: float,
    fewest: int,
    apart: float,
) -> bool:
    """Return whether levels that repeat one value ought to have changed."""
    value = float(levels.values[start])
    plausible_range = REGISTRY[name].plausible
    if plausible_range is not None and name != "temperature" and abs(value) <= _NOTHING * plausible_range[1]:
        return False
    if 1 + np.count_nonzero(np.diff(levels.pressure[start:stop]) > apart) < fewest:
        return False
    length = stop - start
    nearby = np.arange(max(start - length, 0), min(stop + length, len(levels.rows)))
    nearby = nearby[levels.cast[nearby] == levels.cast[start]]
    run = (nearby >= start) & (nearby < stop)
    sides = [side for side in (nearby < start, nearby >= stop) if side.any()]
    long = length >= _LONG * fewest
    mine = levels.values[nearby]
    least = max(_DIGITS * digit, _clear(name, value))
    if sides and not long and max(float(np.abs(mine[side] - value).max()) for side in sides) < least:
        return False
    for witness, values in others.items():
        theirs = values[levels.rows[nearby]]
        if LIMITED[witness] == LIMITED[name] or np.isnan(theirs).all():
            continue
        clear, change = _clear(witness, float(np.nanmean(theirs))), _range(theirs[run])
        if sides and change > clear and change * abs(_slope(mine, theirs, sides, clear)) > least:
            return True
        if (long or not sides) and name in _WITNESSES and change > _TIMES_LONG * clear:
            return True
    return False


def _witnesses(data: Rows) -> dict[str, FloatArray]:
    """Return the quantities that may show that the water changes, (n_row,) each."""
    found = {name: plausible(data, name) for name in _WITNESSES if name in data.names}
    if "temperature" in found:  # without the warming by pressure
        heat = hydrography(data).conservative_temperature
        found["temperature"] = np.where(np.isnan(found["temperature"]), np.nan, heat)
    return found


def _slope(mine: FloatArray, theirs: FloatArray, sides: list[BoolArray], clear: float) -> float:
    """Return how a quantity changes with another one beside a run: the mean of its sides, 0 for an unknown one.

    Signed: at an extremum the sides cancel each other.
    """
    slopes = []
    for side in sides:
        known = side & ~np.isnan(theirs)
        if np.count_nonzero(known) > 1 and _range(theirs[known]) > clear:
            away = theirs[known] - theirs[known].mean()
            slopes.append(float(away @ mine[known]) / float(away @ away))
    return sum(slopes) / len(sides)


def _range(values: FloatArray) -> float:
    known = values[~np.isnan(values)]
    return float(np.ptp(known)) if len(known) else 0.0


def _clear(name: str, value: float) -> float:
    """Return the change of a quantity that is more than its measurement's noise, in its unit."""
    uncertainty = REGISTRY[name].uncertainty
    return _TIMES_UNCERTAINTY * uncertainty.at(value) if uncertainty is not None else 0.0


def _last_digit(values: FloatArray) -> float:
    """Return the size of the last digit in which values are written."""
    some = np.abs(values[:: max(len(values) // 200, 1)])
    for decimals in range(_FINEST):
        scaled = some * 10.0**decimals
        if np.all(np.abs(scaled - np.round(scaled)) < 1e-4):
            return float(10.0**-decimals)
    return float(10.0**-_FINEST)


def _hashed(data: Rows) -> NDArray[np.uint64]:
    """Return a number for temperature, salinity and oxygen of every row together, (n_row,), 0 without both first."""
    temperature, salinity = data.floats("temperature"), _first_of(data, ("ctd_salinity", "bottle_salinity"))
    oxygen = _first_of(data, ("ctd_oxygen", "bottle_oxygen"))
    mixed = np.zeros(len(data), dtype=np.uint64)
    for values, factor in zip((temperature, salinity, np.nan_to_num(oxygen, nan=-1.0)), _MIX, strict=True):
        mixed ^= np.ascontiguousarray(values).view(np.uint64) * factor
        mixed ^= mixed >> np.uint64(29)
    return np.where(np.isnan(temperature) | np.isnan(salinity), np.uint64(0), mixed)


def _first_of(data: Rows, names: tuple[str, ...]) -> FloatArray:
    values = data.floats(names[0])
    return np.where(np.isnan(values), data.floats(names[1]), values)
