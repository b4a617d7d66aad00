"""One quantity of a cast against the deep water of the casts around it, at the same density."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import gsw
import numpy as np

from pipeline.checking.covariance import SIGMA
from pipeline.checking.figures import named, plain, unit_of
from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import plausible
from pipeline.checking.track import nautical_miles
from pipeline.findings import Severity

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import CheckSettings, Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

_NAME = "cast-offset"
_DEEP = 1000.0  # dbar
_NO_OCEAN = 1e6
# What is compared, and whether its offsets are counted as a part of it or in its unit.
_JUDGED = {"nitrate": True, "nitrate_plus_nitrite": True, "phosphate": True, "silicate": True, "dic": False,
           "alkalinity": False}  # fmt: skip
# The casts around one, as they stand in the list, and how near they have to be (nautical miles; our choice).
_STEPS = (-2, -1, 1, 2)
_NEAR = 300.0
# Of these casts so many have to agree, and of a cruise so many have to be known (our choice, no source).
_FEWEST_AGREEING, _FEWEST_CASTS = 3, 6
# Times by which oxygen or temperature may depart with a quantity, in the same measure, where it is no other water.
_WATER = 0.5
# A quantity so many times that of the casts around it is no water's, and its values are doubted (our choice).
_TIMES = 3.0
_MOST_TOLD = 5
_CAST = 1e4  # a cast's place on an axis of potential densities


@dataclass(frozen=True, slots=True)
class _Deep:
    """The deep samples of a cruise, by cast and density, (n_deep,) each."""

    rows: IntArray
    cast: IntArray
    density: FloatArray  # sigma2, kg/m3
    latitude: FloatArray
    longitude: FloatArray

    def kept(self, keep: NDArray[np.bool_]) -> _Deep:
        """Return the samples where ``keep`` is true."""
        return _Deep(*(part[keep] for part in (self.rows, self.cast, self.density, self.latitude, self.longitude)))


@dataclass(frozen=True, slots=True)
class _Offsets:
    """By how much each cast with a quantity differs from those around it, (n_cast,) each; NaN where unknown."""

    deep: _Deep
    place: IntArray  # (n_deep,) of each sample among the casts
    offset: FloatArray  # on which the casts around agree
    middle: FloatArray  # as these see it in the median
    factor: FloatArray
    measure: float  # robust standard deviation of what casts of this cruise differ by


def cast_offset(data: Rows, settings: Settings) -> list[Mark]:
    """Nutrients or carbon of a cast that are all too high or too low for the deep water of the casts around it.

    Compared at the same potential density with two casts on each side, of which nearly all have to agree; not
    where oxygen or temperature departs as well, for then the water is another.
    """
    names = [name for name in _JUDGED if name in data.names]
    if not data.is_bottle or not names:
        return []
    deep = _deep(data)
    marks: list[Mark] = []
    witnesses: list[_Offsets] | None = None
    for name in names:
        found = _offsets(deep, data.usable(name), settings.checks, screen=_least(data, deep, name, settings.checks))
        if found is None:
            continue
        if witnesses is None:
            witnesses = [w for w in (_offsets(deep, v, settings.checks) for v in _of_the_water(data)) if w is not None]
        marks += _told(data, name, found, witnesses, settings.checks)
    return marks


def _deep(data: Rows) -> _Deep:
    """Return the deep samples whose density is known, cast after cast, from the light down to the dense."""
    water = hydrography(data)
    with np.errstate(invalid="ignore"):
        rows = np.flatnonzero(water.pressure >= _DEEP)
    density = gsw.sigma2(water.absolute_salinity[rows], water.conservative_temperature[rows])
    known = ~np.isnan(density)
    rows, density = rows[known], density[known]
    order = np.lexsort((rows, density, data.casts[rows]))
    rows = rows[order]
    return _Deep(rows, data.casts[rows], density[order], data.floats("latitude")[rows], data.floats("longitude")[rows])


def _of_the_water(data: Rows) -> list[FloatArray]:
    """Return what tells one water from another whatever was measured of it: oxygen, and temperature."""
    ctd = plausible(data, "ctd_oxygen")
    oxygen = plausible(data, "bottle_oxygen") if np.isnan(ctd).all() else ctd
    return [oxygen, hydrography(data).conservative_temperature]


def _least(data: Rows, deep: _Deep, name: str, checks: CheckSettings) -> float:
    """Return the smallest offset that is told of, in the unit of the quantity."""
    limit: float = getattr(checks.cast_offset, name)
    values = data.usable(name)[deep.rows]
    values = values[np.abs(values) < _NO_OCEAN]
    return limit * abs(float(np.median(values))) if _JUDGED[name] and len(values) else limit


def _offsets(deep: _Deep, values: FloatArray, checks: CheckSettings, screen: float = 0.0) -> _Offsets | None:
    """Return how casts differ from those around them; None where nothing does by ``screen``, or too few are known."""
    with np.errstate(invalid="ignore"):
        some = deep.kept(np.abs(values[deep.rows]) < _NO_OCEAN)
    count = np.bincount(some.cast)
    some = some.kept(count[some.cast] >= checks.cast_offset_samples)
    casts, first, place = np.unique(some.cast, return_index=True, return_inverse=True)
    if len(casts) < _FEWEST_CASTS:
        return None
    here = values[some.rows]
    there = np.stack([_at(place + step, place, some, here, first) for step in _STEPS])
    away = here - there
    if screen and not _any(away[1:3], place, len(casts), screen / 2):
        return None
    medians = np.stack([_medians(place, part, len(casts), checks.cast_offset_samples) for part in away])
    with np.errstate(invalid="ignore", divide="ignore"):
        factors = np.stack([_medians(place, here / part, len(casts), checks.cast_offset_samples) for part in there])
    known = medians[~np.isnan(medians)]
    if not len(known):
        return None
    measure = SIGMA * float(np.median(np.abs(known)))
    return _Offsets(some, place, _agreed(medians), _middle(medians), _middle(factors), measure)


def _at(other: IntArray, place: IntArray, deep: _Deep, values: FloatArray, first: IntArray) -> FloatArray:
    """Return what another cast has at the density of each sample, (n_deep,), NaN outside its densities."""
    there = (other >= 0) & (other < len(first))
    row = first[np.clip(other, 0, len(first) - 1)]
    miles = nautical_miles(deep.latitude, deep.longitude, deep.latitude[row], deep.longitude[row])
    axis = place * _CAST + deep.density
    below = np.searchsorted(axis, other * _CAST + deep.density)
    above, below = np.maximum(below - 1, 0), np.minimum(below, len(axis) - 1)
    with np.errstate(invalid="ignore"):
        there &= (place[above] == other) & (place[below] == other) & (miles <= _NEAR)
    span = deep.density[below] - deep.density[above]
    part = np.where(span > 0, (deep.density - deep.density[above]) / np.where(span > 0, span, 1.0), 0.5)
    return np.where(there, (1.0 - part) * values[above] + part * values[below], np.nan)


def _any(away: FloatArray, place: IntArray, n_cast: int, least: float) -> bool:
    """Return whether the mean of any cast differs from both that stand beside it the same way by so much."""
    known = ~np.isnan(away)
    means = []
    for part, there in zip(away, known, strict=True):
        count = np.bincount(place[there], minlength=n_cast)
        total = np.bincount(place[there], part[there], minlength=n_cast)
        means.append(np.divide(total, count, out=np.zeros(n_cast), where=count > 0))
    # where one of the two is off as well, the other tells
    return bool(np.any(np.abs(np.stack(means)) > least))


def _medians(place: IntArray, values: FloatArray, n_cast: int, fewest: int) -> FloatArray:
    """Return the median of each cast, (n_cast,), NaN where it has too few values."""
    known = np.isfinite(values)
    place, values = place[known], values[known]
    order = np.lexsort((values, place))
    ordered = values[order]
    count = np.bincount(place, minlength=n_cast)
    start = np.cumsum(count) - count
    middle = np.full(n_cast, np.nan)
    many = np.flatnonzero(count >= fewest)
    lower, upper = start[many] + (count[many] - 1) // 2, start[many] + count[many] // 2
    middle[many] = (ordered[lower] + ordered[upper]) / 2
    return middle


def _agreed(medians: FloatArray) -> FloatArray:
    """Return the offset on which the casts around each agree, (n_cast,), 0 where they do not; from (n_step, n_cast).

    All but one have to see it, on both sides: then neither a front nor a slope along the section makes it, nor
    does a second cast with the same fault hide it.
    """
    known = (~np.isnan(medians)).sum(axis=0)
    both = ~np.isnan(medians[:2]).all(axis=0) & ~np.isnan(medians[2:]).all(axis=0)
    up = np.sort(np.where(medians > 0, medians, 0.0), axis=0)
    down = np.sort(np.where(medians < 0, -medians, 0.0), axis=0)
    # the last but _FEWEST_AGREEING of those in order of size is seen by so many
    seen = up[-_FEWEST_AGREEING] - down[-_FEWEST_AGREEING]
    return np.where((known >= _FEWEST_AGREEING) & both, seen, np.nan)


def _middle(seen: FloatArray) -> FloatArray:
    """Return the median of what is seen from the casts around, (n_cast,), from (n_step, n_cast); NaN for none."""
    count = (~np.isnan(seen)).sum(axis=0)
    ordered = np.sort(seen, axis=0)  # NaN last
    cast = np.arange(seen.shape[1])
    lower, upper = ordered[np.maximum(count - 1, 0) // 2, cast], ordered[np.minimum(count // 2, len(seen) - 1), cast]
    return np.asarray((lower + upper) / 2)


def _told(data: Rows, name: str, found: _Offsets, witnesses: list[_Offsets], checks: CheckSettings) -> list[Mark]:
    limit: float = getattr(checks.cast_offset, name)
    level = _medians(found.place, data.usable(name)[found.deep.rows], len(found.offset), 1)
    least = limit * np.abs(level - np.nan_to_num(found.offset)) if _JUDGED[name] else np.full(len(level), limit)
    size = np.abs(found.offset) / found.measure if found.measure > 0 else np.full(len(level), np.inf)
    with np.errstate(invalid="ignore"):
        off = np.flatnonzero((np.abs(found.offset) > least) & (size > checks.cast_offset_sigma))
    marks = []
    for i in off.tolist():
        rows = found.deep.rows[found.place == i]
        if not any(_departs(other, int(data.casts[rows[0]]), float(size[i])) for other in witnesses):
            marks.append(_mark(data, name, rows, float(found.middle[i]), float(found.factor[i]), limit, checks))
    notes = [mark for mark in marks if not mark.doubts]
    if len(notes) > _MOST_TOLD:
        marks = [mark for mark in marks if mark.doubts] + [_many(data, notes)]
    return marks


def _departs(other: _Offsets, cast: int, size: float) -> bool:
    """Return whether another quantity of a cast is off by nearly as much, in the measure of the cruise's casts."""
    at = other.place[other.deep.cast == cast]
    offset = float(other.offset[at[0]]) if len(at) else 0.0
    return bool(abs(offset) > _WATER * size * other.measure) if np.isfinite(size) else bool(offset)


