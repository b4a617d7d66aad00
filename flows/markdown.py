"""Text that others wrote, put into a Markdown page so that it shows as it is and cannot break the page."""

from __future__ import annotations

import re
import unicodedata
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Sequence

# What starts or ends something inside a line: emphasis, code, a link, a tag, an entity, a cell of a table.
_SPECIAL = re.compile(r"[\\`*\[\]<>&|~$]")
# An underscore inside a word, as in a file's name, is one everywhere; elsewhere it may start emphasis.
_LOOSE_UNDERSCORE = re.compile(r"(?<![0-9A-Za-z])_|_(?![0-9A-Za-z])")
# What turns the start of a line into a heading, a list or a rule; inside a cell it does nothing.
_START = re.compile(r"^(#{1,6}(?=\s|$)|[-+](?=\s|$)|[-=]{2,}|\d{1,9}(?=[.)](\s|$)))|(?<=\s)#+$")
# Addresses are not to become links that nobody wrote as such.
_LINK = re.compile(r"(?<=[A-Za-z]):(?=//)|(?<=[Ww]{3})\.|@")


def escaped(text: str, most: int | None = None, *, in_cell: bool = False) -> str:
    r"""Return text as one line of Markdown that shows it.

    Parameters
    ----------
    text
        Anything. Line ends, tabs and characters that do not show stand as ``\n``, ``\t`` and ``\u202e``.
    most
        Characters after which it is cut.
    in_cell
        Whether it stands in a table, where the start of it is no start of a line.

    """
    if most is not None and len(text) > most:
        text = f"{text[:most]}..."
    shown = visible(text).strip()
    shown = re.sub(r" {2,}", lambda run: "\u00a0" * (len(run[0]) - 1) + " ", shown)
    safe = _SPECIAL.sub(_entity, shown)
    safe = _LOOSE_UNDERSCORE.sub(_entity, safe)
    safe = _LINK.sub(_entity, safe)
    return safe if in_cell else _START.sub(_entity, safe)


def visible(text: str) -> str:
    """Return text as one line in which every character shows: what does not is written as its code."""
    return text if text.isprintable() else "".join(_shown(character) for character in text)


def table(rows: Sequence[Sequence[str]]) -> list[str]:
    """Return cells that are Markdown already as a table, the first row its heading."""
    lines = ["| " + " | ".join(cell or " " for cell in row) + " |" for row in rows]
    return [lines[0], "|" + "---|" * len(rows[0]), *lines[1:]]


def _shown(character: str) -> str:
    if character in "\n\r\t":
        return {"\n": "\\n", "\r": "\\r", "\t": "\\t"}[character]
    if character == " " or unicodedata.category(character)[0] not in "CZ":
        return character
    return f"\\u{ord(character):04x}"


def _entity(found: re.Match[str]) -> str:
    return "".join(f"&#{ord(character)};" for character in found[0])
