"""Delivered dates and times of day to UTC instants, in all the spellings that files hold."""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    import pyarrow as pa
    from numpy.typing import NDArray

    DayArray = NDArray[np.datetime64]

_COMPACT = re.compile(r"(\d{4})(\d{2})(\d{2})(\.0*)?$")
_DASHED = re.compile(r"(\d{4})[-/](\d{1,2})[-/](\d{1,2})([T ].*)?$")
_SLASHED = re.compile(r"(\d{1,2})[/.](\d{1,2})[/.](\d{2}|\d{4})$")
_COLONS = re.compile(r"(\d{1,2}):(\d{2})(?::(\d{2})(\.\d*)?)?$")
_DIGITS = re.compile(r"(\d{1,4})(\.0*)?$")
_MISSING = re.compile(r"(|-9+(\.[09]*)?|nan|na|null)$", re.IGNORECASE)

_CENTURY_TURN = 50  # two-digit years below are 20xx (common practice, no source)
SECONDS_PER_DAY = 86_400
SECONDS_PER_MINUTE = 60

# Days from departure within which a cruise samples, and within which it begins to (common practice, no source).
_CRUISE_DAYS = (-1, 90)
_FIRST_DAYS = 14


@dataclass(frozen=True, slots=True)
class DateOrder:
    """How the dates of a file with slashes or points in them were read, and why; "" where nothing told."""

    example: str
    day_first: bool
    because: str


@dataclass(frozen=True, slots=True)
class Instants:
    """Dates and instants of rows, shape (n_row,) each, NaT where not known."""

    dates: NDArray[np.datetime64]  # whole days
    times: NDArray[np.datetime64]  # seconds; NaT where no time of day was given
    impossible_dates: NDArray[np.int64]  # rows
    impossible_times: NDArray[np.int64]  # rows
    order: DateOrder | None = (
        None  # of dates that could be read month first or day first, where there are any
    )


def read_instants(
    dates: pa.Array,
    times: pa.Array,
    minutes_ahead: int = 0,
    departures: Callable[[], DayArray] | None = None,
) -> Instants:
    """Read delivered dates and times of day; each spelling is read once.

    Parameters
    ----------
    dates, times
        Delivered text of n_row rows; blank or a missing code where not given.
    minutes_ahead
        How far the delivered times are ahead of UTC. Where no time of day is given, the date stays.
    departures
        Gives the day on which the cruise of each row left port, NaT where not known, (n_row,). Asked only where the
        dates themselves do not tell whether day or month stands first.

    """
    date_texts, date_of = _spellings(dates)
    slashed = {text: match for text in date_texts if (match := _SLASHED.match(text))}
    order = _order(slashed)
    if order is not None and not order.because and departures is not None:
        order = _by_departure(order, slashed, date_texts, date_of, departures())
    days = _days(date_texts, day_first=order is not None and order.day_first)
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
    return Instants(day, instant, np.flatnonzero(bad_date[date_of]), np.flatnonzero(np.isinf(seconds)), order)


def _spellings(texts: pa.Array) -> tuple[list[str], NDArray[np.int64]]:
    """Return the different texts of a column, and which of them each row has, (n_row,)."""
    codes = texts.dictionary_encode()
    return codes.dictionary.to_pylist(), np.asarray(
        codes.indices.to_numpy(zero_copy_only=False), dtype=np.int64
    )


def _order(slashed: Mapping[str, re.Match[str]]) -> DateOrder | None:
    """Return whether day or month stands first in dates such as ``2/14/2009``, month first where nothing tells.

    One spelling is used throughout a file: a first number over 12 can only be a day.
    """
    if not slashed:
        return None
    over = [min((text for text, m in slashed.items() if int(m[part]) > 12), default=None) for part in (1, 2)]
    day_first = over[0] is not None and over[1] is None
    said = over[0] if day_first else over[1]
    if said is not None:
        return DateOrder(said, day_first, f"{slashed[said][1 if day_first else 2]} is no month")
    open_ones = [text for text, m in slashed.items() if int(m[1]) != int(m[2])]
    # the same day either way
    return DateOrder(min(open_ones), day_first=False, because="") if open_ones else None


def _by_departure(
    order: DateOrder,
    slashed: Mapping[str, re.Match[str]],
    texts: list[str],
    text_of: NDArray[np.int64],
    departures: DayArray,
) -> DateOrder:
    """Return the order in which the dates fit the departure of their cruise, where only one of the two does."""
    written = np.array([text in slashed for text in texts], dtype=bool)[text_of] & ~np.isnat(departures)
    if not written.any():
        return order
    left = departures[written]
    first, all_within = {}, {}
    for day_first in (False, True):
        days = _days(texts, day_first=day_first)[text_of][written]
        after = (days - left).astype(np.int64)
        low, high = _CRUISE_DAYS
        all_within[day_first] = bool(np.all((after >= low) & (after <= high)))
        begun = [after[left == one].min() for one in np.unique(left)]
        first[day_first] = all_within[day_first] and max(begun) <= _FIRST_DAYS
    for fits in (all_within, first):
        if fits[False] != fits[True]:
            return DateOrder(
                order.example, fits[True], f"only so they follow the departure on {left[0]} (EXPOCODE)"
            )
    return order


def _days(texts: list[str], *, day_first: bool) -> DayArray:
    """Return the day of every spelling, (n_spelling,)."""
    return np.array([_day(text, day_first=day_first) for text in texts], dtype="datetime64[D]")


def date_format(example: str) -> str:
    """Return how a date such as ``2/1/2009`` is written where the day stands first, as a description says it."""
    match = _SLASHED.match(example)
    if match is None:
        return "DD/MM/YYYY"
    mark = example[len(match[1])]
    return f"DD{mark}MM{mark}{'YYYY' if len(match[3]) > 2 else 'YY'}"


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
