"""What became of the rows of a delivered file, step by step: every step's numbers add up, or the run fails."""

from __future__ import annotations

import functools
from collections import Counter
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
import pyarrow.compute as pc

from pipeline.problems import BrokenPromise
from pipeline.tables import floats
from pipeline.usable import CHECK_DOUBT, CHECK_FAULT
from pipeline.variables import CHECKED, TRACERS, check_name

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

    import pyarrow as pa
    from numpy.typing import NDArray

SOLVED = "solved"

# Needs no oxygen and no nutrient, so it alone is no tracer of the sample.
_NO_TRACER = "oxygen_solubility"


@dataclass(frozen=True, slots=True)
class Account:
    """The rows of one delivered file by what became of them.

    ``kept == unquestioned + doubted + faulted``; ``with_teos10`` and ``with_tracers`` are parts of it, and the
    counts of ``mixing`` add up to the rows that were given to it: all kept ones of a bottle file, or none.
    """

    rejected: Mapping[str, int] = field(default_factory=dict)  # by reason
    unquestioned: int = 0  # no check of ours doubts a value of the row
    doubted: int = 0  # the worst that a check says of a value of the row is that it is doubtful
    faulted: int = 0  # a check says that a value of the row is bad
    with_teos10: int = 0  # have a Conservative Temperature
    with_tracers: int = 0  # have a tracer of oxygen or nutrients
    mixing: Mapping[str, int] = field(default_factory=dict)  # by status, solved and reasons why not

    @property
    def kept(self) -> int:
        """Rows in the table."""
        return self.unquestioned + self.doubted + self.faulted

    @property
    def given_to_mixing(self) -> int:
        """Samples that were to be resolved into source waters."""
        return sum(self.mixing.values())

    @property
    def resolved(self) -> int:
        """Samples that were."""
        return self.mixing.get(SOLVED, 0)

    @property
    def unresolved(self) -> dict[str, int]:
        """Samples that were not, by reason."""
        return {status: count for status, count in self.mixing.items() if status != SOLVED}


def account(table: pa.Table, reasons: Iterable[str]) -> Account:
    """Return the account of one delivered file.

    Parameters
    ----------
    table
        Its rows as the archive keeps them, n_row, with check flags, TEOS-10, tracers and, for samples, the
        status of the mixing analysis, missing where there were no source waters.
    reasons
        Why each of its other rows was rejected.

    """
    worst = _worst_check(table)
    doubted, faulted = (int(np.count_nonzero(worst == flag)) for flag in (CHECK_DOUBT, CHECK_FAULT))
    return Account(
        rejected=dict(sorted(Counter(reasons).items())),
        unquestioned=table.num_rows - doubted - faulted,
        doubted=doubted,
        faulted=faulted,
        with_teos10=_filled(table, ("conservative_temperature",)),
        with_tracers=_filled(table, [name for name in TRACERS if name != _NO_TRACER]),
        mixing=_statuses(table),
    )


def accounts(table: pa.Table, files: Sequence[tuple[str, int, Sequence[str]]]) -> list[Account]:
    """Return the account of every file that a table was put together from, one after the other.

    Parameters
    ----------
    table
        Samples or casts of a cruise, its rows in the order of the files.
    files
        Of each file its name, its kept rows and why each of the others was rejected.

    Raises
    ------
    BrokenPromise
        If the table has other rows than the files.

    """
    kept = sum(rows for _, rows, _ in files)
    if kept != table.num_rows:
        names = ", ".join(name for name, _, _ in files) or "no file"
        raise BrokenPromise(f"{names}: {kept} rows were kept, {table.num_rows} are in the table")
    made, start = [], 0
    for name, rows, reasons in files:
        one = account(table.slice(start, rows), reasons)
        if wrong := imbalances(one, rows + len(reasons), rows, len(reasons)):
            raise BrokenPromise(f"{name}: {'; '.join(wrong)}")
        made.append(one)
        start += rows
    return made


def imbalances(one: Account, rows: int, kept: int, rejected: int) -> list[str]:
    """Return in words where an account of a file of so many rows does not add up; nothing where it does."""
    sums = [
        ("rows kept and rejected", kept + rejected, rows),
        ("rejected by reason", sum(one.rejected.values()), rejected),
        ("unquestioned, doubted and faulted", one.kept, kept),
    ]
    if one.given_to_mixing:
        sums.append(("resolved and not resolved", one.given_to_mixing, kept))
    wrong = [f"{words}: found {found}, expected {wanted}" for words, found, wanted in sums if found != wanted]
    parts = [("with TEOS-10", one.with_teos10), ("with tracers", one.with_tracers)]
    wrong += [f"{words}: found {found}, expected at most {kept}" for words, found in parts if found > kept]
    numbers = (*one.rejected.values(), one.unquestioned, one.doubted, one.faulted, *one.mixing.values())
    if min((*numbers, one.with_teos10, one.with_tracers), default=0) < 0:
        wrong.append("found a count below zero")
    return wrong


def _worst_check(table: pa.Table) -> NDArray[np.float64]:
    """Return the gravest of our check flags that is a doubt or a fault, (n_row,), 0 where there is none."""
    worst = np.zeros(table.num_rows)
    here = set(table.schema.names)
    for name in CHECKED:
        if check_name(name) in here:
            flags = floats(table, check_name(name))
            grave = (flags == CHECK_DOUBT) | (flags == CHECK_FAULT)
            if grave.any():
                worst[grave] = np.maximum(worst[grave], flags[grave])
    return worst


def _statuses(table: pa.Table) -> dict[str, int]:
    """Return how many rows have each status of the mixing analysis, sorted; none where it was not made."""
    if "mixing_status" not in table.schema.names:
        return {}
    found = pc.value_counts(table.column("mixing_status")).to_pylist()
    return dict(sorted((one["values"], one["counts"]) for one in found if one["values"] is not None))


def _filled(table: pa.Table, names: Iterable[str]) -> int:
    """Return how many rows have a value in at least one of the columns ``names``."""
    here = set(table.schema.names)
    filled = [pc.is_valid(table.column(name)) for name in names if name in here]
    return int(pc.sum(functools.reduce(pc.or_, filled)).as_py() or 0) if filled else 0
