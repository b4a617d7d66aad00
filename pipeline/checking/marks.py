"""What a check returns, and how marks become check flags and findings in words."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.findings import Finding, Severity, at
from pipeline.usable import CHECK_DOUBT, CHECK_FAULT, CHECK_GOOD, CHECK_MISSING
from pipeline.variables import MEASURED, REGISTRY, check_name

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.usable import Rows

    IntArray = NDArray[np.int64]

_FLAG_OF = {Severity.DOUBT: CHECK_DOUBT, Severity.FAULT: CHECK_FAULT}

# Beyond this many rows of one check and variable, the rest is told in one sentence.
MOST_ROWS_TOLD = 50


@dataclass(frozen=True, slots=True)
class Mark:
    """What one check noticed about one variable.

    ``words`` and ``limit`` complete the sentence "FILE, line N: NAME <words>; expected <limit>.";
    ``values`` holds what was found in each of ``rows``. A doubt or a fault of a measured variable
    sets its check flag in those rows. What concerns a cast or a column as a whole is told in one
    sentence for all its rows: ``together``.
    """

    check: str
    severity: Severity
    variable: str
    rows: IntArray
    values: Sequence[object]
    words: str
    limit: str | Sequence[str]  # one for all rows, or one for each
    together: bool = False


def check_flags(data: Rows, measured: Iterable[str], marks: Iterable[Mark]) -> dict[str, IntArray]:
    """Return our check flags (IODE primary flags) of measured columns, from column name to (n_row,)."""
    flags = {
        name: np.where(np.isnan(data.floats(name)), CHECK_MISSING, CHECK_GOOD).astype(np.int64)
        for name in measured
    }
    for mark in marks:
        flag = _FLAG_OF.get(mark.severity)
        if flag is not None and mark.variable in flags:
            column = flags[mark.variable]
            present = mark.rows[column[mark.rows] != CHECK_MISSING]
            column[present] = np.maximum(column[present], flag)
    return {check_name(name): column for name, column in flags.items()}


def raised(data: Rows, marks: Iterable[Mark]) -> dict[str, IntArray]:
    """Return the check columns that marks made after the checks make graver, (n_row,) each."""
    doubted = [
        mark for mark in marks if mark.severity in _FLAG_OF and check_name(mark.variable) in data.names
    ]
    columns = {}
    for name, flags in check_flags(data, {mark.variable for mark in doubted}, doubted).items():
        before = data.floats(name).astype(np.int64)
        columns[name] = np.where(before == CHECK_MISSING, before, np.maximum(before, flags))
    return columns


def once(data: Rows, marks: Sequence[Mark]) -> list[Mark]:
    """Return the marks to be told: where a whole column is doubted in one sentence, not again each of its values.

    What is said of flags, of values that are missing, and of the column as a whole remains.
    """
    whole = {
        mark.variable
        for mark in marks
        if mark.together
        and mark.severity in _FLAG_OF
        and mark.variable in MEASURED
        and len(mark.rows)
        == np.count_nonzero(data.may_use(mark.variable) & ~np.isnan(data.floats(mark.variable)))
    }
    return [
        mark
        for mark in marks
        if mark.together
        or mark.variable not in whole
        or mark.check.endswith("-flag")
        or np.isnan(data.floats(mark.variable)[mark.rows]).any()
    ]


def findings_of(data: Rows, marks: Iterable[Mark]) -> list[Finding]:
    """Tell marks in words: each bottle row by itself, the CTD levels of a cast together."""
    casts = np.arange(len(data)) if data.is_bottle else data.casts
    findings = []
    for mark in marks:
        if mark.together:
            members = np.arange(len(mark.rows))
            several = bool(np.any(data.casts[mark.rows] != data.casts[mark.rows[0]]))
            findings.append(_finding(data.table, mark, members, rest_of=several))
            continue
        groups = _groups(casts[mark.rows])
        told = groups[:MOST_ROWS_TOLD]
        findings += [_finding(data.table, mark, members) for members in told]
        if len(groups) > len(told):
            rest = np.concatenate(groups[len(told) :])
            findings.append(_finding(data.table, mark, rest, rest_of=True))
    return findings


def _groups(keys: IntArray) -> list[IntArray]:
    """Return positions of equal keys together, in the order of first appearance."""
    order = np.argsort(keys, kind="stable")
    edges = np.flatnonzero(np.diff(keys[order])) + 1
    return sorted(np.split(order, edges), key=lambda members: int(members[0])) if len(keys) else []


def _finding(table: pa.Table, mark: Mark, members: IntArray, *, rest_of: bool = False) -> Finding:
    first = int(members[0])
    row = int(mark.rows[first])
    count = len(members)
    name = REGISTRY[mark.variable].exchange[0] if REGISTRY[mark.variable].exchange else mark.variable
    if mark.variable == "station":
        name = f"{name} {table.column('station')[row].as_py()}"
    file, line = table.column("file")[row].as_py(), table.column("line")[row].as_py()
    value = _written(mark.values[first])
    limit = mark.limit if isinstance(mark.limit, str) else mark.limit[first]
    alone = not (rest_of or mark.together)
    more = f" (and {count - 1} more rows)" if count > 1 and not mark.together else ""
    return Finding(
        mark.check, mark.severity,
        f"{at(file, line)}: {name} {mark.words.format(value=value)}{more}; expected {limit}.",
        variable=mark.variable, value=value, limit=limit, file=file, line=line,
        station=None if rest_of else table.column("station")[row].as_py(),
        cast=None if rest_of else table.column("cast")[row].as_py(),
        sample=table.column("sample")[row].as_py() if "sample" in table.column_names and alone else None,
        count=count,
    )  # fmt: skip


def _written(value: object) -> str:
    return f"{value:g}" if isinstance(value, float) else str(value)
