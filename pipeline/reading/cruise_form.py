"""The form of a ``cruise.toml``: which keys its tables know, and what kind of value each takes."""

from __future__ import annotations

import codecs
import datetime as dt
import difflib
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from pipeline.reading.date_formats import is_date_format
from pipeline.reading.delivery import DeliveryKind
from pipeline.reading.schemes import Scheme

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping

    Location = tuple[str | int, ...]

LONGEST = 400  # characters of a text
LARGEST_LINE = 100_000
DELIMITERS = {"comma": ",", "semicolon": ";", "tab": "\t", "blank": " ", "bar": "|"}
_LONGEST_QUOTE = 60


@dataclass(frozen=True, slots=True)
class Fault:
    """One fault of a cruise.toml."""

    location: Location  # nested keys of the file
    sentence: str  # without the file and the line


@dataclass(frozen=True, slots=True)
class Rule:
    """What a key takes."""

    expected: str
    holds: Callable[[Any], bool]


def _text(value: Any) -> bool:
    return isinstance(value, str) and 0 < len(value) <= LONGEST


def _line(value: Any) -> bool:
    return isinstance(value, int) and not isinstance(value, bool) and 1 <= value <= LARGEST_LINE


def _code(value: Any) -> bool:
    return isinstance(value, str | int | float) and not isinstance(value, bool) and len(str(value)) <= LONGEST


def _codes(value: Any) -> bool:
    return _code(value) or (isinstance(value, list) and all(_code(one) for one in value))


def _encoding(value: Any) -> bool:
    try:
        return _text(value) and codecs.lookup(value)._is_text_encoding  # noqa: SLF001
    except (LookupError, ValueError):
        return False


def _one_of(*words: str) -> Rule:
    return Rule(" or ".join(f'"{word}"' for word in words), lambda value: value in words)


def time_zone(value: Any) -> int | None:
    """Return the minutes that a time zone such as ``+02:00`` is ahead of UTC, None where it is none."""
    if value in ("UTC", "Z"):
        return 0
    try:
        offset = dt.datetime.strptime(str(value), "%z").utcoffset()
    except ValueError:
        return None
    return None if offset is None else round(offset.total_seconds() / 60)


_SCHEME = _one_of(*(scheme.value for scheme in Scheme))
_MISSING = Rule('a list of what stands for a missing value, such as [-9, "n.d."]', _codes)
_LINE = Rule("a line, counted from 1", _line)
_FORMAT = Rule('how dates are written, such as "DD.MM.YYYY hh:mm"', is_date_format)

CRUISE_KEYS = {
    "stands": Rule(
        "a list of file names", lambda value: isinstance(value, list) and all(_text(one) for one in value)
    ),
}
FILE_KEYS = {
    "files": Rule(
        'a file name, or a pattern such as "*.xlsx"', lambda value: _text(value) and "/" not in value
    ),
    "kind": _one_of(*(kind.value for kind in DeliveryKind)),
    "format": _one_of("text", "xlsx", "parquet"),
    "delimiter": Rule(
        f"one character, or one of {', '.join(DELIMITERS)}",
        lambda value: (
            isinstance(value, str)
            and (
                value in DELIMITERS
                or (len(value) == 1 and value.isprintable() and not value.isalnum())
                or value == "\t"
            )
        ),
    ),
    "decimal": _one_of(".", ","),
    "names_line": _LINE,
    "units_line": _LINE,
    "first_line": _LINE,
    "sheet": Rule("the name of a sheet", _text),
    "encoding": Rule('the name of an encoding, such as "cp1252"', _encoding),
    "comment": Rule('what comment lines begin with, such as "#"', _text),
    "missing": _MISSING,
    "flags": _SCHEME,
    "time_zone": Rule('hours ahead of UTC, such as "+02:00"', lambda value: time_zone(value) is not None),
}
FILE_TABLES = {
    "columns": "a table [file.columns] of delivered names and what each is",
    "constants": "a table [file.constants] of what all rows share",
    "joined": "a table [file.joined] of lists of columns",
}
COLUMN_KEYS = {
    "quantity": Rule('a quantity, such as "nitrate"', _text),
    "unit": Rule('a unit, such as "umol/kg"', lambda value: isinstance(value, str) and len(value) <= LONGEST),
    "flag": Rule("the name of the column of its flags", _text),
    "flags": _SCHEME,
    "missing": _MISSING,
    "format": _FORMAT,
}
_NAMES = Rule(
    "a list of column names",
    lambda value: isinstance(value, list) and bool(value) and all(_text(one) for one in value),
)
_CONSTANT = Rule(
    "text, a number, a date or a time",
    lambda value: isinstance(value, str | int | float | dt.date | dt.time)
    and not isinstance(value, bool) and len(str(value)) <= LONGEST,
)  # fmt: skip


