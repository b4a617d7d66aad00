"""Numbers, names and places as they stand in sentences."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pipeline.findings import at
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Sequence

_MOST_DIGITS = 17  # those of a double
_WRITTEN_OUT = 1e15  # larger numbers are written with an exponent


def plain(value: float, digits: int = 3) -> str:
    """Return a number with so many significant digits, without an exponent where people write none."""
    short = f"{value:.{digits}g}"
    return f"{float(short):.0f}" if "e+" in short and abs(value) < _WRITTEN_OUT else short


def signed(value: float, digits: int = 3) -> str:
    """Return a difference with its sign and so many significant digits."""
    return f"{'-' if value < 0 else '+'}{plain(abs(value), digits)}"


def beyond(value: float, limit: float, digits: int = 2) -> tuple[str, str]:
    """Return a size and the limit that it exceeds, in as many digits as show that it does."""
    for enough in range(digits, _MOST_DIGITS + 1):
        size, most = plain(value, enough), plain(limit, enough)
        if float(size) > float(most) or not value > limit:
            return size, most
    return repr(value), repr(limit)


def named(names: Sequence[str]) -> str:
    """Return names as a list in words."""
    return f"{', '.join(names[:-1])} and {names[-1]}" if len(names) > 1 else "".join(names)


def label(name: str) -> str:
    """Return what a quantity is called in exchange files, else its column."""
    known = REGISTRY.get(name)
    return known.exchange[0] if known is not None and known.exchange else name


def unit_of(name: str) -> str:
    """Return the unit of a quantity as it is written in sentences, empty where it has none."""
    unit = REGISTRY[name].unit
    return {"1": "", "1e-3": "per mil", "degree_C": "degC"}.get(unit, unit.replace(" kg-1", "/kg"))


def lines(file: str, first: int, last: int) -> str:
    """Return in words where rows of a delivered file are."""
    place = at(file, first)
    if last == first:
        return place
    head, _, number = place.rpartition(" ")
    return f"{head}s {number} to {last}"
