"""A delivered file as columns of cells, whatever format it came in, before anything is made of them."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from pipeline.findings import rows_word
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from pipeline.reading.cells import Cells
    from pipeline.reading.delivery import DeliveryKind


@dataclass(frozen=True, slots=True)
class Grid:
    """The cells of one file, n_row rows of n_column columns, with what is said of them outside the columns.

    ``raw`` gives the text of a row by its number, for rejects. ``constants`` holds identity quantities that
    all rows share, as text by their name in the registry.
    """

    name: str  # the file
    kind: DeliveryKind
    names: tuple[str, ...]  # (n_column,), as delivered
    units: tuple[str, ...]
    cells: Cells
    raw: Callable[[int], str]
    constants: Mapping[str, str] = field(default_factory=dict)
    names_line: int | None = None  # where the column names stand, in a file of lines
    first_line: int | None = None  # where the data begin
    holders: str = "column names"  # where an identity quantity may be given, in words
    words: Mapping[str, str] = field(default_factory=dict)  # quantity to what this format calls it
    decimal_comma: bool = False
    minutes_ahead: int = 0  # of UTC, the delivered times of day
    n_delivered: int | None = None  # columns that the file has, where others have been added to them
    described_in: str = ""  # where its description begins, in words; "" where it has none
    # the column of dates, what a description calls it, and how a time of day behind them is written
    dates_in: tuple[str, str, str] | None = None

    @property
    def rows_word(self) -> str:
        """What several rows of this file are called."""
        return rows_word(self.name)

    def word(self, quantity: str) -> str:
        """Return what a sentence about this file calls a quantity of the registry."""
        variable = REGISTRY[quantity]
        return self.words.get(quantity, variable.exchange[0] if variable.exchange else quantity)
