"""Which cruises must be made anew: decided from fingerprints alone, by a pure function."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pipeline.archive.contents import Contents


class Reason(StrEnum):
    """Why a cruise is due."""

    NEW = "new"  # the archive has nothing of it
    CHANGED = "changed"  # deliveries, settings, catalogue or version are others than those it was made from
    INCOMPLETE = "incomplete"  # its published tables are missing, damaged or not of one publication


@dataclass(frozen=True, slots=True)
class Currency:
    """The verdict on every cruise."""

    due: Mapping[str, Reason]
    current: tuple[str, ...]
    unasked: tuple[str, ...]  # in the archive, but nobody delivers it any more: stays as it is


def judge(wanted: Mapping[str, str], contents: Contents) -> Currency:
    """Return which cruises are due.

    Parameters
    ----------
    wanted
        By expocode, the fingerprint of what its tables should be made from.
    contents
        What is in the archive.

    """
    due: dict[str, Reason] = {}
    current = []
    for expocode, fingerprint in sorted(wanted.items()):
        cruise = contents.cruises.get(expocode)
        if cruise is None:
            due[expocode] = Reason.NEW
        elif not cruise.is_whole:
            due[expocode] = Reason.INCOMPLETE
        elif cruise.fingerprint != fingerprint:
            due[expocode] = Reason.CHANGED
        else:
            current.append(expocode)
    unasked = tuple(sorted(set(contents.cruises) - set(wanted)))
    return Currency(due, tuple(current), unasked)
