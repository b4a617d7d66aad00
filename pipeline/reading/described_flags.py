"""The flags of a described column: WHP flags as they are, those of another scheme as what they are in WHP."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from pipeline.findings import Finding, Severity, at
from pipeline.reading import composed
from pipeline.reading.numbers import to_flags
from pipeline.reading.schemes import Scheme, doubted_scheme, mapping_words, odd_flag_findings, to_whp
from pipeline.variables import REGISTRY, FlagScheme, flag_name

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from pipeline.reading.description import ColumnEntry
    from pipeline.reading.workbench import Workbench


def give_flags(work: Workbench, entry: ColumnEntry) -> None:
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
        "long_name": f"{variable.long_name}: flag, from {entry.flag} as delivered", "delivered_name": entry.flag,
        "delivered_flags": entry.flag_scheme.value, "conversion": words,
    }  # fmt: skip
    if len(mapped.odd):
        odd = pa.array(mapped.odd)
        work.findings += odd_flag_findings(
            work.grid.name, entry.flag, variable.name, entry.flag_scheme,
            composed.as_text(delivered.take(odd)).to_pylist(),
            work.grid.cells.lines[mapped.odd].tolist(),
        )  # fmt: skip


def doubt_schemes(work: Workbench) -> None:
    """Tell where flags speak for another scheme than the description says: once for all columns of which it holds."""
    doubted: dict[tuple[Scheme, FlagScheme], list[tuple[ColumnEntry, NDArray[np.float64]]]] = {}
    for entry in work.description.columns:
        variable = REGISTRY.get(entry.quantity)
        if entry.flag is None or variable is None or flag_name(variable.name) not in REGISTRY:
            continue
        table, flags = variable.flags or FlagScheme.WATER, to_flags(work.column(entry.flag))[0]
        if doubted_scheme(entry.flag_scheme, flags, table):
            doubted.setdefault((entry.flag_scheme, table), []).append((entry, flags))
    work.findings += [
        _doubt(
            work, scheme, table, [entry for entry, _ in found], np.concatenate([flags for _, flags in found])
        )
        for (scheme, table), found in doubted.items()
    ]


def _doubt(
    work: Workbench,
    scheme: Scheme,
    table: FlagScheme,
    entries: Sequence[ColumnEntry],
    flags: NDArray[np.float64],
) -> Finding:
    grid = work.grid
    *others, last = [str(entry.flag) for entry in entries]
    columns = f"{', '.join(others)} and {last}" if others else last
    fact = f"{at(grid.name, grid.names_line)}: the flags {columns} are read as {scheme.upper()} flags and "
    seen, _, remedy = doubted_scheme(scheme, flags, table).rpartition("; ")
    return Finding(
        "flag-scheme", Severity.DOUBT,
        f"{fact}{seen}; {remedy} in {work.description.place(entries[0].line)}{' and below' if others else ''}.",
        variable=None if others else entries[0].quantity, value=scheme.value, limit=seen, file=grid.name,
        line=grid.names_line, to_group=f"{fact}{seen}; whose flags are they?",
    )  # fmt: skip
