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
        _doubt_scheme(work, entry, to_flags(work.column(entry.flag))[0], table)
        return
    delivered = work.column(entry.flag)
    numbers, unreadable = to_flags(delivered)
    mapped = to_whp(entry.flag_scheme, numbers, table, unreadable)
    _doubt_scheme(work, entry, numbers, table)
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


def _doubt_scheme(work: Workbench, entry: ColumnEntry, flags: NDArray[np.float64], table: FlagScheme) -> None:
    """Tell where the flags speak for another scheme than the description says."""
    words = doubted_scheme(entry.flag_scheme, flags, table)
    if not words:
        return
    grid = work.grid
    fact = f"{at(grid.name, grid.names_line)}: the flags {entry.flag} are read as {entry.flag_scheme.upper()} flags and "
    seen, _, remedy = words.rpartition("; ")
    work.findings.append(
        Finding(
            "flag-scheme", Severity.DOUBT,
            f"{fact}{seen}; {remedy} in {work.description.place(entry.line)}.",
            variable=entry.quantity, value=entry.flag_scheme.value, limit=seen, file=grid.name, line=grid.names_line,
            to_group=f"{fact}{seen}; whose flags are they?",
        )
    )  # fmt: skip
