"""One quantity of a cast against the deep water of the casts around it, at the same density."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import gsw
import numpy as np

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
    BoolArray = NDArray[np.bool_]
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
# Part of the smallest offset that has to show in the means, before medians are asked.
_PART_SEEN = 0.8
# Standard deviations of a normal distribution within which a quarter of it lies.
_QUARTER = 0.3186
_CAST = 1e4  # a cast's place on an axis of potential densities


@dataclass(frozen=True, slots=True)
class _Deep:
    """The deep samples of a cruise, by cast and density, (n_deep,) each."""

    rows: IntArray
    cast: IntArray
    density: FloatArray  # sigma2, kg/m3

    def kept(self, keep: BoolArray) -> _Deep:
        """Return the samples where ``keep`` is true."""
        return _Deep(self.rows[keep], self.cast[keep], self.density[keep])


@dataclass(frozen=True, slots=True)
class _Around:
    """Where the deep samples of casts lie in the casts around theirs: between two samples of that cast.

    ``above`` and ``below`` are positions, ``part`` says how far it is from the one to the other, NaN where there
    is nothing; (n_step, n_deep) each.
    """

    deep: _Deep
    place: IntArray  # (n_deep,), of each sample among the n_cast casts
    casts: IntArray  # (n_cast,)
    above: IntArray
    below: IntArray
    part: FloatArray

    def seen_from(self, values: FloatArray) -> FloatArray:
        """Return what the casts around have at the density of each sample, (n_step, n_deep), from (n_deep,)."""
        return (1.0 - self.part) * values[self.above] + self.part * values[self.below]


@dataclass(frozen=True, slots=True)
class _Offsets:
    """By how much each cast with a quantity differs from those around it, (n_cast,) each; NaN where unknown."""

    around: _Around
    there: FloatArray  # what those have at the density of each sample, (n_step, n_deep)
    offset: FloatArray  # on which they agree
    measure: float  # robust standard deviation of what casts of this cruise differ by


def cast_offset(data: Rows, settings: Settings) -> list[Mark]:
    """Nutrients or carbon of a cast that are all too high or too low for the deep water of the casts around it.

    Compared at the same potential density with two casts on each side, of which nearly all have to agree; not
    where oxygen or temperature departs as well, for then the water is another.
    """
    names = [name for name in _JUDGED if name in data.names]
    if not data.is_bottle or not names:
        return []
    compared = _Compared(data, settings.checks)
    marks: list[Mark] = []
    for name in names:
        marks += _told(data, name, compared, settings)
    return marks


class _Compared:
    """The deep water of a cruise: what of it was compared is kept, for quantities are sampled together."""

    def __init__(self, data: Rows, checks: CheckSettings) -> None:
        self.data, self.checks = data, checks
        self.deep = _deep(data)
        self._around: dict[bytes, _Around | None] = {}

    def offsets(self, values: FloatArray, least: FloatArray | None = None) -> _Offsets | None:
        """Return how casts differ from those around them; None where too few are known, or none by the ``least``.

        Parameters
        ----------
        values
            The quantity, (n_row,).
        least
            Smallest offsets that matter beside each deep sample, (n_deep,).

        """
        with np.errstate(invalid="ignore"):
            known = np.abs(values[self.deep.rows]) < _NO_OCEAN
        around = self._of(known)
        if around is None:
            return None
        here = values[around.deep.rows]
        there = around.seen_from(here)
        n_cast, fewest = len(around.casts), self.checks.cast_offset_samples
        if least is not None and not _any(
            here - there, around.place, n_cast, _PART_SEEN * float(np.nanmean(least))
        ):
            return None
        medians = np.stack([_medians(around.place, here - part, n_cast, fewest) for part in there])
        sizes = np.abs(medians[~np.isnan(medians)])
        if not len(sizes):
            return None
        # from the quarter that differs least: many casts may be off
        measure = float(np.quantile(sizes, 0.25)) / _QUARTER
        return _Offsets(around, there, _agreed(medians), measure)

    def _of(self, known: BoolArray) -> _Around | None:
        key = known.tobytes()
        if key not in self._around:
            self._around[key] = _around(self.data, self.deep.kept(known), self.checks)
        return self._around[key]


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
    return _Deep(rows, data.casts[rows], density[order])


def _of_the_water(data: Rows) -> dict[str, FloatArray]:
    """Return what tells one water from another whatever was measured of it: oxygen, and temperature."""
    ctd = plausible(data, "ctd_oxygen")
    oxygen = plausible(data, "bottle_oxygen") if np.isnan(ctd).all() else ctd
    return {"oxygen": oxygen, "temperature": hydrography(data).conservative_temperature}


def _least(name: str, values: FloatArray, checks: CheckSettings) -> FloatArray:
    """Return the smallest offset that is told of beside values, in the unit of the quantity, (n,)."""
    limit: float = getattr(checks.cast_offset, name)
    if not _JUDGED[name]:
        return np.full(len(values), limit)
    smallest: float = getattr(checks.misfit_floor, name)
    return np.fmax(limit * np.abs(values), smallest / 2)


def _around(data: Rows, some: _Deep, checks: CheckSettings) -> _Around | None:
    """Return where samples lie in the casts around theirs; None where too few casts have enough of them."""
    count = np.bincount(some.cast)
    some = some.kept(count[some.cast] >= checks.cast_offset_samples)
    casts, first, place = np.unique(some.cast, return_index=True, return_inverse=True)
    if len(casts) < _FEWEST_CASTS:
        return None
    axis = place * _CAST + some.density
    steps = np.array(_STEPS)[:, None]
    other = place + steps
    below = np.searchsorted(axis, other * _CAST + some.density)
    above, below = np.maximum(below - 1, 0), np.minimum(below, len(axis) - 1)
    there = (place[above] == other) & (place[below] == other)
    there &= _near(data, some.rows[first])[:, place]
    span = some.density[below] - some.density[above]
    part = np.where(span > 0, (some.density - some.density[above]) / np.where(span > 0, span, 1.0), 0.5)
    return _Around(some, place, casts, above, below, np.where(there, part, np.nan))


def _near(data: Rows, rows: IntArray) -> BoolArray:
    """Return whether the casts so many steps away lie near, (n_step, n_cast); ``rows`` has one of each cast."""
    latitude, longitude = data.floats("latitude")[rows], data.floats("longitude")[rows]
    other = np.clip(np.arange(len(rows)) + np.array(_STEPS)[:, None], 0, len(rows) - 1)
    here = np.broadcast_to(np.arange(len(rows)), other.shape)
    miles = nautical_miles(latitude[here], longitude[here], latitude[other], longitude[other])
    with np.errstate(invalid="ignore"):
        return np.asarray(miles <= _NEAR)


def _any(away: FloatArray, place: IntArray, n_cast: int, least: float) -> bool:
    """Return whether any cast differs in the mean by so much, to one side, from both next to it or both beyond them.

    Of those that agree on an offset, two stand at the same distance on the two sides.
    """
    n_step = len(away)
    known = ~np.isnan(away)
    at = (place + n_cast * np.arange(n_step)[:, None])[known]
    count = np.bincount(at, minlength=n_step * n_cast)
    total = np.bincount(at, away[known], minlength=n_step * n_cast)
    means = np.divide(total, count, out=np.zeros(n_step * n_cast), where=count > 0).reshape(n_step, n_cast)
    left, right = means[: n_step // 2], means[: n_step // 2 - 1 : -1]
    return bool(np.any((left * right > 0) & (np.minimum(np.abs(left), np.abs(right)) > least)))


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


def _told(data: Rows, name: str, compared: _Compared, settings: Settings) -> list[Mark]:
    values, checks = data.usable(name), settings.checks
    found = compared.offsets(values, _least(name, values[compared.deep.rows], checks))
    if found is None:
        return []
    around = found.around
    level = _medians(around.place, values[around.deep.rows], len(around.casts), 1)
    least = _least(name, level - np.nan_to_num(found.offset), checks)
    size = np.abs(found.offset) / found.measure if found.measure > 0 else np.full(len(level), np.inf)
    with np.errstate(invalid="ignore"):
        off = np.flatnonzero((np.abs(found.offset) > least) & (size > checks.cast_offset_sigma))
    if not len(off):
        return []
    water = {what: compared.offsets(these) for what, these in _of_the_water(data).items()}
    marks = []
    for i in off.tolist():
        cast = around.casts[i]
        known = {
            what: other for what, other in water.items() if other is not None and cast in other.around.casts
        }
        if known and not any(_departs(other, cast, float(size[i])) for other in known.values()):
            marks.append(_mark(data, name, found, i, list(known), settings))
    notes = [mark for mark in marks if not mark.doubts]
    if len(notes) > _MOST_TOLD:
        marks = [mark for mark in marks if mark.doubts] + [_many(data, notes)]
    return marks


def _departs(other: _Offsets, cast: int, size: float) -> bool:
    """Return whether another quantity of a cast is off by nearly as much, in the measure of the cruise's casts."""
    offset = float(other.offset[np.searchsorted(other.around.casts, cast)])
    return bool(abs(offset) > _WATER * size * other.measure) if np.isfinite(size) else bool(offset)


