"""The bottle against the CTD that closed it: salinity and oxygen, sample by sample and cast by cast."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.figures import beyond, label, plain, signed, unit_of
from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import AFTER, BEFORE, BETWEEN, above_and_below, neighbours, plausible
from pipeline.findings import Severity

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import CheckSettings, Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]

_NAME = "bottle-against-ctd"
# Fewer pairs say nothing of a cruise, or of a cast.
_FEWEST, _FEWEST_OF_CAST = 8, 5
# Limits by which a whole cruise differs where the two are not worth comparing sample by sample.
_OTHERWISE = 50.0
# Casts with an offset of their own that are told one by one.
_MOST_CASTS_TOLD = 5
# Part of a cast's pairs that lie together where its offset is called constant.
_CONSTANT = 0.9
# Of what stands around a sample, so many have to speak against the CTD before it is doubted and not the bottle.
_WITNESSES = 2
# What each is compared with, and what else of a bottle is compared, as it is called in files.
_BESIDE = {"bottle_salinity": "ctd_salinity", "ctd_salinity": "bottle_salinity", "bottle_oxygen": "ctd_oxygen",
           "ctd_oxygen": "bottle_oxygen"}  # fmt: skip
# Doubted samples of one quantity in a cast from which they are told together (our choice, no source).
_MANY_OF_CAST = 5
_OTHER_OF = {"bottle_salinity": "OXYGEN", "bottle_oxygen": "SALNTY"}
# Scatter of a normal distribution in median absolute deviations.
_SIGMA = 1.4826
# Absolute Salinity less Practical Salinity is 0.47 % of it, and up to 0.03 g/kg more (IOC, SCOR and IAPSO 2010).
_ABSOLUTE_LESS_PRACTICAL = (0.155, 0.21)


@dataclass(frozen=True, slots=True)
class _Pairs:
    """Both values of one quantity, (n_row,) each, NaN where missing, and how far they may differ."""

    bottle: str
    ctd: str
    unit: str
    bottle_values: FloatArray
    ctd_values: FloatArray
    difference: FloatArray
    limit: FloatArray


def bottle_against_ctd(data: Rows, settings: Settings) -> list[Mark]:
    """Bottle salinity or oxygen that differs from the CTD's, unlike the cast's and the cruise's other bottles."""
    if not data.is_bottle:
        return []
    checks = settings.checks
    marks = []
    for bottle, ctd, steps in (
        ("bottle_salinity", "ctd_salinity", checks.bottle_ctd_salinity),
        ("bottle_oxygen", "ctd_oxygen", checks.bottle_ctd_oxygen),
    ):
        if bottle in data.names and ctd in data.names:
            marks += _compared(data, checks, _pairs(data, checks, bottle, ctd, steps))
    return _by_cast(data, _of_the_bottle(marks))


def _pairs(
    data: Rows, checks: CheckSettings, bottle: str, ctd: str, steps: tuple[tuple[float, float], ...]
) -> _Pairs:
    pressure = hydrography(data).pressure
    bottle_values, ctd_values = plausible(data, bottle), plausible(data, ctd)
    from_on, limits = np.array(sorted(steps), dtype=np.float64).T
    step = np.clip(np.searchsorted(from_on, pressure, side="right") - 1, 0, len(limits) - 1)
    # A bottle is flushed with water from above and below: where that differs, so may the bottle. Of the two
    # profiles the smoother one says how much: a wrong value must not excuse itself.
    beside = above_and_below(data, np.where(np.isnan(ctd_values), np.nan, pressure))
    with np.errstate(invalid="ignore", divide="ignore"):
        part = checks.bottle_ctd_reach / np.abs(beside - pressure[:, None])
    blurred = np.fmin(_blurred(data, bottle_values, part), _blurred(data, ctd_values, part))
    difference = np.where(np.isnan(pressure), np.nan, bottle_values - ctd_values)
    unit = f" {unit_of(bottle)}".rstrip()
    limit = limits[step] + blurred
    return _Pairs(bottle, ctd, unit, bottle_values, ctd_values, difference, limit)


def _blurred(data: Rows, values: FloatArray, part: FloatArray) -> FloatArray:
    """Return by how much water from ``part`` of the way to its neighbours may differ from each value, (n_row,)."""
    around = np.abs(above_and_below(data, values) - values[:, None]) * np.minimum(part, 1.0)
    return np.asarray(np.where(np.isnan(around), 0.0, around).max(axis=1, initial=0.0))


