"""A grid while a description is being applied to it: columns get a meaning, and others are made of them."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import pyarrow as pa

from pipeline.variables import REGISTRY, Variable

if TYPE_CHECKING:
    from collections.abc import Sequence

    from pipeline.findings import Finding
    from pipeline.reading.description import Description
    from pipeline.reading.grid import Grid
    from pipeline.reading.spread import Spread


@dataclass
class Workbench:
    """What is being made of a grid."""

    grid: Grid
    description: Description
    names: list[str]
    units: list[str]
    cells: list[pa.Array]
    values: dict[str, Variable]
    flags: dict[str, Variable]
    constants: dict[str, str]
    findings: list[Finding | Spread] = field(default_factory=list)
    metadata: dict[str, dict[str, str]] = field(default_factory=dict)
    words: dict[str, str] = field(default_factory=dict)  # quantity to the columns of which it was made
    dates_in: tuple[str, str, str] | None = None  # as of a Grid

    @property
    def n_row(self) -> int:
        """Number of rows."""
        return len(self.grid.cells.lines)

    @property
    def decimal_comma(self) -> bool:
        """Whether a comma in a number is the decimal sign."""
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
        if not flag and made_of[0] in self.grid.names:
            self.words[quantity] = ", ".join(made_of)
