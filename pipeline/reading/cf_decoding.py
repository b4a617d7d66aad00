"""Stored NetCDF values to numbers, texts and instants, by the attributes that CF and the NetCDF users' guide define."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.reading.netcdf_bytes import StoredVariable, as_text

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]

# What the library stores where nothing was written (netcdf.h), for types that can spare a value.
_DEFAULT_FILLS = {
    "i2": -32767, "i4": -2147483647, "i8": -9223372036854775806, "u2": 65535, "u4": 4294967295,
    "u8": 18446744073709551614, "f4": 9.969209968386869e36, "f8": 9.969209968386869e36,
}  # fmt: skip

_SINCE = re.compile(
    r"\s*([a-z]+)\s+since\s+(\d{1,4})-(\d{1,2})-(\d{1,2})"
    r"(?:[t\s]\s*(\d{1,2})(?::(\d{1,2})(?::(\d{1,2}(?:\.\d*)?))?)?)?\s*(.*)$",
    re.IGNORECASE | re.DOTALL,
)
_SECONDS = {
    **dict.fromkeys(("second", "seconds", "sec", "secs", "s"), 1.0),
    **dict.fromkeys(("millisecond", "milliseconds", "msec", "ms"), 1e-3),
    **dict.fromkeys(("minute", "minutes", "min", "mins"), 60.0),
    **dict.fromkeys(("hour", "hours", "hr", "hrs", "h"), 3600.0),
    **dict.fromkeys(("day", "days", "d"), 86400.0),
}
_CALENDARS = ("", "standard", "gregorian", "proleptic_gregorian")
_UTC = re.compile(r"(z|utc|gmt|[+-]00?(:?00)?)?\.?$", re.IGNORECASE)
_ZONE = re.compile(r"([+-])(\d{1,2}):?(\d{2})?$")
_BARE_ZERO = re.compile(r"0{1,2}:?(00)?$")
_ISO = re.compile(
    r"(\d{4})-(\d{2})-(\d{2})(?:[T ](\d{2}):(\d{2})(?::(\d{2})(?:\.\d+)?)?)?\s*(Z|UTC|\+00:?00)?$"
)

_EPOCH_DAY = 2_440_588  # Julian day number of 1970-01-01
_REFORM = 15821015  # the standard calendar is Julian before, Gregorian from here on
_YEARS = (np.datetime64("1800-01-01", "s"), np.datetime64("2200-01-01", "s"))


@dataclass(frozen=True, slots=True)
class Decoded:
    """Numbers of a variable in its unit, NaN where missing, and which of them lay outside its valid range."""

    values: FloatArray
    invalid: NDArray[np.bool_]
    problem: str = ""  # why the attributes cannot be followed, in words


@dataclass(frozen=True, slots=True)
class DecodedTimes:
    """Instants to the second, NaT where missing, and what of the unit was odd or could not be read, in words."""

    values: NDArray[np.datetime64]
    odd: str = ""
    problem: str = ""


def is_text(variable: StoredVariable) -> bool:
    """Return whether a variable holds letters."""
    return variable.values.dtype.kind in "SUO"


def decode_texts(variable: StoredVariable) -> NDArray[Any]:
    """Return texts; the last dimension of an array of characters is the length of its texts."""
    values = variable.values
    if values.dtype.kind == "O":
        return np.array([as_text(text) for text in values.ravel()], dtype=object).reshape(values.shape)
    if values.ndim == 0 or values.dtype.itemsize > 1:
        flat = [as_text(bytes(text)) for text in values.ravel().tolist()]
        return np.array(flat, dtype=object).reshape(values.shape)
    rows = np.ascontiguousarray(values).reshape(-1, values.shape[-1])
    flat = [as_text(row.tobytes().split(b"\0")[0]) for row in rows]
    return np.array(flat, dtype=object).reshape(values.shape[:-1])


def decode_numbers(variable: StoredVariable) -> Decoded:
    """Return numbers: fill, missing and invalid values are NaN, packed ones unpacked (CF 2.5.1, 8.1)."""
    stored, attributes = variable.values, variable.attributes
    if as_text(attributes.get("_Unsigned", "")).lower() == "true" and stored.dtype.kind == "i":
        stored = (
            stored.view(stored.dtype.newbyteorder("=").str.replace("i", "u"))
            if stored.dtype.isnative
            else (stored.astype(stored.dtype.newbyteorder("=")).view(f"u{stored.dtype.itemsize}"))
        )
    scale, offset = _number(attributes, "scale_factor"), _number(attributes, "add_offset")
    problem = ""
    for name, given in (("scale_factor", scale), ("add_offset", offset)):
        if name in attributes and (given is None or not np.isfinite(given)):
            problem = f"its {name} is '{as_text(attributes[name])[:30]}', no number"
    if scale is not None and scale == 0:
        problem = "its scale_factor is 0"
    missing = _is_fill(stored, attributes)
    invalid = _is_invalid(stored, attributes) & ~missing
    numbers = stored.astype(np.float64)
    if not problem and (scale is not None or offset is not None):
        numbers = _unpacked(stored, scale, offset)
    values = np.where(missing | invalid | ~np.isfinite(numbers), np.nan, numbers)
    return Decoded(values, invalid, problem)


def _number(attributes: Any, name: str) -> Any:
    """Return an attribute as one number of its own type, None where it is none."""
    value = np.ravel(attributes[name]) if name in attributes else np.empty(0)
    return value[0] if value.size == 1 and value.dtype.kind in "iuf" else None


def _unpacked(stored: NDArray[Any], scale: Any, offset: Any) -> FloatArray:
    """Return packed numbers unpacked, in the type of the attributes, which is that of the data before packing."""
    kinds = [given.dtype for given in (scale, offset) if given is not None]
    kind = np.result_type(*kinds) if all(k.kind == "f" for k in kinds) else np.dtype(np.float64)
    work = stored.astype(np.float32 if kind == np.float32 and stored.dtype.itemsize <= 2 else np.float64)
    if scale is not None:
        work = work * scale.astype(work.dtype)
    if offset is not None:
        work = work + offset.astype(work.dtype)
    return np.asarray(work, dtype=np.float64)


def _is_fill(stored: NDArray[Any], attributes: Any) -> NDArray[np.bool_]:
    fills = [
        fill
        for name in ("_FillValue", "missing_value")
        if name in attributes
        for fill in _as_stored(attributes[name], stored.dtype)
    ]
    if "_FillValue" not in attributes and (default := _DEFAULT_FILLS.get(stored.dtype.str[1:])) is not None:
        fills.append(np.asarray(default).astype(stored.dtype))
    found = np.zeros(stored.shape, dtype=bool)
    for fill in fills:
        found |= stored == fill
    return found


def _as_stored(value: Any, kind: np.dtype[Any]) -> list[Any]:
    """Return the numbers of an attribute in the type of the data, where they fit into it."""
    numbers = np.ravel(value)
    if numbers.dtype.kind not in "iuf":
        try:
            numbers = np.array([float(as_text(value))])
        except ValueError:
            return []
    with np.errstate(invalid="ignore", over="ignore"):
        if kind.kind == "u" and numbers.dtype.kind == "i" and numbers.dtype.itemsize == kind.itemsize:
            return list(numbers.astype(kind))  # a fill of unsigned data is written signed
        cast = numbers.astype(kind)
        return [c for c, n in zip(cast, numbers, strict=True) if kind.kind == "f" or c == n]


def _is_invalid(stored: NDArray[Any], attributes: Any) -> NDArray[np.bool_]:
    low, high = _number(attributes, "valid_min"), _number(attributes, "valid_max")
    both = np.ravel(attributes.get("valid_range", np.empty(0)))
    if both.size == 2 and both.dtype.kind in "iuf":
        low, high = both
    invalid = np.zeros(stored.shape, dtype=bool)
    with np.errstate(invalid="ignore"):
        if low is not None:
            invalid |= stored < low
        if high is not None:
            invalid |= stored > high
    return invalid


def decode_times(variable: StoredVariable) -> DecodedTimes:
    """Return instants, UTC, of a time coordinate: numbers since an instant (CF 4.4), or ISO 8601 texts."""
    if is_text(variable):
        return _iso_times(decode_texts(variable))
    decoded = decode_numbers(variable)
    unit, calendar = variable.text("units"), variable.text("calendar").lower()
    nothing = np.full(decoded.values.shape, np.datetime64("NaT", "s"))
    since = _SINCE.match(unit)
    if since is None or since[1].lower() not in _SECONDS:
        return DecodedTimes(nothing, problem=f"its unit '{unit[:60]}' cannot be read")
    if calendar not in _CALENDARS:
        return DecodedTimes(nothing, problem=f"its calendar '{calendar[:30]}' is not that of the world")
    shift, odd, problem = _zone(since[8], unit)
    origin = _origin(since, proleptic=calendar == "proleptic_gregorian")
    if origin is None:
        problem = problem or f"its unit '{unit[:60]}' counts from a day that does not exist"
    if decoded.problem or problem or origin is None:
        return DecodedTimes(nothing, problem=decoded.problem or problem)
    with np.errstate(invalid="ignore", over="ignore"):
        seconds = np.round(decoded.values * _SECONDS[since[1].lower()] + origin - shift)
        known = np.abs(seconds) < 1e11
    values = np.where(known, seconds, 0.0).astype("datetime64[s]")
    known &= (values >= _YEARS[0]) & (values < _YEARS[1])
    return DecodedTimes(np.where(known, values, np.datetime64("NaT", "s")), odd)


def _zone(text: str, unit: str) -> tuple[float, str, str]:
    """Return the seconds that a zone is ahead of UTC, what is odd about it, and why it cannot be read."""
    written = text.strip()
    if _UTC.match(written):
        return 0.0, "", ""
    if zone := _ZONE.match(written):
        seconds = int(zone[2]) * 3600.0 + int(zone[3] or 0) * 60.0
        return (seconds if zone[1] == "+" else -seconds), "", ""
    if _BARE_ZERO.match(written):
        return 0.0, f"its unit '{unit[:60]}' ends in '{written}', which is no time zone; UTC was taken", ""
    return 0.0, "", f"its unit '{unit[:60]}' ends in '{written[:20]}', which cannot be read"


def _origin(since: re.Match[str], *, proleptic: bool) -> float | None:
    """Return the seconds from 1970 to the instant that a time unit counts from, None where there is none such."""
    year, month, day = int(since[2]), int(since[3]), int(since[4])
    hour, minute, second = int(since[5] or 0), int(since[6] or 0), float(since[7] or 0.0)
    if not (1 <= month <= 12 and 1 <= day <= 31 and hour < 24 and minute < 60 and second < 60):
        return None
    days = _julian_day(year, month, day, gregorian=proleptic or year * 10000 + month * 100 + day >= _REFORM)
    return (days - _EPOCH_DAY) * 86400.0 + hour * 3600.0 + minute * 60.0 + second


def _julian_day(year: int, month: int, day: int, *, gregorian: bool) -> int:
    """Return the Julian day number of a date of the Gregorian or the Julian calendar (from memory)."""
    early = (14 - month) // 12
    years, months = year + 4800 - early, month + 12 * early - 3
    days = day + (153 * months + 2) // 5 + 365 * years + years // 4
    return days - years // 100 + years // 400 - 32045 if gregorian else days - 32083


def _iso_times(texts: NDArray[Any]) -> DecodedTimes:
    found = np.full(texts.shape, np.datetime64("NaT", "s"))
    odd = ""
    for place, text in np.ndenumerate(texts):
        match = _ISO.match(text.strip())
        try:
            if match:
                clock = f"T{match[4]}:{match[5]}:{match[6] or '00'}" if match[4] else "T00:00:00"
                found[place] = np.datetime64(f"{match[1]}-{match[2]}-{match[3]}{clock}", "s")
            elif text.strip():
                odd = f"'{text[:30]}' is no ISO 8601 instant in UTC"
        except ValueError:
            odd = f"'{text[:30]}' does not exist"
    return DecodedTimes(found, problem=odd if odd and np.isnat(found).all() else "", odd=odd)
