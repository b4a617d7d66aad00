"""What is wrong in a ``cruise.toml`` beyond its form: unknown quantities, things said twice or that contradict."""

from __future__ import annotations

import datetime as dt
from typing import TYPE_CHECKING, Any

import pyarrow as pa

from pipeline.reading.cruise_form import DELIMITERS, Fault, called, entries
from pipeline.reading.date_formats import has_date
from pipeline.reading.description import POSITION_PARTS
from pipeline.reading.identity import usable_expocode
from pipeline.reading.instants import read_instants
from pipeline.reading.spellings import QUANTITIES, in_words, nearest
from pipeline.units import conversion
from pipeline.variables import IDENTITY, REGISTRY, Kind

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from pipeline.reading.cruise_form import Location

BLANK = "FILL IN"  # what a draft has where only a person knows
_EXAMPLES = {
    "expocode": "the code of the cruise, such as ZZV120090214", "station": "the name of the station, such as 12",
    "latitude": "degrees north, such as -35.5", "longitude": "degrees east, such as -12.25",
    "pressure": "decibars, such as 10.5", "depth": "metres, such as 10.5",
}  # fmt: skip
_JOINABLE = ("expocode", "section", "station", "sample", "bottle")
_DATED = ("date", "time", "date_and_time")
CONSTANTS = (*IDENTITY, "year", "pressure", "depth", "laboratory_temperature")
_RANGES = {"year": (1800, 2200), "cast": (0, 1e6), "laboratory_temperature": (0, 40)}
# What cannot both be given: each makes the other.
_RIVALS = (
    ("date", "date_and_time"), ("date", "year"), ("date_and_time", "year"), ("time", "date_and_time"), ("time", "hour"),
    ("date_and_time", "hour"), ("month", "day_of_year"), ("pressure", "depth"), ("latitude", "latitude_degrees"),
    ("longitude", "longitude_degrees"),
)  # fmt: skip
# What is of no use without the other.
_NEEDS = {
    "month": ("year",), "day": ("month",), "day_of_year": ("year",), "year": ("month", "day_of_year"),
    "minute": ("hour",), "second": ("minute",),
    **{
        part: (axis, f"{axis}_degrees") if part.endswith("hemisphere") else (f"{axis}_degrees",)
        for part in POSITION_PARTS
        if (axis := part.partition("_")[0]) and not part.endswith("degrees")
    },
}  # fmt: skip


def meaning_faults(written: Mapping[str, Any]) -> list[Fault]:
    """Return the faults in what the entries of a parsed cruise.toml say; its form is judged elsewhere."""
    files = written.get("file", [])
    faults: list[Fault] = []
    if not isinstance(files, list):
        return faults
    names: set[str] = set()
    for index, file in enumerate(files):
        if not isinstance(file, dict):
            continue
        location: Location = ("file", index)
        name = file.get("files")
        if isinstance(name, str) and name in names:
            faults.append(
                Fault(
                    (*location, "files"), f"found a second [[file]] of '{name}'; expected one; join the two."
                )
            )
        elif isinstance(name, str):
            names.add(name)
        faults += _layout_faults(location, file)
        faults += _column_faults(location, file)
        faults += _constant_faults(location, file)
        faults += _join_faults(location, file)
        faults += _together_faults(location, file)
    return faults


def _layout_faults(location: Location, file: Mapping[str, Any]) -> Iterator[Fault]:
    delimiter = file.get("delimiter")
    if (
        file.get("decimal") == ","
        and isinstance(delimiter, str)
        and DELIMITERS.get(delimiter, delimiter) == ","
    ):
        yield Fault(
            (*location, "decimal"),
            "found ',' both as decimal sign and as delimiter; expected two different ones; correct one.",
        )
    lines = {
        key: file[key] for key in ("names_line", "units_line", "first_line") if isinstance(file.get(key), int)
    }
    first = lines.pop("first_line", None)
    for key, line in lines.items():
        if first is not None and line >= first:
            yield Fault(
                (*location, key),
                f"found {key} = {line} and first_line = {first}; expected the data below names and units; correct one.",
            )
    if len(lines) == 2 and lines["names_line"] == lines["units_line"]:
        yield Fault(
            (*location, "units_line"),
            "found names and units on one line; expected two lines; correct one or leave it.",
        )


def _said(columns: Mapping[str, Any]) -> Iterator[tuple[str, Mapping[str, Any]]]:
    """Yield each column and what is said of it, the short form written out."""
    for column, said in columns.items():
        if isinstance(said, str):
            yield column, {"quantity": said}
        elif isinstance(said, dict) and isinstance(said.get("quantity"), str):
            yield column, said


def _column_faults(location: Location, file: Mapping[str, Any]) -> Iterator[Fault]:
    giver: dict[str, str] = {}
    columns = entries(file, "columns")
    for column, said in _said(columns):
        here = (*location, "columns", column)
        quantity = said["quantity"]
        if quantity not in QUANTITIES:
            yield _unknown_quantity(here, column, quantity)
            continue
        if quantity in giver:
            yield Fault(
                here, f"found {quantity} both in column '{giver[quantity]}' and in '{column}'; expected it once; leave"
                " one of them out, and it will pass through under its own name.",
            )  # fmt: skip
        giver.setdefault(quantity, column)
        yield from _one_column_faults(here, column, said, columns)


def _unknown_quantity(here: Location, column: str, quantity: str) -> Fault:
    close = nearest(quantity)
    meant = f"did you mean {close} ({in_words(close)})?" if close else f"known are {', '.join(QUANTITIES)};"
    return Fault(
        here,
        f"found the unknown quantity '{quantity[:60]}' for the column '{column}'; {meant} Correct it, or leave the"
        " column out, and it will pass through.",
    )


