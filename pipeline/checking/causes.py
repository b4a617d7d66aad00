"""One cause, one sentence: of all that the checks say of a value or a cast, what says most is told."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.marks import Mark
from pipeline.findings import Severity
from pipeline.variables import MEASURED, REGISTRY, FlagScheme

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    IntArray = NDArray[np.int64]
    BoolArray = NDArray[np.bool_]

_LEAK = "leaking-bottle"
# Checks of a value beside others, that which says most of the cause first. Where two doubt a value, the first is told.
_OF_VALUES = (
    "gross-range", "oxygen-saturation", _LEAK, "cast-offset", "stuck-values", "bottle-against-ctd", "spike",
    "nitrate-to-phosphate", "alkalinity-less-dic", "property-misfit", "isotope-range", "regional-range",
    "density-inversion", "gradient",
)  # fmt: skip
# Checks of a cast as a whole, in the same order. A time or a place that is wrong makes a ship too fast.
_OF_CASTS = (
    "departure-date", "cast-time", "position-zero", "position-sign", "clock-order", "off-section", "station-speed",
)  # fmt: skip
# What doubts a bottle where it doubts several of its quantities, and how many these are (our choice, no source).
# Where two do not fit together, one of them may be right.
_OF_BOTTLES = frozenset(_OF_VALUES) - {
    "gross-range", _LEAK, "cast-offset", "stuck-values", "nitrate-to-phosphate", "alkalinity-less-dic",
}  # fmt: skip
_FEWEST_OFF = 3
_SEVERITIES = (Severity.FAULT, Severity.DOUBT, Severity.NOTE)


def leaking_bottle(data: Rows, settings: Settings, marks: Iterable[Mark]) -> list[Mark]:
    """Bottles of which several quantities at once are unlike the samples around them."""
    off: dict[int, set[str]] = defaultdict(set)
    for mark in marks if data.is_bottle else ():
        if mark.doubts and mark.check in _OF_BOTTLES and not mark.together:
            for name in mark.variables:
                if REGISTRY[name].flags is FlagScheme.WATER:
                    for row in mark.rows.tolist():
                        off[row].add(name)
    bottles: dict[tuple[str, ...], list[int]] = defaultdict(list)
    for row, names in sorted(off.items()):
        if len(names) >= _FEWEST_OFF:
            bottles[tuple(name for name in MEASURED if name in names)].append(row)
    pressure = data.floats("pressure")
    outcome = "" if settings.use.doubtful else "none of its values is used"
    return [
        Mark(
            _LEAK, Severity.DOUBT, names[0], np.array(rows, dtype=np.int64), pressure[rows].tolist(),
            "of one bottle at {value} dbar are unlike the samples around it: it may have leaked, or closed at another"
            " depth",
            "water of its depth in all that was drawn from a bottle", also=names[1:], outcome=outcome,
        )
        for names, rows in bottles.items()
    ]  # fmt: skip


def with_the_bottle(data: Rows, marks: Iterable[Mark]) -> list[Mark]:
    """Return marks that doubt all that was drawn from the bottles that leaked, without a sentence of their own."""
    water = [name for name in MEASURED if name in data.names and REGISTRY[name].flags is FlagScheme.WATER]
    return [replace(mark, also=tuple(water)) for mark in marks if mark.check == _LEAK]


def one_cause(data: Rows, marks: Sequence[Mark]) -> list[Mark]:
    """Return the marks without what only repeats in other words, or follows from, what another one says.

    A value that is doubted is not doubted again; a step or an inversion beside it, and anything at a pressure
    that is doubted, follows from that. A cast whose time or place is doubted is not told of as too fast.
    """
    best = _best(data, marks)
    first_of_cast = _first_of_casts(data, marks)
    told = []
    for mark in marks:
        if mark.check in _OF_CASTS and not mark.together:
            place = np.array([first_of_cast[cast] for cast in data.casts[mark.rows].tolist()])
            keep = place >= _place(mark)
        elif mark.check in _OF_VALUES and mark.check != _LEAK and not mark.together:
            keep = _not_told(best, mark)
        else:
            told.append(mark)
            continue
        if keep.all():
            told.append(mark)
        elif keep.any():
            told.append(mark.kept(keep))
    return told


def _place(mark: Mark) -> int:
    """Return the place of a mark among all that may be said of a value or of a cast: what is wrong as a whole first.

    Then the gravest.
    """
    order = _OF_CASTS if mark.check in _OF_CASTS else _OF_VALUES
    rank = 0 if mark.together else 1 + _SEVERITIES.index(mark.severity)
    return rank * len(order) + order.index(mark.check)


def _best(data: Rows, marks: Iterable[Mark]) -> dict[str, IntArray]:
    """Return the place of the first of all doubts of each value, by variable, (n_row,) each."""
    best: dict[str, IntArray] = {}
    for mark in marks:
        if mark.doubts and mark.check in _OF_VALUES:
            for name in mark.variables:
                if name not in best:
                    best[name] = np.full(len(data), np.iinfo(np.int64).max)
                np.minimum.at(best[name], mark.rows, _place(mark))
    return best


def _not_told(best: dict[str, IntArray], mark: Mark) -> BoolArray:
    """Return which rows of a mark nothing else has said enough of, (n,)."""
    place = _place(mark)
    follows = np.zeros(len(mark.rows), dtype=bool)
    for name in {*mark.variables, "pressure"} & best.keys():
        follows |= best[name][mark.rows] < place
        if mark.beside is not None:
            follows |= best[name][mark.beside] < place
    if mark.groups is not None and follows.any():
        follows |= np.isin(mark.groups, mark.groups[follows])
    return ~follows


def _first_of_casts(data: Rows, marks: Iterable[Mark]) -> dict[int, int]:
    """Return the place of the first that is said of each cast."""
    first: dict[int, int] = {}
    for mark in marks:
        if mark.check in _OF_CASTS:
            for cast in data.casts[mark.rows].tolist():
                first[cast] = min(first.get(cast, _place(mark)), _place(mark))
    return first
