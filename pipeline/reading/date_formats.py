"""How dates are written, said in the letters of the date itself, such as ``DD.MM.YYYY hh:mm``."""

from __future__ import annotations

import re
from functools import lru_cache
from typing import Any

from pipeline.reading.instants import full_year

MONTHS = ("jan", "feb", "mar", "apr", "may", "jun", "jul", "aug", "sep", "oct", "nov", "dec")
_TOKEN = re.compile(r"YYYY|YY|MMM|MM|DDD|DD|hh|mm|ss")
_PATTERNS = {
    "YYYY": r"(?P<year>\d{4})", "YY": r"(?P<year>\d{2})", "MMM": r"(?P<name>[A-Za-z]{3,9})\.?",
    "MM": r"(?P<month>\d{2})", "DDD": r"(?P<of_year>\d{3})", "DD": r"(?P<day>\d{2})", "hh": r"(?P<hour>\d{2})",
    "mm": r"(?P<minute>\d{2})", "ss": r"(?P<second>\d{2})(?:\.\d*)?",
}  # fmt: skip


def is_date_format(written: Any) -> bool:
    """Return whether a text says how dates, times of day or both are written."""
    if not isinstance(written, str) or not 0 < len(written) <= 60:
        return False
    tokens = _TOKEN.findall(written)
    kinds = [token.replace("YYYY", "YY").replace("MMM", "MM").replace("DDD", "DD") for token in tokens]
    return bool(tokens) and len(set(kinds)) == len(kinds)


def has_date(written: str) -> bool:
    """Return whether a format holds the date."""
    return "YY" in written


def read_written(text: str, written: str) -> tuple[str, str] | None:
    """Return a date as ``YYYYMMDD`` and a time of day as ``hh:mm:ss``, "" where the format has none.

    None where the text is not written so. Whether such a day exists is not asked here, but for a day of the year.
    """
    found = _expression(written).fullmatch(text.strip())
    if found is None:
        return None
    part = found.groupdict()
    date = ""
    if part.get("year"):
        year = full_year(part["year"])
        if part.get("of_year"):
            date = day_of_year_text(year, int(part["of_year"]))
        else:
            name = (part.get("name") or "")[:3].lower()
            month = MONTHS.index(name) + 1 if name in MONTHS else 0 if name else int(part.get("month") or 1)
            date = f"{year:04d}{month:02d}{int(part.get('day') or 1):02d}"
    time = ""
    if part.get("hour"):
        time = f"{int(part['hour'])}:{part.get('minute') or '00':0>2}:{part.get('second') or '00':0>2}"
    return date, time


def day_of_year_text(year: int, number: int) -> str:
    """Return day ``number`` of a year as ``YYYYMMDD``; in words where there is no such day."""
    leap = year % 4 == 0 and (year % 100 != 0 or year % 400 == 0)
    left = number
    for month, days in enumerate((31, 29 if leap else 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31), start=1):
        if 1 <= left <= days:
            return f"{year:04d}{month:02d}{left:02d}"
        left -= days
    return f"day {number} of {year}"


@lru_cache(maxsize=64)
def _expression(written: str) -> re.Pattern[str]:
    """Return what a format matches; a number beside a separator may have one digit where two are usual."""
    pieces = []
    end = 0
    for token in _TOKEN.finditer(written):
        pieces.append(re.escape(written[end : token.start()]))
        alone = written[token.end() : token.end() + 1].isalpha() is False and (
            token.start() == 0
            or not written[token.start() - 1].isalpha()
            or written[token.start() - 1] == "T"
        )
        pattern = _PATTERNS[token[0]]
        pieces.append(pattern.replace(r"\d{2}", r"\d{1,2}", 1) if alone and token[0] != "YY" else pattern)
        end = token.end()
    pieces.append(re.escape(written[end:]))
    return re.compile("".join(pieces))