def form_faults(written: Mapping[str, Any]) -> list[Fault]:
    """Return the faults in the form of single entries of a parsed cruise.toml."""
    faults = [
        _unknown_key((key,), "the file", ("cruise", "file"))
        for key in written
        if key not in ("cruise", "file")
    ]
    cruise = written.get("cruise", {})
    if isinstance(cruise, dict):
        faults += _table_faults(("cruise",), cruise, CRUISE_KEYS, (), "[cruise]")
    else:
        faults.append(_wrong(("cruise",), cruise, "a table [cruise]"))
    files = written.get("file", [])
    if not isinstance(files, list) or not all(isinstance(one, dict) for one in files):
        return [*faults, _wrong(("file",), files, "tables [[file]]")]
    if not files and not cruise:
        faults.append(
            Fault((), "found nothing in it; expected at least one table [[file]]; describe a file.")
        )
    for index, file in enumerate(files):
        faults += _file_faults(("file", index), file)
    return faults


def called(location: Location, file: Mapping[str, Any]) -> str:
    """Return what a person calls one [[file]] table."""
    name = file.get("files")
    return f"[[file]] of {name}" if isinstance(name, str) else f"[[file]] {int(location[1]) + 1}"


def entries(file: Mapping[str, Any], table: str) -> Mapping[str, Any]:
    """Return a table inside a [[file]], empty where it is none."""
    inside = file.get(table, {})
    return inside if isinstance(inside, dict) else {}


def _file_faults(location: Location, file: Mapping[str, Any]) -> Iterator[Fault]:
    place = called(location, file)
    yield from _table_faults(location, file, FILE_KEYS, tuple(FILE_TABLES), place)
    if "files" not in file:
        yield Fault(location, f"found no 'files' in {place}; expected {FILE_KEYS['files'].expected}; add it.")
    for table, expected in FILE_TABLES.items():
        if not isinstance(file.get(table, {}), dict):
            yield _wrong((*location, table), file[table], expected)
    for column, said in entries(file, "columns").items():
        here = (*location, "columns", column)
        if isinstance(said, dict):
            yield from _table_faults(here, said, COLUMN_KEYS, (), f"column '{column}'")
            if "quantity" not in said:
                expected = COLUMN_KEYS["quantity"].expected
                yield Fault(
                    here, f"found no 'quantity' for the column '{column}'; expected {expected}; add it."
                )
        elif not _text(said):
            yield _wrong(here, said, "a quantity, or { quantity = ..., unit = ... }")
    for name, said in entries(file, "constants").items():
        if not _CONSTANT.holds(said):
            yield _wrong((*location, "constants", name), said, _CONSTANT.expected)
    for name, said in entries(file, "joined").items():
        if not _NAMES.holds(said):
            yield _wrong((*location, "joined", name), said, _NAMES.expected)


def _table_faults(
    location: Location,
    table: Mapping[str, Any],
    rules: Mapping[str, Rule],
    inside: tuple[str, ...],
    place: str,
) -> Iterator[Fault]:
    for key, value in table.items():
        if key in rules:
            if not rules[key].holds(value):
                yield _wrong((*location, key), value, rules[key].expected)
        elif key not in inside:
            yield _unknown_key((*location, key), place, (*rules, *inside))


def _unknown_key(location: Location, place: str, known: tuple[str, ...]) -> Fault:
    key = str(location[-1])
    close = difflib.get_close_matches(key, known, n=1)
    meant = f" (did you mean {close[0]}?)" if close else ""
    return Fault(
        location,
        f"found the unknown key '{key[:_LONGEST_QUOTE]}' in {place}{meant}; expected one of {', '.join(known)};"
        " correct or remove it.",
    )


def _wrong(location: Location, found: Any, expected: str) -> Fault:
    words = repr(found)
    words = words if len(words) <= _LONGEST_QUOTE else f"{words[:_LONGEST_QUOTE]}..."
    return Fault(location, f"found {words} as '{location[-1]}'; expected {expected}; correct it.")
