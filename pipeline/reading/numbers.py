"""Delivered cells to numbers: what is missing, what is no number, and which codes stand for missing."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.variables import Variable

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]

_MISSING_WORDS = pa.array(["", "nan", "na", "n/a", "null", "none", "-", "--", "*", "."])
_NUMBER = r"^[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]+)?$"

# -999 is the format's code; the others are as found in files (common practice, no source).
_CODES = np.array([-999.0, -999.9, -999.99, -9999.0, -9999.9, -99999.0, -999999.0])
_HUGE = 1e9  # fill values such as -1e10 or 9.97e36: no quantity of the registry comes near
_FILL = -1e10  # of a column that the registry does not know, this and what is beyond the largest count
_BEYOND_COUNTING = 1e30
# These can be honest values, so they are codes only where a flag or the plausible range says so.
_SHORT_CODES = np.array([-9.0, -99.0])
_HIGHEST_CODE = -9.0
_DIGITS = b"0123456789.-"
_MISSING_FLAGS = (1, 5, 9)  # WHP: not received or not calibrated, not reported, not sampled


def to_floats(column: pa.Array, *, decimal_comma: bool = False) -> tuple[FloatArray, NDArray[np.int64]]:
    """Return a delivered column as float64, and the rows that hold something that is no number.

    Both the missing and the unreadable are NaN. Shapes: (n_row,) and (n_unreadable,).
    """
    if not pa.types.is_string(column.type):
        values = np.asarray(column.to_numpy(zero_copy_only=False), dtype=np.float64)
        return values, np.empty(0, dtype=np.int64)
    missing = pc.is_in(pc.utf8_lower(column), value_set=_MISSING_WORDS)
    text = pc.if_else(missing, pa.scalar(None, pa.string()), column)
    if decimal_comma:
        text = pc.replace_substring(text, ",", ".")
    plain = _plain(text)
    if plain is not None:
        return plain, np.empty(0, dtype=np.int64)
    good = pc.fill_null(pc.match_substring_regex(text, _NUMBER), fill_value=True)
    unreadable = np.flatnonzero(~np.asarray(good.to_numpy(zero_copy_only=False), dtype=bool))
    text = pc.if_else(good, text, pa.scalar(None, pa.string()))
    # the cast accepts no leading plus sign
    numbers = pc.utf8_ltrim(text, "+").cast(pa.float64())
    return np.asarray(numbers.to_numpy(zero_copy_only=False), dtype=np.float64), unreadable


def missing_codes(values: FloatArray, variable: Variable | None, flags: FloatArray | None) -> BoolArray:
    """Return where a number is a code for missing, shape (n_row,).

    Parameters
    ----------
    values
        Delivered numbers, in the delivered unit.
    variable
        The quantity, or None for a column that the registry does not know.
    flags
        The delivered flags of the column, NaN where there are none, or None.

    """
    codes: BoolArray = np.abs(values) >= (_HUGE if variable is not None else _BEYOND_COUNTING)
    if variable is None:
        codes |= values == _FILL
    candidates = np.flatnonzero(values <= _HIGHEST_CODE)  # few, or one comparison has settled it
    if not len(candidates):
        return codes
    codes[candidates] |= _one_of(values[candidates], _CODES)
    short = np.zeros(len(values), dtype=bool)
    short[candidates] = _one_of(values[candidates], _SHORT_CODES)
    if not short.any():
        return codes
    said_missing = np.zeros(len(values), dtype=bool)
    if flags is not None:
        said_missing |= np.isin(flags, _MISSING_FLAGS)
    if variable is not None and variable.plausible is not None:
        unlikely = values < variable.plausible[0]
        unflagged = np.isnan(flags) if flags is not None else np.ones(len(values), dtype=bool)
        said_missing |= unlikely & unflagged
    return codes | (short & said_missing)


def _plain(text: pa.Array) -> FloatArray | None:
    """Return text that holds nothing but digits, points and minus signs as numbers, (n_row,), NaN where missing.

    None where a closer look is needed: where it holds anything else, or is no number all the same (12.5.2009).
    """
    start, stop = text.offset, text.offset + len(text)
    _, places, data = text.buffers()
    if data is None or not len(text):
        return None
    ends = np.frombuffer(places, dtype=np.int32)
    if data[int(ends[start]) : int(ends[stop])].to_pybytes().translate(None, _DIGITS):
        return None
    try:
        numbers = text.cast(pa.float64())
    except pa.ArrowInvalid:
        return None
    return np.asarray(numbers.to_numpy(zero_copy_only=False), dtype=np.float64)


def _one_of(values: FloatArray, few: FloatArray) -> BoolArray:
    """Return where values, (n,), are one of a few numbers: faster than a set operation for so few."""
    return np.asarray((values[:, None] == few).any(axis=1))


def to_flags(column: pa.Array) -> tuple[FloatArray, NDArray[np.int64]]:
    """Return delivered flags as float64 (NaN where none), and the rows where a flag is no whole number.

    A flag too large for the column that keeps it (16 bits) counts as no flag that can be read.
    """
    flags, unreadable = to_floats(column)
    with np.errstate(invalid="ignore"):
        odd = ~np.isnan(flags) & ((flags != np.round(flags)) | (np.abs(flags) > np.iinfo(np.int16).max))
    if not odd.any():
        return flags, unreadable
    return np.where(odd, np.nan, flags), np.union1d(unreadable, np.flatnonzero(odd))


def is_number(text: str) -> bool:
    """Return whether one text is a number as files write them."""
    return re.match(_NUMBER, text) is not None
