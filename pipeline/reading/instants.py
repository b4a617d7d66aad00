"""Delivered dates and times of day to UTC instants, in all the spellings that files hold."""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    import pyarrow as pa
    from numpy.typing import NDArray

_COMPACT = re.compile(r"(\d{4})(\d{2})(\d{2})(\.0*)?$")
_DASHED = re.compile(r"(\d{4})[-/](\d{1,2})[-/](\d{1,2})([T ].*)?$")
_SLASHED = re.compile(r"(\d{1,2})[/.](\d{1,2})[/.](\d{2}|\d{4})$")
_COLONS = re.compile(r"(\d{1,2}):(\d{2})(?::(\d{2})(\.\d*)?)?$")
_DIGITS = re.compile(r"(\d{1,4})(\.0*)?$")
_MISSING = re.compile(r"(|-9+(\.[09]*)?|nan|na|null)$", re.IGNORECASE)

_CENTURY_TURN = 50  # two-digit years below are 20xx (common practice, no source)
SECONDS_PER_DAY = 86_400
SECONDS_PER_MINUTE = 60


@dataclass(frozen=True, slots=True)
class Instants:
    """Dates and instants of rows, shape (n_row,) each, NaT where not known."""

    dates: NDArray[np.datetime64]  # whole days
    times: NDArray[np.datetime64]  # seconds; NaT where no time of day was given
    impossible_dates: NDArray[np.int64]  # rows
    impossible_times: NDArray[np.int64]  # rows
    ambiguous: str | None  # a date that could be read month first or day first; month first was taken


def read_instants(dates: pa.Array, times: pa.Array, minutes_ahead: int = 0) -> Instants:
    """Read delivered dates and times of day; each spelling is read once.

    Parameters
    ----------
    dates, times
        Delivered text of n_row rows; blank or a missing code where not given.
    minutes_ahead
        How far the delivered times are ahead of UTC. Where no time of day is given, the date stays.

    """
    date_texts, date_of = _spellings(dates)
    days, ambiguous = _read_dates(date_texts)
    day = days[date_of]
    bad_date = np.array([not _MISSING.match(text) for text in date_texts], dtype=bool) & np.isnat(days)
    time_texts, time_of = _spellings(times)
    seconds = np.array([_seconds(text) for text in time_texts], dtype=np.float64)[time_of]
    known = np.isfinite(seconds)
    instant = day.astype("datetime64[s]") + np.where(known, seconds, 0.0).astype("timedelta64[s]")
    instant[~known] = np.datetime64("NaT")
    if minutes_ahead:
        instant = instant - np.timedelta64(minutes_ahead * SECONDS_PER_MINUTE, "s")
        day = np.where(np.isnat(instant), day, instant.astype("datetime64[D]"))
    return Instants(
        day, instant, np.flatnonzero(bad_date[date_of]), np.flatnonzero(np.isinf(seconds)), ambiguous
    )


def _spellings(texts: pa.Array) -> tuple[list[str], NDArray[np.int64]]:
    """Return the different texts of a column, and which of them each row has, (n_row,)."""
    codes = texts.dictionary_encode()
    return codes.dictionary.to_pylist(), np.asarray(
        codes.indices.to_numpy(zero_copy_only=False), dtype=np.int64
    )


def _read_dates(texts: list[str]) -> tuple[NDArray[np.datetime64], str | None]:
    """Return the day of every spelling, (n_spelling,), and one that is ambiguous where nothing in the file decides."""
    slashed = {text: m for text in texts if (m := _SLASHED.match(text))}
    # one spelling is used throughout a file: a first number over 12 can only be a day
    day_first = any(int(m[1]) > 12 for m in slashed.values()) and not any(
        int(m[2]) > 12 for m in slashed.values()
    )
    decided = any(max(int(m[1]), int(m[2])) > 12 or m[1] == m[2] for m in slashed.values())
    ambiguous = min(slashed) if slashed and not decided else None
    return np.array([_day(text, day_first=day_first) for text in texts], dtype="datetime64[D]"), ambiguous


def full_year(written: str) -> int:
    """Return a year of two or four digits as a number."""
    year = int(written)
    return year if len(written) > 2 else year + (2000 if year < _CENTURY_TURN else 1900)


def _day(text: str, *, day_first: bool) -> np.datetime64:
    if m := _COMPACT.match(text) or _DASHED.match(text):
        year, month, day = int(m[1]), int(m[2]), int(m[3])
    elif m := _SLASHED.match(text):
        first, second, year = int(m[1]), int(m[2]), full_year(m[3])
        month, day = (second, first) if day_first else (first, second)
    else:
        return np.datetime64("NaT", "D")
    try:
        return np.datetime64(date(year, month, day), "D")
    except ValueError:
        return np.datetime64("NaT", "D")


def _seconds(text: str) -> float:
    """Return whole seconds after midnight; NaN where not given, infinity where impossible.

    ``2400`` is legal and means the next day's midnight.
    """
    if _MISSING.match(text):
        return np.nan
    if m := _COLONS.match(text):
        hours, minutes, seconds = int(m[1]), int(m[2]), int(m[3] or 0)
    elif m := _DIGITS.match(text):
        hours, minutes, seconds = *divmod(int(m[1]), 100), 0
    else:
        return np.inf
    total = (hours * 60 + minutes) * 60 + seconds
    return float(total) if minutes < 60 and seconds < 60 and total <= SECONDS_PER_DAY else np.inf