def _mark(
    data: Rows, name: str, rows: IntArray, by: float, factor: float, limit: float, checks: CheckSettings
) -> Mark:
    station, cast = (data.table.column(column)[int(rows[0])].as_py() for column in ("station", "cast"))
    around = f"around it at the same density, in the median of {len(rows)} samples below {_DEEP:g} dbar"
    allowed = f"{100 * limit:g} %" if _JUDGED[name] else f"{limit:g} {unit_of(name)}"
    where = f"of station {station} cast {cast}"
    if not 1 / _TIMES < factor < _TIMES and np.isfinite(factor):
        whole = np.flatnonzero((data.casts == data.casts[rows[0]]) & ~np.isnan(data.usable(name)))
        times = f"{plain(factor)} times" if factor > 1 else f"1/{plain(1 / factor)} of"
        outcome = "" if checks is None else "its values are not used"
        return Mark(
            _NAME, Severity.DOUBT, name, whole, [times], f"{where} is {{value}} that of the casts {around}",
            f"within {allowed} of it", together=True, outcome=outcome,
        )  # fmt: skip
    part = f" ({100 * abs(factor - 1):.1f} %)" if np.isfinite(factor) else ""
    value = f"{plain(abs(by))} {unit_of(name)}{part} {'higher' if by > 0 else 'lower'}"
    return Mark(
        _NAME, Severity.NOTE, name, np.sort(rows), [value],
        f"{where} is {{value}} than in the casts {around}, where oxygen and temperature are not otherwise",
        f"within {allowed}", together=True,
    )  # fmt: skip


def _many(data: Rows, notes: list[Mark]) -> Mark:
    """Return one note for the offsets of many casts."""
    rows = np.concatenate([mark.rows for mark in notes])
    stations = [str(data.table.column("station")[int(mark.rows[0])].as_py()) for mark in notes]
    more = f" and {len(notes) - _MOST_TOLD} more"
    words = (
        f"of {len(notes)} casts (stations {named(stations[:_MOST_TOLD])}{more}) differs from the casts around at the"
        " same density, by {value} and so on, where oxygen and temperature are not otherwise"
    )
    return Mark(_NAME, Severity.NOTE, notes[0].variable, rows, notes[0].values, words, notes[0].limit, together=True)
