"""The tables of the page about one delivered file: what was read of it, and how a description says to read it."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.reading.numbers import is_number
from pipeline.reading.spellings import in_words
from pipeline.variables import MEASURED, REGISTRY, flag_name

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from pipeline.findings import Finding
    from pipeline.reading import Delivery, Description


def described_columns(description: Description) -> list[tuple[str, ...]]:
    """Return a row for each column that a description speaks of."""
    rows: list[tuple[str, ...]] = [("column", "read as", "unit", "flags", "missing, date format")]
    rows += [
        (
            entry.column,
            in_words(entry.quantity).partition(";")[0],
            entry.unit or "",
            f"{entry.flag} ({entry.flag_scheme.upper()})" if entry.flag else "",
            "; ".join(part for part in (", ".join(entry.missing), entry.format) if part),
        )
        for entry in description.columns
    ]
    return rows


def described_whole(description: Description, *, says_itself: bool) -> list[str]:
    """Return a sentence for each thing that a description says of all rows.

    Parameters
    ----------
    description
        What is said of the file.
    says_itself
        Whether the file describes itself, so that nothing is taken for granted where the description says nothing.

    """
    sentences = list(_described_whole(description))
    return sentences if says_itself else [*sentences, *_taken_for_granted(description)]


def _taken_for_granted(description: Description) -> Iterator[str]:
    if not description.layout.missing:
        yield "Blanks, and codes such as -999, were read as missing."
    if not description.time_zone:
        yield "Dates and times were taken as UTC."


def _described_whole(description: Description) -> Iterator[str]:
    for quantity, text in description.constants.items():
        yield f"{in_words(quantity).partition(':')[0]} of all rows: {text}."
    for quantity, columns in description.joined.items():
        yield f"{in_words(quantity).partition(':')[0]}: {', '.join(columns)} joined."
    layout = description.layout
    if layout.missing:
        yield f"Missing values stand as {' or '.join(layout.missing)}, beside blanks and codes such as -999."
    if description.time_zone:
        hours, minutes = divmod(abs(description.time_zone), 60)
        yield f"Times are {hours:02d}:{minutes:02d} {'ahead of' if description.time_zone > 0 else 'behind'} UTC."
    if layout.decimal == ",":
        yield "A comma in a number is the decimal sign."
    if layout.sheet:
        yield f"The sheet '{layout.sheet}' was read."
    places = [
        f"{what} in line {line}"
        for what, line in (
            ("names", layout.names_line),
            ("units", layout.units_line),
            ("first data", layout.first_line),
        )
        if line
    ]
    if places:
        yield f"We took the {', the '.join(places)}."


def quantities(delivery: Delivery, findings: Sequence[Finding]) -> list[tuple[str, ...]]:
    """Return what was read: a row for each measured quantity."""
    table = delivery.table
    without_units = any(f.check == "no-units" and f.file == delivery.name for f in findings)
    unit = "unit, by the file or as said above" if delivery.described_by else "unit in the file"
    rows: list[tuple[str, ...]] = [
        ("quantity", "name in the file", unit, "conversion", "values", "missing", "flags, with their number")
    ]
    for name in (name for name in MEASURED if name in table.column_names):
        told = _metadata(table, name)
        missing = table.column(name).null_count
        rows.append(
            (
                REGISTRY[name].long_name,
                told.get("delivered_name") or _spelled(name, findings),
                "-" if without_units else _unit(name, told, findings),
                _conversion(name, told, findings),
                str(table.num_rows - missing),
                str(missing),
                _flags(table, name),
            )
        )
    return rows


def _metadata(table: pa.Table, name: str) -> dict[str, str]:
    return {key.decode(): text.decode() for key, text in (table.schema.field(name).metadata or {}).items()}


def _conversion(name: str, told: Mapping[str, str], findings: Sequence[Finding]) -> str:
    lost = any(f.check == "not-converted" and f.variable == name for f in findings)
    return told.get("conversion") or ("not possible: no salinity or temperature" if lost else "none")


def _spelled(name: str, findings: Sequence[Finding]) -> str:
    said = (f.value for f in findings if f.check == "column-spelling" and f.variable == name and f.value)
    return next(said, REGISTRY[name].exchange[0])


def _unit(name: str, told: Mapping[str, str], findings: Sequence[Finding]) -> str:
    """Return the unit as it stands in the file; "-" where none does, or where reading does not keep it."""
    if "delivered_units" in told:
        return told["delivered_units"] or "-"
    if any(f.check == "unit-assumed" and f.variable == name for f in findings):
        return "-"
    said = (f.value for f in findings if f.check == "unit-spelling" and f.variable == name and f.value)
    usual = "" if REGISTRY[name].unit == "1" else REGISTRY[name].exchange_unit
    return next(said, usual) or "-"


def _flags(table: pa.Table, name: str) -> str:
    """Return the flags of a quantity as they were delivered, each with how often it stands."""
    if flag_name(name) not in table.column_names:
        return "none given"
    delivered = _metadata(table, flag_name(name)).get("delivered_name", "")
    column = table.column(delivered if delivered in table.column_names else flag_name(name))
    counted = [
        (one["values"], one["counts"]) for one in pc.value_counts(column.cast(pa.string())).to_pylist()
    ]
    known = [(flag.removesuffix(".0"), count) for flag, count in counted if flag]
    known.sort(key=lambda one: (float(one[0]) if is_number(one[0]) else np.inf, one[0]))
    blank = sum(count for flag, count in counted if not flag)
    return ", ".join(f"{flag}: {count}" for flag, count in [*known, *([("blank", blank)] if blank else [])])
