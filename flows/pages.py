"""What a command has to say as a few kinds of block, and these as plain text or as a Markdown page."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from flows.markdown import escaped, table, visible
from flows.showing import aligned

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

_MOST_IN_CELL = 300  # characters, of Markdown
_MOST_IN_COLUMN = 60  # of plain text, where a long cell would push the others off the screen


@dataclass(frozen=True, slots=True)
class Heading:
    """The name of what follows."""

    words: str
    level: int = 2


@dataclass(frozen=True, slots=True)
class Sentences:
    """Sentences that can stand alone, each on its line."""

    each: Sequence[str]


@dataclass(frozen=True, slots=True)
class Paragraph:
    """Sentences that belong together."""

    words: str


@dataclass(frozen=True, slots=True)
class Grid:
    """Rows of cells, the first of them the names of the columns."""

    rows: Sequence[Sequence[str]]


Block = Heading | Sentences | Paragraph | Grid


def as_text(blocks: Iterable[Block]) -> list[str]:
    """Return blocks as lines of plain text."""
    lines: list[str] = []
    for block in blocks:
        match block:
            case Heading(words, level):
                lines += [*([""] if lines and level > 1 else []), words]
            case Sentences(each):
                lines += [f"  {visible(sentence)}" for sentence in each]
            case Paragraph(words):
                lines.append(f"  {visible(words)}")
            case Grid(rows):
                lines += [
                    f"  {line}" for line in aligned([[_short(visible(cell)) for cell in row] for row in rows])
                ]
    return lines


def _short(cell: str) -> str:
    return cell if len(cell) <= _MOST_IN_COLUMN else f"{cell[:_MOST_IN_COLUMN]}..."


def as_markdown(blocks: Iterable[Block]) -> list[str]:
    """Return blocks as lines of Markdown; no text in them can break the page."""
    lines: list[str] = []
    for block in blocks:
        lines += [""] if lines else []
        match block:
            case Heading(words, level):
                lines.append(f"{'#' * level} {escaped(words)}")
            case Sentences(each):
                lines += [f"- {escaped(sentence)}" for sentence in each]
            case Paragraph(words):
                lines.append(escaped(words))
            case Grid(rows):
                lines += table([[escaped(cell, _MOST_IN_CELL, in_cell=True) for cell in row] for row in rows])
    return lines
