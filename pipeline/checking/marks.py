"""What a check returns, and how marks become check flags and findings in words."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.checking.figures import label, lines, named
from pipeline.findings import Finding, Severity
from pipeline.usable import CHECK_DOUBT, CHECK_FAULT, CHECK_GOOD, CHECK_MISSING
from pipeline.variables import check_name

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Sequence

    from numpy.typing import NDArray

    from pipeline.usable import Rows

    IntArray = NDArray[np.int64]

_FLAG_OF = {Severity.DOUBT: CHECK_DOUBT, Severity.FAULT: CHECK_FAULT}

# Beyond this many sentences of one check and variable, the rest is told in one.
MOST_ROWS_TOLD = 50
# More rows than this of which the same is said are told in one sentence.
FEW = 3


@dataclass(frozen=True, slots=True)
class Mark:
    """What one check noticed about one variable, or about several in the same rows.

    ``words`` and ``limit`` complete the sentence "FILE, line N: NAME <words>; expected <limit>; <outcome>.";
    ``values`` holds what was found in each of ``rows``. A doubt or a fault of a measured variable
    sets its check flag in those rows. What concerns a cast or a column as a whole is told in one
    sentence for all its rows: ``together``. Of other rows, those of which word for word the same is said
    share a sentence, and so do the levels of a CTD cast.
    """

    check: str
    severity: Severity
    variable: str
    rows: IntArray
    values: Sequence[object]
    words: str
    limit: str | Sequence[str]  # one for all rows, or one for each
    together: bool = False
    also: tuple[str, ...] = ()  # further variables of which the same is said
    groups: IntArray | None = None  # (n,): rows with the same number are told in one sentence
    beside: IntArray | None = None  # (n,): the row with which each was compared
    alike: bool = False  # more than a few rows share a sentence, though their values differ
    of: str = "rows"  # what the rows stand for
    outcome: str = ""  # what becomes of the values

    @property
    def variables(self) -> tuple[str, ...]:
        """All variables of which something is said."""
        return (self.variable, *self.also)

    @property
    def doubts(self) -> bool:
        """Whether the mark sets check flags."""
        return self.severity in _FLAG_OF

    def kept(self, keep: NDArray[np.bool_]) -> Mark:
        """Return the mark of those of its rows where ``keep``, (n,), is true."""
        at = np.flatnonzero(keep).tolist()
        return replace(
            self,
            rows=self.rows[at],
            values=[self.values[i] for i in at],
            limit=self.limit if isinstance(self.limit, str) else [self.limit[i] for i in at],
            groups=None if self.groups is None else self.groups[at],
            beside=None if self.beside is None else self.beside[at],
        )


def check_flags(data: Rows, measured: Iterable[str], marks: Iterable[Mark]) -> dict[str, IntArray]:
    """Return our check flags (IODE primary flags) of measured columns, from column name to (n_row,)."""
    flags = {
        name: np.where(np.isnan(data.floats(name)), CHECK_MISSING, CHECK_GOOD).astype(np.int64)
        for name in measured
    }
    for mark in marks:
        flag = _FLAG_OF.get(mark.severity)
        if flag is None:
            continue
        for name in mark.variables:
            if name in flags:
                column = flags[name]
                present = mark.rows[column[mark.rows] != CHECK_MISSING]
                column[present] = np.maximum(column[present], flag)
    return {check_name(name): column for name, column in flags.items()}


def raised(data: Rows, marks: Iterable[Mark]) -> dict[str, IntArray]:
    """Return the check columns that marks made after the checks make graver, (n_row,) each."""
    doubted = [mark for mark in marks if mark.doubts]
    names = {name for mark in doubted for name in mark.variables if check_name(name) in data.names}
    columns = {}
    for name, flags in check_flags(data, names, doubted).items():
        before = data.floats(name).astype(np.int64)
        columns[name] = np.where(before == CHECK_MISSING, before, np.maximum(before, flags))
    return columns


def findings_of(data: Rows, marks: Iterable[Mark]) -> list[Finding]:
    """Tell marks in words: one sentence for a row, or for all rows of which the same is said."""
    findings = []
    for mark in marks:
        if mark.together:
            findings.append(_finding(data, mark, np.arange(len(mark.rows)), ""))
            continue
        groups = _groups(_keys(data, mark))
        told = groups[:MOST_ROWS_TOLD]
        findings += [_finding(data, mark, members, _more(mark, members)) for members in told]
        if len(groups) > len(told):
            rest = np.concatenate(groups[len(told) :])
            findings.append(_finding(data, mark, rest, _besides(mark, len(rest) - 1)))
    return findings


def _keys(data: Rows, mark: Mark) -> IntArray:
    """Return numbers that are the same for rows that are told together, (n,)."""
    if mark.groups is not None:
        return mark.groups
    casts = data.casts[mark.rows]
    own = np.arange(len(mark.rows)) if data.is_bottle else casts
    if mark.alike:
        return np.zeros_like(own) if len(np.unique(own)) > FEW else own
    if len(own) <= FEW:
        return own
    texts = list(zip(map(_written, mark.values), _limits(mark), strict=True))
    # A text that stands in more than a few rows (casts) gets a number of its own, beyond those of rows.
    often = [text for text, count in Counter(texts).items() if count > FEW]
    if not data.is_bottle:
        often = [
            text for text in often if len({c for c, t in zip(casts, texts, strict=True) if t == text}) > FEW
        ]
    beyond = int(own.max()) + 1
    number = {text: beyond + i for i, text in enumerate(often)}
    return np.array([number.get(text, key) for text, key in zip(texts, own.tolist(), strict=True)])


def _limits(mark: Mark) -> Iterator[str]:
    """Yield the limit of each row of a mark."""
    yield from [mark.limit] * len(mark.rows) if isinstance(mark.limit, str) else mark.limit


def _more(mark: Mark, members: IntArray) -> str:
    """Return what a sentence says of the number of its rows."""
    if len(members) == 1:
        return ""
    same = len({_written(mark.values[i]) for i in members.tolist()}) == 1
    if same or mark.alike:
        return "" if mark.groups is not None else f" in {len(members)} {mark.of}"
    return _besides(mark, len(members) - 1)


def _besides(mark: Mark, count: int) -> str:
    return f" (and {count} more {mark.of if count > 1 else mark.of.removesuffix('s')})"


def _groups(keys: IntArray) -> list[IntArray]:
    """Return positions of equal keys together, in the order of first appearance."""
    order = np.argsort(keys, kind="stable")
    edges = np.flatnonzero(np.diff(keys[order])) + 1
    return sorted(np.split(order, edges), key=lambda members: int(members[0])) if len(keys) else []


def _finding(data: Rows, mark: Mark, members: IntArray, more: str) -> Finding:
    first = int(members[0])
    rows = mark.rows[members]
    row, table = int(rows[0]), data.table
    names = named([_name(table, name, row) for name in mark.variables])
    value = _written(mark.values[first])
    limit = mark.limit if isinstance(mark.limit, str) else mark.limit[first]
    one_cast = bool(np.all(data.casts[rows] == data.casts[row]))
    place, within = _place(table, rows)
    outcome = f"; {mark.outcome}" if mark.outcome else ""
    words = mark.words.replace("{value}", value)
    return Finding(
        mark.check, mark.severity, f"{place}: {names} {words}{more}{within}; expected {limit}{outcome}.",
        variable=mark.variable, value=value, limit=limit,
        file=table.column("file")[row].as_py(), line=table.column("line")[row].as_py(),
        station=table.column("station")[row].as_py() if one_cast else None,
        cast=table.column("cast")[row].as_py() if one_cast else None,
        sample=table.column("sample")[row].as_py() if data.is_bottle and len(rows) == 1 and not mark.together else None,
        count=len(rows),
    )  # fmt: skip


def _name(table: pa.Table, variable: str, row: int) -> str:
    return (
        f"{label(variable)} {table.column('station')[row].as_py()}"
        if variable == "station"
        else label(variable)
    )


def _place(table: pa.Table, rows: IntArray) -> tuple[str, str]:
    """Return where rows are, in words, and in how many files where they are in several."""
    file, line = (table.column(name)[int(rows[0])].as_py() for name in ("file", "line"))
    if len(rows) == 1:
        return lines(file, line, line), ""
    some = pa.array(rows)
    files = pc.count_distinct(table.column("file").take(some)).as_py()
    if files > 1:
        return lines(file, line, line), f" of {files} files"
    ends = pc.min_max(table.column("line").take(some)).as_py()
    return lines(file, ends["min"], ends["max"]), ""


def _written(value: object) -> str:
    return f"{value:g}" if isinstance(value, float) else str(value)
