"""Findings about many rows of a file, each told anew of some of them: a file may hold several cruises."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

    from numpy.typing import NDArray

    from pipeline.findings import Finding

    LineArray = NDArray[np.int64]


@dataclass(frozen=True, slots=True, eq=False)
class Spread:
    """A finding about rows on ``lines``, (n,), and how it is told of only some of these."""

    lines: LineArray
    tell: Callable[[LineArray], Finding]

    @property
    def finding(self) -> Finding:
        """The finding about all of them."""
        return self.tell(self.lines)

    def within(self, lines: LineArray) -> Finding | None:
        """Return the finding about those of its rows that are among ``lines``, None where none is."""
        mine = self.lines[np.isin(self.lines, lines)]
        return self.tell(mine) if len(mine) else None


def flat(told: Iterable[Finding | Spread]) -> tuple[Finding, ...]:
    """Return what is told of a whole file."""
    return tuple(one.finding if isinstance(one, Spread) else one for one in told)
