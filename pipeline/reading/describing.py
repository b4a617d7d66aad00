"""A file's cells under its description: what its columns mean, what is made of several, what stands for missing."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.findings import Finding, Severity, at
from pipeline.problems import DeliveryProblem
from pipeline.reading import composed
from pipeline.reading.assembly import assemble
from pipeline.reading.cells import Cells
from pipeline.reading.columns import Heading, Meanings, plan_columns
from pipeline.reading.delivery import DeliveryKind
from pipeline.reading.description import DATE_PARTS, PARTS, POSITION_PARTS
from pipeline.reading.numbers import to_flags
from pipeline.reading.positions import Axis
from pipeline.reading.schemes import Scheme, mapping_words, odd_flag_findings, to_whp
from pipeline.variables import IDENTITY, REGISTRY, FlagScheme, Variable, flag_name

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from pipeline.reading.assembly import ReadRows
    from pipeline.reading.columns import Column
    from pipeline.reading.description import ColumnEntry, Description
    from pipeline.reading.grid import Grid
    from pipeline.settings import ReadingSettings

_PLACES = frozenset({"latitude", "longitude"})  # where a number such as -9 is as good as any other
_OF_BOTTLES = frozenset({"sample", "bottle"})
_MOST_NAMED = 40


@dataclass(frozen=True, slots=True)
class Described:
    """A grid whose columns have a meaning, as a description says."""

    grid: Grid
    columns: tuple[Column, ...]
    findings: tuple[Finding, ...]
    metadata: Mapping[str, Mapping[str, str]]  # to be added to columns of the table


@dataclass
class _Work:
    """What is being made of a grid."""

    grid: Grid
    description: Description
    names: list[str]
    units: list[str]
    cells: list[pa.Array]
    values: dict[str, Variable]
    flags: dict[str, Variable]
    constants: dict[str, str]
    findings: list[Finding] = field(default_factory=list)
    metadata: dict[str, dict[str, str]] = field(default_factory=dict)

    @property
    def n_row(self) -> int:
        return len(self.grid.cells.lines)

    @property
    def decimal_comma(self) -> bool:
        return self.grid.decimal_comma

    def column(self, name: str) -> pa.Array:
        """Return a delivered column by its name."""
        return self.cells[self.names.index(name)]

    def given(self, quantity: str) -> pa.Array | None:
        """Return what the description says is a quantity or part: a column, or a constant in every row."""
        entry = self.description.entry(quantity)
        if entry is not None:
            return self.column(entry.column)
        if quantity in self.description.constants:
            return pa.repeat(pa.scalar(self.description.constants[quantity], pa.string()), self.n_row)
        return None

    def give(self, quantity: str, column: pa.Array, made_of: Sequence[str]) -> None:
        """Give a quantity by a column that was made of others, or by the delivered one where nothing was to be made."""
        delivered = self.column(made_of[0])
        if len(made_of) == 1 and (column is delivered or column.equals(delivered)):
            self.values[made_of[0]] = REGISTRY[quantity]
        else:
            self.add(quantity, column, made_of)

    def add(self, quantity: str, column: pa.Array, made_of: Sequence[str], *, flag: bool = False) -> None:
        """Add a column that was not delivered."""
        name = f"{quantity} (of {', '.join(made_of)})"
        while name in self.names:
            name += "'"
        self.names.append(name)
        self.units.append("")
        self.cells.append(column)
        (self.flags if flag else self.values)[name] = REGISTRY[quantity]


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
    work = _Work(
        grid, description, list(grid.names), list(grid.units),
        cells=_without_missing(grid, description),
        values=dict(meanings.values),
        flags=dict(meanings.flags),
        constants=dict(grid.constants),
    )  # fmt: skip
    _forget_what_is_said_anew(work)
    _give_meanings(work)
    _join(work)
    _compose_dates(work)
    _compose_positions(work)
    for entry in description.columns:
        if entry.flag is not None:
            _give_flags(work, entry)
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


def _forget_what_is_said_anew(work: _Work) -> None:
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


def _given_instead(work: _Work, column: str, variable: Variable) -> Finding:
    grid, said = work.grid, work.description.constants[variable.name]
    delivered = pc.unique(composed.as_text(work.column(column))).to_pylist()
    found = f"'{delivered[0][:40]}'{' and others' if len(delivered) > 1 else ''}" if delivered else "nothing"
    return Finding(
        "given-in-description", Severity.NOTE,
        f"{at(grid.name, grid.names_line)}: {variable.name} is '{said}' for all rows, as {work.description.source}"
        f" says, in place of {found} in the column {column}.",
        variable=variable.name, value=said, limit=found, file=grid.name, line=grid.names_line,
    )  # fmt: skip


def _give_meanings(work: _Work) -> None:
    description = work.description
    for entry in description.columns:
        position = work.names.index(entry.column)
        if entry.unit is not None:
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


def _join(work: _Work) -> None:
    """Make identity of several columns, their texts joined."""
    for quantity, columns in work.description.joined.items():
        parts = [pc.utf8_trim_whitespace(composed.as_text(work.column(column))) for column in columns]
        whole = pc.binary_join_element_wise(*parts, "_")
        nothing = pc.match_substring_regex(whole, "^_*$")
        work.add(quantity, pc.if_else(nothing, pa.scalar(""), whole), columns)


def _compose_dates(work: _Work) -> None:
    description = work.description
    made_of = [entry.column for entry in description.columns if entry.quantity in DATE_PARTS]
    both = description.entry("date_and_time")
    if both is not None:
        dates, times = composed.split_date_and_time(work.column(both.column), both.format)
        work.add("date", dates, made_of)
        work.add("time", times, made_of)
    elif made_of:
        parts = {name: column for name in DATE_PARTS if (column := work.given(name)) is not None}
        dates, times = composed.dates_of_parts(parts, work.n_row, decimal_comma=work.decimal_comma)
        if "year" in parts:
            work.add("date", dates, made_of)
        if {"hour", "day_of_year"} & set(parts) and description.entry("time") is None:
            work.add("time", times, made_of)
    for quantity, read in (("date", composed.written_dates), ("time", composed.times_of_day)):
        entry = description.entry(quantity)
        if entry is not None:
            work.give(quantity, read(work.column(entry.column), entry.format), [entry.column])


def _compose_positions(work: _Work) -> None:
    for axis in Axis:
        sides = work.given(f"{axis}_hemisphere")
        made_of = [
            entry.column
            for entry in work.description.columns
            if entry.quantity == axis
            or (entry.quantity in POSITION_PARTS and entry.quantity.startswith(axis))
        ]
        whole = work.description.entry(axis)
        parts = [work.given(f"{axis}_{part}") for part in ("degrees", "minutes", "seconds")]
        if whole is not None:
            column = work.column(whole.column)
            work.give(axis, composed.degrees(column, sides, axis, decimal_comma=work.decimal_comma), made_of)
        elif parts[0] is not None:
            column = composed.degrees_of_parts(parts, sides, axis, decimal_comma=work.decimal_comma)
            work.add(axis, column, made_of)


def _give_flags(work: _Work, entry: ColumnEntry) -> None:
    """Read the flags of a quantity: WHP flags as they are; of another scheme, what they are in WHP, beside them."""
    variable = REGISTRY[entry.quantity]
    if entry.flag is None or flag_name(variable.name) not in REGISTRY:
        return
    table = variable.flags or FlagScheme.WATER
    if entry.flag_scheme is Scheme.WHP and entry.flag not in work.flags:
        work.flags[entry.flag] = variable
        return
    delivered = work.column(entry.flag)
    numbers, unreadable = to_flags(delivered)
    mapped = to_whp(entry.flag_scheme, numbers, table, unreadable)
    work.add(variable.name, pa.array(mapped.whp, from_pandas=True), [entry.flag], flag=True)
    if entry.flag_scheme is Scheme.WHP:
        return
    words = mapping_words(entry.flag_scheme, table)
    work.metadata[flag_name(variable.name)] = {
        "long_name": f"{variable.long_name}: flag, from {entry.flag} as delivered",
        "delivered_flags": entry.flag_scheme.value, "conversion": words,
    }  # fmt: skip
    if len(mapped.odd):
        odd = pa.array(mapped.odd)
        work.findings += odd_flag_findings(
            work.grid.name, entry.flag, variable.name, entry.flag_scheme,
            composed.as_text(delivered.take(odd)).to_pylist(),
            work.grid.cells.lines[mapped.odd].tolist(),
        )  # fmt: skip


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


def _planned(work: _Work) -> Described:
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
        words={**grid.words, **words},
        n_delivered=len(grid.names),
        minutes_ahead=description.time_zone,
    )
    return Described(described, columns, (*work.findings, *findings), work.metadata)


def read_grid(described: Described, limits: ReadingSettings, findings: Sequence[Finding]) -> ReadRows:
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