def _one_column_faults(
    here: Location, column: str, said: Mapping[str, Any], columns: Mapping[str, Any]
) -> Iterator[Fault]:
    quantity, unit, flag, written = said["quantity"], said.get("unit"), said.get("flag"), said.get("format")
    variable = REGISTRY.get(quantity)
    if isinstance(unit, str) and variable is not None and variable.name not in IDENTITY:
        if conversion(variable, unit) is None:
            yield Fault(
                (*here, "unit"),
                f"found the unit '{unit}' for {quantity}; expected {variable.exchange_unit or variable.unit} or one"
                " that can be converted to it; correct it, or leave the column out.",
            )
    elif unit and variable is None:
        yield Fault((*here, "unit"), f"found the unit '{unit}' for {quantity}, which has none; leave it out.")
    if isinstance(flag, str):
        if variable is None or variable.flags is None:
            yield Fault((*here, "flag"), f"found flags for {quantity}, which has none; leave them out.")
        elif flag == column or flag in columns:
            yield Fault(
                (*here, "flag"),
                f"found the column '{flag}' as flags of '{column}' and as a quantity; expected one; correct it.",
            )
    if isinstance(written, str):
        if quantity not in _DATED:
            yield Fault(
                (*here, "format"),
                f"found a format for {quantity}; expected one only for {', '.join(_DATED)}; leave it out.",
            )
        elif has_date(written) != (quantity != "time") or (quantity != "date") != ("hh" in written):
            yield Fault(
                (*here, "format"),
                f"found the format '{written}' for {quantity}; expected one with the parts of {in_words(quantity)};"
                " correct it.",
            )


def _constant_faults(location: Location, file: Mapping[str, Any]) -> Iterator[Fault]:
    for name, value in entries(file, "constants").items():
        here = (*location, "constants", name)
        if name not in CONSTANTS:
            close = nearest(name)
            meant = f"did you mean {close}? " if close in CONSTANTS else ""
            yield Fault(
                here,
                f"found the unknown constant '{name[:60]}'; {meant}Expected one of {', '.join(CONSTANTS)}; correct it.",
            )
        elif constant_text(value).strip().upper().startswith(BLANK):
            wanted = _EXAMPLES.get(name, f"the {in_words(name)}")
            yield Fault(
                here,
                f"{name} is still '{BLANK}', as the draft has it; expected {wanted}; write it there, or give it by a"
                " column.",
            )
        elif (expected := _not_possible(name, value)) is not None:
            yield Fault(here, f"found {name} = {str(value)[:60]!r}; expected {expected}; correct it.")


def _not_possible(name: str, value: Any) -> str | None:
    """Return what is expected of a constant where it is something else."""
    text = constant_text(value)
    if name == "expocode":
        return None if usable_expocode(text) else "a cruise code such as ZZV120090214"
    if name in {"date", "time"}:
        dates, times = (text, "") if name == "date" else ("20000101", text)
        instants = read_instants(pa.array([dates]), pa.array([times]))
        wrong = len(instants.impossible_dates) + len(instants.impossible_times)
        return (
            None if text and not wrong else "a date YYYY-MM-DD" if name == "date" else "a time of day hh:mm"
        )
    if name in REGISTRY and REGISTRY[name].kind is Kind.TEXT:
        return None if text.strip() else "a text that is not blank"
    low, high = (
        _RANGES.get(name) or (REGISTRY[name].plausible if name in REGISTRY else None) or (0.0, 12_000.0)
    )
    try:
        number = float(text)
    except ValueError:
        number = float("nan")
    whole = name not in {"cast", "year"} or number.is_integer()
    return None if low <= number <= high and whole else f"a number from {low:g} to {high:g}"


def constant_text(value: Any) -> str:
    """Return a constant as the text that a column would hold."""
    if isinstance(value, dt.datetime):
        return value.date().isoformat()
    if isinstance(value, dt.date | dt.time):
        return value.isoformat()
    return repr(value) if isinstance(value, float) else str(value)


def _join_faults(location: Location, file: Mapping[str, Any]) -> Iterator[Fault]:
    for name in entries(file, "joined"):
        if name not in _JOINABLE:
            yield Fault(
                (*location, "joined", name),
                f"found '{name[:60]}' to be joined of columns; expected one of {', '.join(_JOINABLE)}; correct it.",
            )


def _together_faults(location: Location, file: Mapping[str, Any]) -> Iterator[Fault]:
    """Yield what is given twice, or by halves."""
    where: dict[str, Location] = {}
    for column, said in _said(entries(file, "columns")):
        where.setdefault(said["quantity"], (*location, "columns", column))
    for table, words in (("constants", "a constant"), ("joined", "joined of columns")):
        for name in entries(file, table):
            here = (*location, table, name)
            if name in where:
                yield Fault(
                    here,
                    f"found {name} as {words} and elsewhere for {called(location, file)}; expected it once; leave one"
                    " out.",
                )
            where.setdefault(name, here)
    for one, other in _RIVALS:
        if one in where and other in where:
            yield Fault(
                where[other],
                f"found both {one} and {other}, which give the same; expected one of them; leave one out.",
            )
    for part, needed in _NEEDS.items():
        if part in where and not any(name in where for name in needed):
            yield Fault(
                where[part],
                f"found {part} without {' or '.join(needed)}; expected both; add {needed[-1]} or leave it out.",
            )