def _compared(data: Rows, checks: CheckSettings, pairs: _Pairs) -> list[Mark]:
    known = np.flatnonzero(~np.isnan(pairs.difference))
    if len(known) < _FEWEST:
        return []
    difference, limit, cast = pairs.difference[known], pairs.limit[known], data.casts[known]
    offsets, constant = _offsets(difference, limit, cast)
    cruise = float(np.median(difference))
    if abs(cruise) > _OTHERWISE * float(np.min(limit)):
        return [_whole(pairs, known, cruise)]  # not the same quantity, or not in the same unit
    residual = difference - np.where(constant[cast], offsets[cast], cruise)
    deepest = limit <= np.percentile(limit, 50)
    spread = _SIGMA * float(np.median(np.abs(residual[deepest])))
    most = np.maximum(limit, checks.bottle_ctd_sigma * spread)
    far = np.abs(residual) > most
    marks = _samples(data, pairs, known[far], residual[far], most[far])
    marks += _casts(data, pairs, known, np.where(constant, offsets - cruise, 0.0))
    if abs(cruise) > float(np.min(limit)) / 2:
        marks.append(_whole(pairs, known, cruise))
    return marks


def _offsets(
    difference: FloatArray, limit: FloatArray, cast: NDArray[np.int64]
) -> tuple[FloatArray, BoolArray]:
    """Return the median difference of each cast, and whether it holds for nearly all of its pairs, (n_cast,)."""
    n_cast = int(cast.max()) + 1
    order = np.lexsort((difference, cast))
    count = np.bincount(cast, minlength=n_cast)
    start = np.cumsum(count) - count
    ordered = difference[order]
    middle = np.minimum(start + (count - 1) // 2, len(ordered) - 1)
    other = np.minimum(start + count // 2, len(ordered) - 1)
    offsets = np.where(count > 0, (ordered[middle] + ordered[other]) / 2, 0.0)
    together = np.bincount(cast, np.abs(difference - offsets[cast]) <= limit, minlength=n_cast)
    constant = (count >= _FEWEST_OF_CAST) & (together >= _CONSTANT * count)
    return offsets, constant


def _samples(
    data: Rows, pairs: _Pairs, rows: NDArray[np.int64], residual: FloatArray, limit: FloatArray
) -> list[Mark]:
    """Return doubts of single samples: of the bottle, or of the CTD where that is the one unlike its neighbours."""
    if not len(rows):
        return []
    bottle, ctd = pairs.bottle_values[rows], pairs.ctd_values[rows]
    # What stands around a sample (in its cast, in the casts before and after) says which of the two is off by this.
    around = [BETWEEN, BEFORE, AFTER]
    of_bottle = bottle[:, None] - neighbours(data, pairs.bottle_values, rows)[:, around]
    of_ctd = ctd[:, None] - neighbours(data, pairs.ctd_values, rows)[:, around]
    by, near = residual[:, None], np.abs(residual[:, None]) / 2
    with np.errstate(invalid="ignore"):
        against_ctd = (np.abs(of_ctd + by) < near) & (np.abs(of_bottle) < near)
        against_bottle = (np.abs(of_bottle - by) < near) & (np.abs(of_ctd) < near)
    ctd_is_wrong = (against_ctd.sum(axis=1) >= _WITNESSES) & ~against_bottle.any(axis=1)
    marks = []
    for variable, other, values, away, chosen in (
        (pairs.bottle, pairs.ctd, bottle, residual, ~ctd_is_wrong),
        (pairs.ctd, pairs.bottle, ctd, -residual, ctd_is_wrong),
    ):
        mine = np.flatnonzero(chosen)
        if not len(mine):
            continue
        figures = [
            beyond(abs(by), most) for by, most in zip(away[mine].tolist(), limit[mine].tolist(), strict=True)
        ]
        texts = [
            f"{value:g}, {size}{pairs.unit} {'higher' if by > 0 else 'lower'}"
            for value, by, (size, _) in zip(values[mine], away[mine], figures, strict=True)
        ]
        words = f"is {{value}} than {label(other)} and the cruise's other samples imply"
        if variable == pairs.ctd:
            words += f", and {label(other)} agrees with the samples around it"
        limits = [f"the two to agree within {most}{pairs.unit} there" for _, most in figures]
        marks.append(Mark(_NAME, Severity.DOUBT, variable, rows[mine], texts, words, limits))
    return marks


def _of_the_bottle(marks: list[Mark]) -> list[Mark]:
    """Return the marks, those of samples whose salinity and oxygen are both doubted with a word on the bottle."""
    none = np.empty(0, dtype=np.int64)
    doubted = {mark.variable: mark.rows for mark in marks if mark.severity is Severity.DOUBT}
    both = np.intersect1d(doubted.get("bottle_salinity", none), doubted.get("bottle_oxygen", none))
    parts = []
    for mark in marks:
        shared = np.isin(mark.rows, both)
        if mark.severity is not Severity.DOUBT or mark.variable not in _OTHER_OF or not shared.any():
            parts.append(mark)
            continue
        for chosen, more in (
            (~shared, ""),
            (shared, f", and {_OTHER_OF[mark.variable]} differs too: the bottle may have closed elsewhere"),
        ):
            at, limit = np.flatnonzero(chosen).tolist(), mark.limit
            if at:
                values = [mark.values[i] for i in at]
                limits = limit if isinstance(limit, str) else [limit[i] for i in at]
                parts.append(
                    replace(mark, rows=mark.rows[at], values=values, limit=limits, words=mark.words + more)
                )
    return parts


def _by_cast(data: Rows, marks: list[Mark]) -> list[Mark]:
    """Return the marks, of a cast in which many samples are doubted one mark for all of them."""
    doubts = [mark for mark in marks if mark.severity is Severity.DOUBT]
    told = [mark for mark in marks if mark.severity is not Severity.DOUBT]
    whole: dict[int, dict[str, list[int]]] = {}
    for name in dict.fromkeys(mark.variable for mark in doubts):
        rows = np.concatenate([mark.rows for mark in doubts if mark.variable == name])
        casts, count = np.unique(data.casts[rows], return_counts=True)
        for cast in casts[count >= _MANY_OF_CAST].tolist():
            whole.setdefault(cast, {})[name] = np.sort(rows[data.casts[rows] == cast]).tolist()
    for mark in doubts:
        single = np.array(
            [mark.variable not in whole.get(cast, ()) for cast in data.casts[mark.rows].tolist()]
        )
        if single.any():
            told.append(mark if single.all() else mark.kept(single))
    return [*told, *(_of_cast(data, off) for _, off in sorted(whole.items()))]


def _of_cast(data: Rows, off: dict[str, list[int]]) -> Mark:
    """Return the doubt of a cast whose salinity or oxygen, from the CTD or the bottles, is off in many samples."""
    names = tuple(off)
    rows = np.array(sorted({row for some in off.values() for row in some}), dtype=np.int64)
    station, cast = (data.table.column(column)[int(rows[0])].as_py() for column in ("station", "cast"))
    sizes = []
    for name in names:
        by = (plausible(data, name) - plausible(data, _BESIDE[name]))[off[name]]
        low, high = (plain(float(np.quantile(np.abs(by), part)), 2) for part in (0.1, 0.9))
        size = f"{low if low == high else f'{low} to {high}'} {unit_of(name)}".rstrip()
        side = "above" if (by > 0).all() else "below" if (by < 0).all() else "off"
        sizes.append(f"{size} {side} {label(_BESIDE[name])}")
    ctd = all(name.startswith("ctd") for name in names)
    cause = "the CTD was off there" if ctd else "bottles may have been numbered or closed out of order"
    count = np.count_nonzero(data.casts[~np.isnan(plausible(data, names[0]))] == data.casts[rows[0]])
    words = f"of station {station} cast {cast} {'lie' if len(names) > 1 else 'lies'} {{value}}"
    words += f" in {len(rows)} of {count} samples: {cause}"
    return Mark(
        _NAME, Severity.DOUBT, names[0], rows, [" and ".join(sizes)], words,
        "differences as in the cruise's other casts", together=True, also=names[1:],
    )  # fmt: skip


def _casts(data: Rows, pairs: _Pairs, known: NDArray[np.int64], offsets: FloatArray) -> list[Mark]:
    """Return a note for each cast whose samples all differ by the same; many such casts are told together."""
    limit = float(np.min(pairs.limit[known]))
    casts = np.flatnonzero(np.abs(offsets) > limit)
    rows = [known[data.casts[known] == cast] for cast in casts]
    by = [float(np.median(pairs.difference[members])) for members in rows]
    stations = [str(data.table.column("station")[int(members[0])].as_py()) for members in rows]
    expected = f"within {plain(limit, 2)}{pairs.unit} of the cruise's other casts"
    differs = f"differs from {label(pairs.ctd)} by {{value}}{pairs.unit} throughout"
    if len(casts) <= _MOST_CASTS_TOLD:
        sentences = [
            (members, signed(size), f"{differs} the {len(members)} samples of station {station}")
            for members, size, station in zip(rows, by, stations, strict=True)
        ]
    else:
        named = ", ".join(stations[:_MOST_CASTS_TOLD])
        words = f"{differs} {len(casts)} casts (stations {named} and {len(casts) - _MOST_CASTS_TOLD} more)"
        sentences = [(np.concatenate(rows), f"{signed(min(by))} to {signed(max(by))}", words)]
    return [
        Mark(
            _NAME, Severity.NOTE, pairs.bottle, members, [size],
            f"{words}, unlike other casts; one of the two is not calibrated", expected, together=True,
        )
        for members, size, words in sentences
    ]  # fmt: skip


def _whole(pairs: _Pairs, known: NDArray[np.int64], by: float) -> Mark:
    words = (
        f"differs from {label(pairs.ctd)} by {{value}}{pairs.unit} in the median of all {len(known)} samples"
    )
    low, high = _ABSOLUTE_LESS_PRACTICAL
    if pairs.bottle == "bottle_salinity" and low <= abs(by) <= high:
        larger = pairs.bottle if by > 0 else pairs.ctd
        words += f", as it would if {label(larger)} were Absolute Salinity"
    limit = f"less than {plain(float(np.min(pairs.limit[known])) / 2, 2)}{pairs.unit}"
    return Mark(_NAME, Severity.NOTE, pairs.bottle, known, [signed(by)], words, limit, together=True)
