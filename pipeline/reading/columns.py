"""Which delivered column is which quantity of the registry, in which unit; all others pass through."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import TYPE_CHECKING

from pipeline.findings import Finding, Severity, at
from pipeline.problems import DeliveryProblem
from pipeline.units import SAME, Conversion, conversion, is_raw_signal
from pipeline.variables import IDENTITY, REGISTRY, Kind, Variable, flag_name

if TYPE_CHECKING:
    from collections.abc import Mapping

# Quantities whose unit line is usually blank or says nothing that matters.
_UNITLESS = frozenset({"1", ""})


class Use(StrEnum):
    """What a delivered column is to the reader."""

    IDENTITY = "identity"
    VALUE = "value"
    FLAG = "flag"
    EXTRA = "extra"  # passes through as it is


@dataclass(frozen=True, slots=True)
class Column:
    """A delivered column and what is made of it."""

    position: int
    delivered: str
    unit: str
    use: Use
    name: str  # its column in our table
    variable: Variable | None = None
    conversion: Conversion = SAME

    @property
    def numeric(self) -> bool:
        """Whether its cells are expected to be numbers."""
        if self.use is Use.FLAG:
            return True
        return self.variable is not None and self.variable.kind is Kind.NUMBER


@dataclass(frozen=True, slots=True)
class Heading:
    """What a file says of its columns: their names and units, (n_column,) each, and where these stand."""

    file: str
    names: tuple[str, ...]
    units: tuple[str, ...]
    names_line: int | None = None
    units_line: int | None = None


@dataclass(frozen=True, slots=True)
class Meanings:
    """What delivered names mean: names of values to their quantity, names of flags to what they speak of."""

    values: Mapping[str, Variable]
    flags: Mapping[str, Variable]


def plan_columns(heading: Heading, meanings: Meanings) -> tuple[tuple[Column, ...], tuple[Finding, ...]]:
    """Decide for every delivered column what it is; one without a meaning, or in no known unit, passes through.

    Raises
    ------
    DeliveryProblem
        Where a column name stands twice.

    """
    _refuse_repeats(heading)
    findings: list[Finding] = []
    known = _known_columns(heading, meanings, findings)
    read = {variable.name for variable, _ in known.values()}
    taken: set[str] = set()
    columns = []
    for position, (delivered, unit) in enumerate(zip(heading.names, heading.units, strict=True)):
        of = meanings.flags.get(delivered)
        if delivered in known:
            variable, how = known[delivered]
            use = Use.IDENTITY if variable.name in IDENTITY else Use.VALUE
            column = Column(position, delivered, unit, use, variable.name, variable, how)
        elif of is not None and of.name in read and flag_name(of.name) in REGISTRY:
            column = Column(position, delivered, unit, Use.FLAG, flag_name(of.name), of)
        else:
            column = _extra(position, delivered, unit, taken)
        if column.name in taken:
            column = _extra(position, delivered, unit, taken)
        taken.add(column.name)
        columns.append(column)
    return tuple(columns), tuple(findings)


def _refuse_repeats(heading: Heading) -> None:
    seen: dict[str, int] = {}
    for position, name in enumerate(heading.names, start=1):
        if name and name.upper() in seen:
            raise DeliveryProblem(
                "repeated-column",
                f"{at(heading.file, heading.names_line)}: the column '{name}' stands twice, as columns"
                f" {seen[name.upper()]} and {position}; expected each name once; ask which one is meant.",
                heading.names_line,
            )
        seen[name.upper()] = position


def _known_columns(
    heading: Heading, meanings: Meanings, findings: list[Finding]
) -> dict[str, tuple[Variable, Conversion]]:
    """Return the delivered columns that are quantities of the registry in a unit that can be read."""
    known: dict[str, tuple[Variable, Conversion]] = {}
    given: set[str] = set()
    for delivered, unit in zip(heading.names, heading.units, strict=True):
        variable = meanings.values.get(delivered)
        if variable is None:
            continue
        if variable.name in given:
            findings.append(_second_name(heading, delivered, variable))
            continue
        given.add(variable.name)
        how = SAME if variable.name in IDENTITY else conversion(variable, unit)
        if how is None:
            if not is_raw_signal(unit):
                findings.append(_unknown_unit(heading, delivered, unit, variable))
            continue
        if variable.name not in IDENTITY:
            _note_unit(heading, delivered, unit, variable, how, findings)
        known[delivered] = (variable, how)
    return known


def _extra(position: int, delivered: str, unit: str, taken: set[str]) -> Column:
    """Return a column that passes through under the name it came with."""
    name = delivered or f"unnamed_{position + 1}"
    while name in REGISTRY or name in taken:
        name = f"{name}_delivered"
    return Column(position, delivered, unit, Use.EXTRA, name)


def _note_unit(
    heading: Heading, delivered: str, unit: str, variable: Variable, how: Conversion, findings: list[Finding]
) -> None:
    """Note a unit that is assumed, spelled unusually, or converted."""
    if unit.upper() == variable.exchange_unit.upper() or (unit == variable.unit and not how.changes):
        return
    if not unit.strip():
        if variable.unit in _UNITLESS or not any(heading.units):
            return  # nothing to say, or said once for the whole file
        check, words = (
            "unit-assumed",
            f"no unit is given for {delivered}; {variable.exchange_unit} was assumed.",
        )
    elif how.changes:
        check, words = "unit-converted", f"{delivered} is in {unit} and was converted: {how.words}."
    elif variable.unit in _UNITLESS:
        return
    else:
        check, words = (
            "unit-spelling",
            f"the unit '{unit}' of {delivered} was read as {variable.exchange_unit}.",
        )
    findings.append(
        Finding(
            check, Severity.NOTE, f"{at(heading.file, heading.units_line)}: {words}",
            variable=variable.name, value=unit, limit=variable.exchange_unit, file=heading.file,
            line=heading.units_line,
        )
    )  # fmt: skip


def contradicting_unit(
    file: str, line: int | None, delivered: str, variable: Variable, units: tuple[str, str], said_in: str
) -> Finding | None:
    """Return a doubt where a file gives a column one unit and its description another that means something else.

    Parameters
    ----------
    file, line
        The file, and where its column names stand.
    delivered, variable
        The column and what it is.
    units
        The unit that the file gives, and the one that the description says, which is taken.
    said_in
        Where the description says so, in words.

    """
    written, said = units
    have, want = conversion(variable, written), conversion(variable, said)
    if not written.strip() or have is None or want is None or _does(have) == _does(want):
        return None
    fact = f"{at(file, line)}: the file gives '{written}' as the unit of {delivered}"
    return Finding(
        "unit-contradicts", Severity.DOUBT,
        f"{fact}, and {said_in} '{said}'; expected one unit; '{said}' was taken; ask which is right.",
        variable=variable.name, value=written, limit=said, file=file, line=line,
        to_group=f"{fact}; we were told that it is '{said}' and took that; which is right?",
    )  # fmt: skip


def _does(how: Conversion) -> tuple[object, ...]:
    """Return what a conversion does, whatever its words."""
    return how.factor, how.offset, how.density, how.scale if how.changes else None


def _unknown_unit(heading: Heading, delivered: str, unit: str, variable: Variable) -> Finding:
    return Finding(
        "unknown-unit", Severity.DOUBT,
        f"{at(heading.file, heading.units_line)}: the unit '{unit}' of {delivered} cannot be read; expected"
        f" {variable.exchange_unit or 'none'}; the column is kept as {delivered}, unconverted and unused.",
        variable=variable.name, value=unit, limit=variable.exchange_unit, file=heading.file,
            line=heading.units_line,
    )  # fmt: skip


def _second_name(heading: Heading, delivered: str, variable: Variable) -> Finding:
    return Finding(
        "second-name", Severity.DOUBT,
        f"{at(heading.file, heading.names_line)}: '{delivered}' means {variable.exchange[0]}, which another"
        f" column already gives; the column is kept as {delivered} and unused.",
        variable=variable.name, value=delivered, file=heading.file, line=heading.names_line,
    )  # fmt: skip
