"""What the column names of an exchange file mean, as written and as found."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from pipeline.findings import Finding, Severity, at
from pipeline.reading.columns import Heading, Meanings
from pipeline.variables import EXCHANGE_NAMES

if TYPE_CHECKING:
    from pipeline.reading.sheet import Sheet
    from pipeline.variables import Variable

_FLAG = re.compile(r"(.+)_FLAG_W$")


def _folded(name: str) -> str:
    return re.sub(r"[\s_-]", "", name).upper()


_BY_FOLDED_NAME = {_folded(name): variable for name, variable in EXCHANGE_NAMES.items()}


def heading_of(sheet: Sheet) -> Heading:
    """Return what a sheet says of its columns."""
    return Heading(sheet.text.name, sheet.names, sheet.units, sheet.names_line, sheet.names_line + 1)


def exchange_meanings(heading: Heading) -> tuple[Meanings, tuple[Finding, ...]]:
    """Return what the names of the exchange format in ``heading`` mean, and which are spelled oddly."""
    values: dict[str, Variable] = {}
    flags: dict[str, Variable] = {}
    findings = []
    for delivered in heading.names:
        variable = EXCHANGE_NAMES.get(delivered) or _BY_FOLDED_NAME.get(_folded(delivered))
        if variable is not None:
            values[delivered] = variable
            if delivered not in EXCHANGE_NAMES:
                findings.append(_odd_spelling(heading, delivered, variable))
        elif flag := _FLAG.match(delivered.upper()):
            of = _BY_FOLDED_NAME.get(_folded(flag[1]))
            if of is not None:
                flags[delivered] = of
    return Meanings(values, flags), tuple(findings)


def _odd_spelling(heading: Heading, delivered: str, variable: Variable) -> Finding:
    return Finding(
        "column-spelling", Severity.NOTE,
        f"{at(heading.file, heading.names_line)}: the column '{delivered}' was read as {variable.exchange[0]}.",
        variable=variable.name, value=delivered, limit=variable.exchange[0],
        file=heading.file, line=heading.names_line,
    )  # fmt: skip
