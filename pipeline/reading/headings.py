"""The headings of a table that has no format of its own: every column gets a name that it can be called by."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from pipeline.findings import at
from pipeline.problems import DeliveryProblem

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from pipeline.findings import Finding
    from pipeline.reading.cells import Cells
    from pipeline.settings import ReadingSettings

_LONGEST_NAME = 200


@dataclass(frozen=True, slots=True)
class TableCells:
    """The cells of a table before anything is made of them: text, or float64 where the format holds numbers."""

    name: str  # the file
    names: tuple[str, ...]  # (n_column,), each different
    units: tuple[str, ...]
    cells: Cells
    raw: Callable[[int], str]
    names_line: int | None = None
    first_line: int | None = None
    findings: tuple[Finding, ...] = field(default=())


def named(titles: Sequence[str]) -> tuple[str, ...]:
    """Return a name for every column, (n_column,), each different in any case.

    A blank one is called by its place (``column 5``), and the second of one name ``NAME (2)``: tables from
    spreadsheets often have a column ``flag`` behind every quantity.
    """
    taken: set[str] = set()
    names = []
    for position, title in enumerate(titles, start=1):
        written = " ".join(title.split())[:_LONGEST_NAME] or f"column {position}"
        name, number = written, 1
        while name.upper() in taken:
            number += 1
            name = f"{written} ({number})"
        taken.add(name.upper())
        names.append(name)
    return tuple(names)


def refuse_columns(name: str, line: int | None, found: int, limits: ReadingSettings) -> None:
    """Refuse a table of more columns than is borne."""
    if found > limits.columns:
        raise DeliveryProblem(
            "too-many-columns",
            f"{at(name, line)}: found {found} columns; expected at most {limits.columns}; ask for the file to be sent"
            " again, or raise reading.columns in the settings.",
            line,
        )


def refuse_cells(name: str, found: int, limits: ReadingSettings) -> None:
    """Refuse a table of more cells than is borne."""
    if found > limits.cells:
        raise DeliveryProblem(
            "too-large",
            f"{name}: found at least {found} cells; expected at most {limits.cells}; deliver the table in several"
            " files, or raise reading.cells in the settings.",
        )
