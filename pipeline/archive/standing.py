"""What of one cruise stands where, and what follows from it: pure, so that every case can be tried.

A revision is whole when its five tables are found among the published and the superseded ones together:
a run that is killed while it moves a revision aside leaves it in two places, but whole. A run that is
killed while it moves a new revision in leaves that one not whole, and its published tables are leftovers.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    from collections.abc import Mapping


@dataclass(frozen=True, slots=True)
class Mark:
    """What tells the tables of one publication from those of another."""

    revision: int
    fingerprint: str


@dataclass(frozen=True, slots=True)
class Standing:
    """The tables of one cruise, as found."""

    published: Mapping[str, Mark | None]  # by table; None where the file does not open
    superseded: Mapping[int, frozenset[str]]  # tables by revision

    @property
    def current(self) -> Mark | None:
        """The mark that all five published tables carry, None where they do not carry one."""
        marks = set(self.published.values())
        return marks.pop() if len(marks) == 1 and set(self.published) == set(TABLE_NAMES) else None

    @property
    def last(self) -> int:
        """The last whole revision, 0 where there is none."""
        return max((revision for revision in self._revisions if self._is_whole(revision)), default=0)

    @property
    def next(self) -> int:
        """The number that a new revision gets: one after the last that anything must be kept of."""
        return max(self._kept, *self.superseded, 0) + 1

    @property
    def leftovers(self) -> tuple[str, ...]:
        """Published tables that a killed run left of a new revision, to be removed."""
        return tuple(table for table, mark in self.published.items() if mark and mark.revision > self._kept)

    @property
    def damaged(self) -> tuple[str, ...]:
        """Published tables that do not open, to be removed once those beside them are moved aside."""
        return tuple(table for table, mark in self.published.items() if mark is None)

    @property
    def outgoing(self) -> tuple[tuple[str, int], ...]:
        """Published tables to move aside, each with its revision, before a new revision comes in."""
        return tuple(
            (table, mark.revision)
            for table, mark in self.published.items()
            if mark and mark.revision <= self._kept
        )

    @property
    def is_undamaged(self) -> bool:
        """Whether nothing came after the last whole revision but what a killed run leaves."""
        return self.next == self.last + 1

    @property
    def _kept(self) -> int:
        """The last revision whose published tables are kept.

        A killed run leaves no file that does not open. Where there is one, the tables beside it were
        published whole and spoiled later, so they are no leftovers.
        """
        if None in self.published.values():
            return max((mark.revision for mark in self.published.values() if mark), default=self.last)
        return self.last

    @property
    def _revisions(self) -> set[int]:
        return {mark.revision for mark in self.published.values() if mark} | set(self.superseded)

    def _is_whole(self, revision: int) -> bool:
        here = {table: mark for table, mark in self.published.items() if mark and mark.revision == revision}
        tables = set(here) | self.superseded.get(revision, frozenset())
        return tables == set(TABLE_NAMES) and len({mark.fingerprint for mark in here.values()}) <= 1
