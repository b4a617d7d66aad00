"""Which delivered column is which quantity of the registry, in which unit; all others pass through."""

from __future__ import annotations

import re
from dataclasses import dataclass
from enum import StrEnum
from typing import TYPE_CHECKING

from pipeline.findings import Finding, Severity
from pipeline.problems import DeliveryProblem
from pipeline.units import SAME, Conversion, conversion, is_raw_signal
from pipeline.variables import EXCHANGE_NAMES, IDENTITY, REGISTRY, Kind, Variable, flag_name

if TYPE_CHECKING:
    from pipeline.reading.sheet import Sheet

_FLAG = re.compile(r"(.+)_FLAG_W$")
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


def _folded(name: str) -> str:
    return re.sub(r"[\s_-]", "", name).upper()


_BY_FOLDED_NAME = {_folded(name): variable for name, variable in EXCHANGE_NAMES.items()}


def plan_columns(sheet: Sheet) -> tuple[tuple[Column, ...], tuple[Finding, ...]]:
    """Decide for every delivered column what it is.

    Raises
    ------
    DeliveryProblem
        Where a column name stands twice.

    """
    _refuse_repeats(sheet)
    findings: list[Finding] = []
    known = _known_columns(sheet, findings)
    taken: set[str] = set()
    columns = []
    for position, (delivered, unit) in enumerate(zip(sheet.names, sheet.units, strict=True)):
        column = _column(position, delivered, unit, known)
        if column.name in taken:
            column = _extra(position, delivered, unit, taken)
        taken.add(column.name)
        columns.append(column)
    return tuple(columns), tuple(findings)


def _refuse_repeats(sheet: Sheet) -> None:
    seen: dict[str, int] = {}
    for position, name in enumerate(sheet.names, start=1):
        if name and name.upper() in seen:
            raise DeliveryProblem(
                "repeated-column",
                f"{sheet.text.name}, line {sheet.names_line}: the column '{name}' stands twice, as columns"
                f" {seen[name.upper()]} and {position}; expected each name once; ask which one is meant.",
                sheet.names_line,
            )
        seen[name.upper()] = position


def _known_columns(sheet: Sheet, findings: list[Finding]) -> dict[str, tuple[Variable, Conversion]]:
    """Return the delivered columns that are quantities of the registry in a unit that can be read."""
    known: dict[str, tuple[Variable, Conversion]] = {}
    given: set[str] = set()
    for delivered, unit in zip(sheet.names, sheet.units, strict=True):
        variable = EXCHANGE_NAMES.get(delivered) or _BY_FOLDED_NAME.get(_folded(delivered))
        if variable is None:
            continue
        if variable.name in given:
            findings.append(_second_name(sheet, delivered, variable))
            continue
        given.add(variable.name)
        if delivered not in EXCHANGE_NAMES:
            findings.append(_odd_spelling(sheet, delivered, variable))
        how = SAME if variable.name in IDENTITY else conversion(variable, unit)
        if how is None:
            if not is_raw_signal(unit):
                findings.append(_unknown_unit(sheet, delivered, unit, variable))
            continue
        if variable.name not in IDENTITY:
            _note_unit(sheet, delivered, unit, variable, how, findings)
        known[delivered] = (variable, how)
    return known


def _column(
    position: int, delivered: str, unit: str, known: dict[str, tuple[Variable, Conversion]]
) -> Column:
    if delivered in known:
        variable, how = known[delivered]
        use = Use.IDENTITY if variable.name in IDENTITY else Use.VALUE
        return Column(position, delivered, unit, use, variable.name, variable, how)
    if flag := _FLAG.match(delivered.upper()):
        folded = _folded(flag[1])
        of = next((v for name, (v, _) in known.items() if _folded(name) == folded), None)
        if of is not None and flag_name(of.name) in REGISTRY:
            return Column(position, delivered, unit, Use.FLAG, flag_name(of.name), of)
    return _extra(position, delivered, unit, set())


def _extra(position: int, delivered: str, unit: str, taken: set[str]) -> Column:
    """Return a column that passes through under the name it came with."""
    name = delivered or f"unnamed_{position + 1}"
    while name in REGISTRY or name in taken:
        name = f"{name}_delivered"
    return Column(position, delivered, unit, Use.EXTRA, name)


def _note_unit(
    sheet: Sheet, delivered: str, unit: str, variable: Variable, how: Conversion, findings: list[Finding]
) -> None:
    """Note a unit that is assumed, spelled unusually, or converted."""
    if unit.upper() == variable.exchange_unit.upper():
        return
    line = sheet.names_line + 1
    if not unit.strip():
        if variable.unit in _UNITLESS or not any(sheet.units):
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
            check, Severity.NOTE, f"{sheet.text.name}, line {line}: {words}",
            variable=variable.name, value=unit, limit=variable.exchange_unit, file=sheet.text.name, line=line,
        )
    )  # fmt: skip


def _odd_spelling(sheet: Sheet, delivered: str, variable: Variable) -> Finding:
    return Finding(
        "column-spelling", Severity.NOTE,
        f"{sheet.text.name}, line {sheet.names_line}: the column '{delivered}' was read as"
        f" {variable.exchange[0]}.",
        variable=variable.name, value=delivered, limit=variable.exchange[0],
        file=sheet.text.name, line=sheet.names_line,
    )  # fmt: skip


def _unknown_unit(sheet: Sheet, delivered: str, unit: str, variable: Variable) -> Finding:
    line = sheet.names_line + 1
    return Finding(
        "unknown-unit", Severity.DOUBT,
        f"{sheet.text.name}, line {line}: the unit '{unit}' of {delivered} cannot be read; expected"
        f" {variable.exchange_unit or 'none'}; the column is kept as {delivered}, unconverted and unused.",
        variable=variable.name, value=unit, limit=variable.exchange_unit, file=sheet.text.name, line=line,
    )  # fmt: skip


def _second_name(sheet: Sheet, delivered: str, variable: Variable) -> Finding:
    return Finding(
        "second-name", Severity.DOUBT,
        f"{sheet.text.name}, line {sheet.names_line}: '{delivered}' means {variable.exchange[0]}, which another"
        f" column already gives; the column is kept as {delivered} and unused.",
        variable=variable.name, value=delivered, file=sheet.text.name, line=sheet.names_line,
    )  # fmt: skip
