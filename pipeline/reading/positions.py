"""Latitudes and longitudes as people write them, in degrees, minutes and seconds, to decimal degrees."""

from __future__ import annotations

import re
from enum import StrEnum
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    import pyarrow as pa
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]


class Axis(StrEnum):
    """Which of the two a text is read as; it decides which letters may stand beside the number."""

    LATITUDE = "latitude"
    LONGITUDE = "longitude"


_NUMBER = r"\d+(?:[.,]\d*)?|[.,]\d+"
_SEPARATED = (
    rf"\s*(?:[°ºd:]|deg)?\s*-?\s*(?:({_NUMBER})\s*(?:['’′:m]|min)?\s*(?:({_NUMBER})\s*(?:[\"”″]|''|sec)?)?)?"
)
_WRITTEN = {
    axis: re.compile(rf"([{letters}])?\s*([+-]?)\s*({_NUMBER}){_SEPARATED}\s*([{letters}])?", re.IGNORECASE)
    for axis, letters in ((Axis.LATITUDE, "NS"), (Axis.LONGITUDE, "EW"))
}


def to_degrees(texts: pa.Array, axis: Axis) -> tuple[FloatArray, NDArray[np.int64]]:
    """Return positions as decimal degrees, north and east positive, and the rows that hold none that can be read.

    Both the missing and the unreadable are NaN. Shapes: (n_row,) and (n_unreadable,). Read are ``35 30.0 S``,
    ``35° 30.0' S``, ``S35 30.0``, ``-35.5``, ``35:30:15 S`` and the like; each spelling once.
    """
    codes = texts.dictionary_encode()
    spellings = codes.dictionary.to_pylist()
    degrees = np.array([degrees_of(text, axis) for text in spellings] or [np.nan], dtype=np.float64)
    blank = np.array([not text.strip() for text in spellings] or [True], dtype=bool)
    given = np.asarray(codes.indices.fill_null(-1).to_numpy(zero_copy_only=False), dtype=np.int64)
    values = np.where(given >= 0, degrees[given], np.nan)
    return values, np.flatnonzero((given >= 0) & np.isnan(values) & ~blank[given])


def degrees_of(text: str, axis: Axis) -> float:
    """Return one written position as decimal degrees, NaN where it cannot be read.

    Minutes and seconds are below 60, only the last number has decimals, and a sign and a letter exclude each other.
    """
    match = _WRITTEN[axis].fullmatch(text.strip())
    if match is None:
        return np.nan
    before, sign, *numbers, after = match.groups()
    letters = [letter.upper() for letter in (before, after) if letter]
    parts = [number.replace(",", ".") for number in numbers if number is not None]
    if len(letters) > 1 or (letters and sign) or any("." in part.rstrip(".") for part in parts[:-1]):
        return np.nan
    degrees, minutes, seconds = [float(part) for part in parts] + [0.0] * (3 - len(parts))
    if minutes >= 60.0 or seconds >= 60.0:
        return np.nan
    size = degrees + (minutes + seconds / 60.0) / 60.0
    return -size if sign == "-" or letters in (["S"], ["W"]) else size
