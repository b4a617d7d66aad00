"""Whether a sample was solved, else why not: the codes, and the one table from code to words."""

from __future__ import annotations

from enum import IntEnum
from types import MappingProxyType
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Mapping


class MixingStatus(IntEnum):
    """What became of a sample. Tables hold the label; all but the last come from the solver."""

    SOLVED = 0
    INCOMPLETE = 1
    UNDETERMINED = 2
    ABSURD = 3
    NOT_OPTIMAL = 4
    OUTSIDE = 5

    @property
    def label(self) -> str:
        """The code as it stands in tables."""
        return self.name.lower()


STATUS_WORDS: Mapping[MixingStatus, str] = MappingProxyType(
    {
        MixingStatus.SOLVED: "solved",
        MixingStatus.INCOMPLETE: "so many values are missing that there are fewer equations than unknowns",
        MixingStatus.UNDETERMINED: (
            "the values that are there cannot tell the sources apart: the condition number of the weighted "
            "system is above the limit"
        ),
        MixingStatus.ABSURD: "a value is infinite, or over a million of its weighted units from the sources",
        MixingStatus.NOT_OPTIMAL: "no choice of sources meets the conditions of an optimum within rounding",
        MixingStatus.OUTSIDE: "no set of the catalogue is valid where the sample was taken",
    }
)
