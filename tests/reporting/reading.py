"""Reading a page as a browser would: its elements, tables and embedded data."""

from __future__ import annotations

import json
from html.parser import HTMLParser
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pathlib import Path


class Page(HTMLParser):
    """What a page holds: text by the id of the element around it, tables by id, attributes, scripts."""

    def __init__(self, path: Path) -> None:
        super().__init__(convert_charrefs=True)
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.tables: dict[str, list[list[str]]] = {}
        self.scripts: list[tuple[dict[str, str | None], str]] = []
        self.text: list[str] = []
        self._table = ""
        self._script: dict[str, str | None] | None = None
        self.feed(path.read_text(encoding="utf-8"))

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        attributes = dict(attrs)
        self.tags.append((tag, attributes))
        if tag == "table":
            self._table = attributes.get("id") or ""
            self.tables[self._table] = []
        elif tag == "tr" and self._table:
            self.tables[self._table].append([])
        elif tag in {"td", "th"} and self._table:
            self.tables[self._table][-1].append("")
        elif tag == "script":
            self._script = attributes
            self.scripts.append((attributes, ""))

    def handle_endtag(self, tag: str) -> None:
        if tag == "table":
            self._table = ""
        elif tag == "script":
            self._script = None

    def handle_data(self, data: str) -> None:
        if self._script is not None:
            self.scripts[-1] = (self._script, self.scripts[-1][1] + data)
            return
        self.text.append(data)
        if self._table and self.tables[self._table] and self.tables[self._table][-1]:
            self.tables[self._table][-1][-1] += data

    @property
    def words(self) -> str:
        """All its text, with single spaces."""
        return " ".join(" ".join(self.text).split())

    @property
    def data(self) -> dict[str, Any]:
        """The embedded data."""
        (text,) = (text for attributes, text in self.scripts if attributes.get("type") == "application/json")
        return dict(json.loads(text))

    def rows(self, table: str) -> list[list[str]]:
        """Return the cells of a table, without the heading."""
        return [[" ".join(cell.split()) for cell in row] for row in self.tables[table][1:]]