def _mark(data: Rows, name: str, found: _Offsets, place: int, known: list[str], settings: Settings) -> Mark:
    here = found.around.place == place
    rows, there = found.around.deep.rows[here], found.there[:, here]
    values = data.usable(name)[rows]
    by = float(np.nanmedian(values - there))
    ratios = np.divide(values, there, out=np.full(there.shape, np.nan), where=there != 0.0)
    factor = float(np.median(ratios[~np.isnan(ratios)])) if not np.isnan(ratios).all() else np.nan
    limit: float = getattr(settings.checks.cast_offset, name)
    station, cast = (data.table.column(column)[int(rows[0])].as_py() for column in ("station", "cast"))
    around = f"around it at the same density, in the median of {len(rows)} samples below {_DEEP:g} dbar"
    allowed = f"{100 * limit:g} %" if _JUDGED[name] else f"{limit:g} {unit_of(name)}"
    where = f"of station {station} cast {cast}"
    if not 1 / _TIMES < factor < _TIMES and np.isfinite(factor):
        whole = np.flatnonzero((data.casts == data.casts[rows[0]]) & ~np.isnan(data.usable(name)))
        times = f"{plain(factor)} times" if factor > 1 else f"1/{plain(1 / factor)} of"
        outcome = "" if settings.use.doubtful else "its values are not used"
        return Mark(
            _NAME, Severity.DOUBT, name, whole, [times], f"{where} is {{value}} that of the casts {around}",
            f"within {allowed} of it", together=True, outcome=outcome,
        )  # fmt: skip
    verb = "agree" if len(known) > 1 else "agrees"
    part = f" ({100 * abs(factor - 1):.1f} %)" if np.isfinite(factor) else ""
    value = f"{plain(abs(by))} {unit_of(name)}{part} {'higher' if by > 0 else 'lower'}"
    return Mark(
        _NAME, Severity.NOTE, name, np.sort(rows), [value],
        f"{where} is {{value}} than in the casts {around}, where {named(known)} {verb}",
        f"within {allowed}", together=True,
    )  # fmt: skip


def _many(data: Rows, notes: list[Mark]) -> Mark:
    """Return one note for the offsets of many casts."""
    rows = np.concatenate([mark.rows for mark in notes])
    stations = [str(data.table.column("station")[int(mark.rows[0])].as_py()) for mark in notes]
    more = f" and {len(notes) - _MOST_TOLD} more"
    words = (
        f"of {len(notes)} casts (stations {named(stations[:_MOST_TOLD])}{more}) differs from the casts around at the"
        " same density, by {value} and so on, where oxygen or temperature agree"
    )
    return Mark(
        _NAME, Severity.NOTE, notes[0].variable, rows, notes[0].values, words, notes[0].limit, together=True
    )
