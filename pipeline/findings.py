"""What a check noticed: the mark it sets on rows, and the finding it tells in words."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from pathlib import PurePosixPath


class Severity(StrEnum):
    """How much a finding matters."""

    NOTE = "note"  # worth knowing; changes nothing
    DOUBT = "doubt"  # the value may be wrong
    FAULT = "fault"  # the value is wrong or cannot be read


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing that a check noticed, in a sentence that can be sent back to the group.

    A finding about a whole file or column has no station; one about a run of CTD levels has the
    line of the first and their number in ``count``.
    """

    check: str
    severity: Severity
    message: str
    variable: str | None = None
    value: str | None = None
    limit: str | None = None
    file: str | None = None
    line: int | None = None
    station: str | None = None
    cast: int | None = None
    sample: str | None = None
    count: int = 1
    to_group: str = ""  # the sentence for those who made the file, where it is another


@dataclass(frozen=True, slots=True)
class Reject:
    """A delivered row that cannot be used, with its text and why."""

    file: str
    line: int | None  # None for a member of a zip that was refused whole
    raw: str
    reason: str
    message: str
    expocode: str | None = None
    to_group: str = ""  # as of a finding


# What the rows of a file that is not made of lines are called.
_ROW_WORDS = {".nc": "record", ".nc4": "record", ".cdf": "record", ".xlsx": "row", ".parquet": "row"}


def at(file: str, line: int | None) -> str:
    """Return in words where a row of a delivered file is."""
    if line is None:
        return file
    return f"{file}, {_ROW_WORDS.get(PurePosixPath(file).suffix.lower(), 'line')} {line}"


def rows_word(file: str) -> str:
    """Return what several rows of a delivered file are called."""
    return "records" if _ROW_WORDS.get(PurePosixPath(file).suffix.lower()) == "record" else "rows"
