"""A file's cells under its description: what its columns mean, what is made of several, what stands for missing."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.findings import Finding, Severity, at
from pipeline.problems import DeliveryProblem
from pipeline.reading import composed
from pipeline.reading.assembly import assemble
from pipeline.reading.cells import Cells
from pipeline.reading.columns import Heading, Meanings, contradicting_unit, plan_columns
from pipeline.reading.composing import compose_dates, compose_positions, join
from pipeline.reading.delivery import DeliveryKind
from pipeline.reading.described_flags import doubt_schemes, give_flags
from pipeline.reading.description import PARTS
from pipeline.reading.spellings import name_and_unit
from pipeline.reading.workbench import Workbench
from pipeline.variables import IDENTITY, REGISTRY, Variable

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from pipeline.reading.assembly import ReadRows
    from pipeline.reading.columns import Column
    from pipeline.reading.description import ColumnEntry, Description
    from pipeline.reading.grid import Grid
    from pipeline.reading.spread import Spread
    from pipeline.settings import ReadingSettings

_PLACES = frozenset({"latitude", "longitude"})  # where a number such as -9 is as good as any other
_OF_BOTTLES = frozenset({"sample", "bottle"})
_MOST_NAMED = 40


@dataclass(frozen=True, slots=True)
class Described:
    """A grid whose columns have a meaning, as a description says."""

    grid: Grid
    columns: tuple[Column, ...]
    findings: tuple[Finding | Spread, ...]
    metadata: Mapping[str, Mapping[str, str]]  # to be added to columns of the table


def describe(grid: Grid, meanings: Meanings, description: Description) -> Described:
    """Give the columns of a grid the meaning that a description says.

    Parameters
    ----------
    grid
        The file's cells; n_column columns.
    meanings
        What the names mean by themselves, in a format that has names; the description stands over them.
    description
        What is said of the file.

    Raises
    ------
    DeliveryProblem
        Where the description names columns that the file lacks.

    """
    _require_columns(grid, description)
    work = Workbench(
        grid, description, list(grid.names), list(grid.units),
        cells=_without_missing(grid, description),
        values=dict(meanings.values),
        flags=dict(meanings.flags),
        constants=dict(grid.constants),
    )  # fmt: skip
    _forget_what_is_said_anew(work)
    _give_meanings(work)
    join(work)
    compose_dates(work)
    compose_positions(work)
    for entry in description.columns:
        if entry.flag is not None:
            give_flags(work, entry)
    doubt_schemes(work)
    return _planned(work)


def _require_columns(grid: Grid, description: Description) -> None:
    """Refuse a description that names columns which the file has not, with all of them in one sentence."""
    wanted: dict[str, int | None] = {}
    for entry in description.columns:
        wanted.setdefault(entry.column, entry.line)
        if entry.flag is not None:
            wanted.setdefault(entry.flag, entry.line)
    for columns in description.joined.values():
        for column in columns:
            wanted.setdefault(column, None)
    absent = {column: line for column, line in wanted.items() if column not in grid.names}
    if not absent:
        return
    said = ", ".join(
        f"'{column}' (line {line})" if line else f"'{column}'"
        for column, line in list(absent.items())[:_MOST_NAMED]
    )
    names = [name for name in grid.names if name]
    there = ", ".join(f"'{name}'" for name in names[:_MOST_NAMED])
    more = f" and {len(names) - _MOST_NAMED} more" if len(names) > _MOST_NAMED else ""
    raise DeliveryProblem(
        "column-not-there",
        f"{at(grid.name, grid.names_line)}: there is no column {said}, which {description.source} names; found"
        f" {there}{more}; correct {description.source}, in which the names must be as in the file.",
        grid.names_line,
    )


def _forget_what_is_said_anew(work: Workbench) -> None:
    """Take from columns the meaning of their own where the description gives the quantity otherwise."""
    description = work.description
    said = {entry.column: entry.quantity for entry in description.columns}
    anew = {*said.values(), *description.constants, *description.joined}
    if anew & {"date_and_time", "year"}:
        anew |= {"date", "time"}
    for axis in _PLACES:
        if f"{axis}_degrees" in anew:
            anew.add(axis)
    spoiled = {name for name, variable in work.values.items() if variable.name in anew or name in said}
    for name in spoiled:
        variable = work.values.pop(name)
        if variable.name in description.constants:
            work.findings.append(_given_instead(work, name, variable))
    for quantity in anew:
        work.constants.pop(quantity, None)
    flagged = {entry.quantity for entry in description.columns if entry.flag or entry.column not in spoiled}
    own = {entry.flag for entry in description.columns}
    work.flags = {
        name: variable
        for name, variable in work.flags.items()
        if variable.name not in flagged and name not in own
    }


def _given_instead(work: Workbench, column: str, variable: Variable) -> Finding:
    grid, said = work.grid, work.description.constants[variable.name]
    delivered = pc.unique(composed.as_text(work.column(column))).to_pylist()
    found = f"'{delivered[0][:40]}'{' and others' if len(delivered) > 1 else ''}" if delivered else "nothing"
    return Finding(
        "given-in-description", Severity.NOTE,
        f"{at(grid.name, grid.names_line)}: {variable.name} is '{said}' for all rows, as {work.description.source}"
        f" says, in place of {found} in the column {column}.",
        variable=variable.name, value=said, limit=found, file=grid.name, line=grid.names_line,
        to_group=f"{at(grid.name, grid.names_line)}: we took '{said}' as {variable.name} of all rows, in place of"
        f" {found} in the column {column}.",
    )  # fmt: skip


def _give_meanings(work: Workbench) -> None:
    description = work.description
    for entry in description.columns:
        position = work.names.index(entry.column)
        if entry.unit is not None:
            _compare_units(work, entry, work.units[position])
            work.units[position] = entry.unit
        if work.grid.kind is DeliveryKind.CTD and entry.quantity in _OF_BOTTLES:
            continue  # levels of a cast have none; the column passes through
        if entry.quantity not in PARTS and entry.quantity not in {"date", "time", *_PLACES}:
            work.values[entry.column] = REGISTRY[entry.quantity]
    for name, text in description.constants.items():
        if name in IDENTITY or name == "laboratory_temperature":
            work.constants[name] = text
        elif name in {"pressure", "depth"}:
            work.add(name, pa.repeat(pa.scalar(text, pa.string()), work.n_row), ["the constants"])


def _compare_units(work: Workbench, entry: ColumnEntry, below: str) -> None:
    """Tell where the heading of a column gives another unit than the description."""
    grid, variable = work.grid, REGISTRY.get(entry.quantity)
    written = below.strip() or name_and_unit(entry.column)[1]
    if variable is None or entry.unit is None or variable.name in IDENTITY:
        return
    place = work.description.place(entry.line)
    found = contradicting_unit(
        grid.name, grid.names_line, entry.column, variable, (written, entry.unit), place
    )
    if found is not None:
        work.findings.append(found)


def _without_missing(grid: Grid, description: Description) -> list[pa.Array]:
    """Return the columns with what the description calls missing taken out.

    What is said for the whole file holds for every column but flags; numbers among it also not for positions,
    nor for whose row it is.
    """
    entries = {entry.column: entry for entry in description.columns}
    flags = {entry.flag for entry in description.columns}
    columns = []
    for name, column in zip(grid.names, grid.cells.columns, strict=True):
        entry = entries.get(name)
        codes = list(entry.missing) if entry else []
        if name not in flags:
            is_identity = entry is not None and (entry.quantity in IDENTITY or entry.quantity in PARTS)
            codes += [code for code in description.layout.missing if not is_identity or _number(code) is None]
        columns.append(_taken_out(column, codes, decimal_comma=grid.decimal_comma) if codes else column)
    return columns


def _number(text: str) -> float | None:
    try:
        return float(text)
    except ValueError:
        return None


def _taken_out(column: pa.Array, codes: Sequence[str], *, decimal_comma: bool) -> pa.Array:
    numbers = [number for code in codes if (number := _number(code)) is not None]
    if not pa.types.is_string(column.type):
        coded = np.isin(np.asarray(column.to_numpy(zero_copy_only=False), dtype=np.float64), numbers)
        return pc.if_else(pa.array(coded), pa.scalar(None, column.type), column)
    words = pa.array([code.strip().lower() for code in codes], pa.string())
    coded_words = pc.is_in(pc.utf8_lower(column), value_set=words)
    if numbers:
        values = composed.floats_of_texts(column, decimal_comma=decimal_comma)
        coded_words = pc.or_(coded_words, pa.array(np.isin(values, numbers)))
    return pc.if_else(coded_words, pa.scalar(""), column)


def _planned(work: Workbench) -> Described:
    """Plan the columns, delivered ones and made ones, and give back what assembly takes."""
    grid, description = work.grid, work.description
    heading = Heading(grid.name, tuple(work.names), tuple(work.units), grid.names_line)
    columns, findings = plan_columns(heading, Meanings(work.values, work.flags))
    words = {entry.quantity: entry.column for entry in description.columns if entry.quantity in REGISTRY}
    words |= {"pressure": words["depth"]} if "depth" in words and "pressure" not in words else {}
    described = replace(
        grid,
        names=tuple(work.names),
        units=tuple(work.units),
        cells=Cells(tuple(work.cells), grid.cells.lines, grid.cells.misfits),
        constants=work.constants,
        words={**grid.words, **work.words, **words},
        n_delivered=len(grid.names),
        minutes_ahead=description.time_zone,
        dates_in=work.dates_in,
    )
    return Described(described, columns, (*work.findings, *findings), work.metadata)


def read_grid(
    described: Described, limits: ReadingSettings, findings: Sequence[Finding | Spread]
) -> ReadRows:
    """Make the table of a grid whose columns are described; what was noticed on the way here comes first."""
    read = assemble(described.grid, described.columns, limits, (*findings, *described.findings))
    fields = [
        field.with_metadata(
            {**(field.metadata or {}), **{key.encode(): said.encode() for key, said in more.items()}}
        )
        if (more := described.metadata.get(field.name))
        else field
        for field in read.table.schema
    ]
    return replace(read, table=read.table.cast(pa.schema(fields)))
