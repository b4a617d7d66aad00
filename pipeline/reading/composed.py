"""Dates, times and positions of rows, put together from the columns that hold their parts."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.reading.date_formats import MONTHS, day_of_year_text, has_date, read_written
from pipeline.reading.instants import full_year
from pipeline.reading.numbers import missing_codes, to_floats
from pipeline.reading.positions import degrees_of

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.reading.positions import Axis

    FloatArray = NDArray[np.float64]

_BOTH = re.compile(r"(.*?\d)(?:[Tt]|\s+)(\d{1,2}:.*|\d{3,4})$")
_COMPACT = re.compile(r"(\d{8})[Tt]?(\d{4})(\d{2})?(?:\.\d*)?$")
_ZONE = re.compile(r"\s*(?:[Zz]|UTC|GMT|[+-]00:?00)$")
_OTHER_ZONE = re.compile(r"(.*\d)\s*([+-])(\d{2}):?(\d{2})$")
_ISO = re.compile(
    r"\d{4}-\d{2}-\d{2}(T\d|$)"
)  # as dates of spreadsheets and Parquet arrive, which are not text
_LEADING_DATE = re.compile(r"\d{4}-\d{2}-\d{2}[T ](?=\d)")
_DATED = r"^\d{1,4}[-/.]\d{1,2}[-/.]\d{1,4}[T ]+\d{1,2}:\d\d"
_DAY_ZERO = r"^(1899|190[0-4])-"  # which spreadsheets put before a time of day
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?$")
_WHOLE = re.compile(r"([+-]?\d+)\.0*$")


def each_once(column: pa.Array, read: Callable[[str], str]) -> pa.Array:
    """Return a column of text with ``read`` done to each different text, (n_row,)."""
    codes = as_text(column).dictionary_encode()
    if not len(codes):
        return pa.array([], pa.string())
    return pa.array([read(text) for text in codes.dictionary.to_pylist()], pa.string()).take(codes.indices)


def as_text(column: pa.Array) -> pa.Array:
    """Return a column as text, "" where missing, (n_row,)."""
    text = column if pa.types.is_string(column.type) else column.cast(pa.string())
    return pc.fill_null(text, "")


def split_date_and_time(column: pa.Array, written: str | None) -> tuple[pa.Array, pa.Array]:
    """Return the dates and the times of day, as text, of a column that holds both, (n_row,) each.

    What cannot be taken apart stays as the date, which tells of it.
    """

    def parts(text: str) -> tuple[str, str]:
        if not text:
            return "", ""
        if written is not None and not _ISO.match(text):
            return read_written(text, written) or (f"not {written}: {text}", "")
        return _split(text)

    return each_once(column, lambda text: parts(text)[0]), each_once(column, lambda text: parts(text)[1])


def _split(text: str) -> tuple[str, str]:
    text = _ZONE.sub("", text.strip())
    if match := _COMPACT.match(text):
        return match[1], f"{match[2][:2]}:{match[2][2:]}:{match[3] or '00'}"
    match = _BOTH.match(text)
    if match is None:
        return text, ""
    date, time = match[1], match[2]
    if zone := _OTHER_ZONE.match(time):
        ahead = (60 * int(zone[3]) + int(zone[4])) * (1 if zone[2] == "+" else -1)
        moved = _in_utc(date, zone[1], ahead)
        return moved or (f"{text} (in a time zone)", "")
    return date, time


def _in_utc(date: str, time: str, ahead: int) -> tuple[str, str] | None:
    try:
        instant = np.datetime64(f"{date}T{time}", "s") - np.timedelta64(60 * ahead, "s")
    except ValueError:
        return None
    day, _, clock = str(instant).partition("T")
    return day, clock


def written_dates(column: pa.Array, written: str | None) -> pa.Array:
    """Return a column of dates as text that a reader of dates can read, (n_row,)."""
    if written is None:
        return as_text(column)

    def read(text: str) -> str:
        if not text or _ISO.match(text):
            return text
        parts = read_written(text, written)
        return f"not {written}: {text}" if parts is None else parts[0 if has_date(written) else 1]

    return each_once(column, read)


def times_of_day(column: pa.Array, written: str | None) -> pa.Array:
    """Return a column of times of day as text; a date before them, as spreadsheets store it, is left out."""
    if written is not None:
        return written_dates(column, written)
    return each_once(column, lambda text: _ZONE.sub("", _LEADING_DATE.sub("", text)))


def is_dated(column: pa.Array) -> NDArray[np.bool_]:
    """Return which cells of a column hold a date before a time of day, (n_row,)."""
    text = as_text(column)
    found = pc.and_not(pc.match_substring_regex(text, _DATED), pc.match_substring_regex(text, _DAY_ZERO))
    return np.asarray(found.to_numpy(zero_copy_only=False), dtype=bool)


def leading_dates(column: pa.Array) -> pa.Array:
    """Return the dates ``YYYY-MM-DD`` before times of day as text, "" where there is none, (n_row,)."""
    return each_once(column, lambda text: text[:10] if _LEADING_DATE.match(text) else "")


def dates_of_parts(
    parts: Mapping[str, pa.Array], n_row: int, *, decimal_comma: bool
) -> tuple[pa.Array, pa.Array]:
    """Return dates and times of day, as text, of their parts, (n_row,) each.

    Parameters
    ----------
    parts
        Columns by the part they give: year, month, day, day_of_year, hour, minute, second.
    n_row
        Number of rows.
    decimal_comma
        How fractions are written.

    """
    texts = {name: as_text(column).to_pylist() for name, column in parts.items()}
    dates, times = [], []
    for row in range(n_row):
        date, time = _of_parts({name: _plain(text[row], decimal_comma) for name, text in texts.items()})
        dates.append(date)
        times.append(time)
    return pa.array(dates, pa.string()), pa.array(times, pa.string())


def _plain(text: str, decimal_comma: bool) -> str:
    text = text.strip()
    return text.replace(",", ".") if decimal_comma else text


def _of_parts(part: Mapping[str, str]) -> tuple[str, str]:
    """Return a date ``YYYYMMDD`` and a time ``hh:mm:ss``; text that no date is where the parts make none."""
    said = "-".join(part[name] for name in ("year", "month", "day", "day_of_year") if part.get(name))
    try:
        date, fraction = _date_of_parts(part)
    except ValueError:
        return said or "parts", ""
    clock = [part.get(name, "") for name in ("hour", "minute", "second")]
    if not clock[0]:
        return date, _clock(fraction * 86_400) if fraction else ""
    try:
        hour, minute, second = (float(text or 0) for text in clock)
    except ValueError:
        return date, ":".join(text for text in clock if text)
    if not (0 <= hour <= 24 and 0 <= minute < 60 and 0 <= second < 60):
        return date, ":".join(text for text in clock if text)
    return date, _clock(hour * 3600 + minute * 60 + second)


def _date_of_parts(part: Mapping[str, str]) -> tuple[str, float]:
    """Return a date and, of a day of the year, the fraction of a day behind it."""
    if not part.get("year"):
        return "", 0.0
    year = full_year(part["year"]) if part["year"].isdigit() else _whole(part["year"])
    if part.get("day_of_year"):
        number = float(part["day_of_year"])
        if not 1 <= number < 367:
            raise ValueError(number)
        return day_of_year_text(year, int(number)), number % 1.0
    name = part.get("month", "")[:3].lower()
    month = MONTHS.index(name) + 1 if name in MONTHS else _whole(part.get("month", ""))
    day = _whole(part.get("day", ""))
    if not (0 < year < 10_000 and 0 < month < 100 and 0 < day < 100):
        raise ValueError(part)
    return f"{year:04d}{month:02d}{day:02d}", 0.0


def _whole(text: str) -> int:
    number = float(text)
    if not number.is_integer() or abs(number) > 1e6:
        raise ValueError(text)
    return int(number)


def _clock(seconds: float) -> str:
    whole = round(seconds)
    return f"{whole // 3600}:{whole // 60 % 60:02d}:{whole % 60:02d}"


def degrees(column: pa.Array, hemispheres: pa.Array | None, axis: Axis, *, decimal_comma: bool) -> pa.Array:
    """Return a column of latitudes or longitudes as decimal degrees, as text, (n_row,).

    Degrees and minutes in one cell (``35°30.5'S``) are understood. What is no position stays as it is.
    """
    if hemispheres is None and not pa.types.is_string(column.type):
        return column
    sides = as_text(hemispheres).to_pylist() if hemispheres is not None else [""] * len(column)
    texts = as_text(column).to_pylist()
    return pa.array(
        [
            _degrees(text, side, axis, decimal_comma=decimal_comma)
            for text, side in zip(texts, sides, strict=True)
        ],
        pa.string(),
    )


def degrees_of_parts(
    parts: Sequence[pa.Array | None], hemispheres: pa.Array | None, axis: Axis, *, decimal_comma: bool
) -> pa.Array:
    """Return decimal degrees, as text, of columns of degrees, minutes and seconds (the last may be none), (n_row,)."""
    given = [as_text(part).to_pylist() for part in parts if part is not None]
    sides = as_text(hemispheres).to_pylist() if hemispheres is not None else [""] * len(given[0])
    joined = (_joined(_plain(text, decimal_comma) for text in row) for row in zip(*given, strict=True))
    return pa.array(
        [_degrees(text, side, axis, decimal_comma=False) for text, side in zip(joined, sides, strict=True)],
        pa.string(),
    )


def _joined(parts: Iterable[str]) -> str:
    """Return degrees, minutes and seconds in one text; a number table may write whole ones as ``35.0``."""
    written = [part for part in parts if part]
    return " ".join([*(_WHOLE.sub(r"\1", part) for part in written[:-1]), *written[-1:]])


def _degrees(written: str, side: str, axis: Axis, *, decimal_comma: bool) -> str:
    """Return decimal degrees as text, what was written where it is a plain number or no position."""
    text = _plain(written, decimal_comma)
    letter = side.strip()[:1].upper()
    if not letter and _NUMBER.match(text):
        return written
    if text.startswith("-") and letter in {"S", "W"}:
        letter = ""  # south or west said twice
    said = f"{text} {letter}".strip()
    found = degrees_of(said, axis)
    return f"{text} {side}".strip() if np.isnan(found) else repr(found)


def floats_of(column: pa.Array, *, decimal_comma: bool) -> FloatArray:
    """Return a column as numbers, NaN where missing or no number, (n_row,)."""
    numbers, _ = to_floats(column, decimal_comma=decimal_comma)
    return np.where(missing_codes(numbers, None, None), np.nan, numbers)


def floats_of_texts(column: pa.Array, *, decimal_comma: bool) -> FloatArray:
    """Return a column as numbers as they stand, with no code taken for missing, (n_row,)."""
    return to_floats(column, decimal_comma=decimal_comma)[0]
