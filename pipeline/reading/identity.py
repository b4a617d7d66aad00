"""Whose row it is: expocode, station, cast, sample and position; rows without these cannot be used."""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.findings import at
from pipeline.problems import DeliveryProblem

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]

# ICES platform code and date, or the older styles with a leg behind '/' or '_'.
_EXPOCODE = re.compile(r"(?=.{3,40}$)[0-9A-Z][0-9A-Z_-]*(\.[0-9A-Z_-]+)*(/[0-9A-Z_-]{1,8})?$")
_DEPARTURE = re.compile(r"(\d{4})(\d{2})(\d{2})$")
_SPREADSHEET = re.compile(r"[+-]?\d+(\.\d+)?E[+-]?\d+$")
_MISSING_TEXT = re.compile(r"(-9+(\.0*)?|NAN|NA|NULL|NONE)?$")

# Row reject reasons, in the order they are looked for, and how each reads in a sentence; {word} is what the file
# calls the quantity.
REASONS: Mapping[str, str] = {
    "no-expocode": "the EXPOCODE is {value}; expected a cruise code such as ZZV120090214",
    "no-station": "the station ({word}) is {value}; expected a station name",
    "no-cast": "the cast ({word}) is {value}; expected a whole number",
    "no-position": "the position is {value}; expected a latitude in -90..90 and a longitude in -180..360",
    "no-pressure": "the pressure ({word}) is {value}; expected a number of decibars",
}


@dataclass(frozen=True, slots=True)
class Identity:
    """Identity columns of n_row rows, and for each row why it cannot be used, if so."""

    expocode: pa.Array
    station: pa.Array
    cast: NDArray[np.int64]
    latitude: FloatArray
    longitude: FloatArray  # -180..180
    unusable: Mapping[str, BoolArray]  # reason to rows, each (n_row,)
    shifted_longitudes: BoolArray  # whose longitude came as 180..360, (n_row,)

    @property
    def usable(self) -> BoolArray:
        """Rows that can be used, shape (n_row,)."""
        return np.asarray(~np.any(list(self.unusable.values()), axis=0), dtype=bool)


def usable_expocode(written: str) -> str | None:
    """Return an expocode in capitals, None where the text cannot be one."""
    code = written.strip().upper()
    return code if _EXPOCODE.match(code) and not _SPREADSHEET.match(code) else None


def departures(expocode: pa.Array) -> NDArray[np.datetime64]:
    """Return the day of departure that ends an expocode, NaT where it ends with none, (n_row,)."""
    codes = expocode.dictionary_encode()
    known = [_departure(code or "") for code in codes.dictionary.to_pylist()]
    days = np.array([*known, np.datetime64("NaT", "D")], dtype="datetime64[D]")
    return days[np.asarray(codes.indices.fill_null(-1).to_numpy(zero_copy_only=False), dtype=np.int64)]


def _departure(expocode: str) -> np.datetime64:
    ending = _DEPARTURE.search(expocode)
    try:
        return np.datetime64(date(*map(int, ending.groups())), "D") if ending else np.datetime64("NaT", "D")
    except ValueError:
        return np.datetime64("NaT", "D")


def refuse_expocode(name: str, written: str, line: int | None) -> DeliveryProblem:
    """Return the refusal of a file whose expocode cannot be used."""
    place = at(name, line)
    code = written.strip().upper()
    if _SPREADSHEET.match(code):
        return DeliveryProblem(
            "spoiled-expocode",
            f"{place}: the EXPOCODE '{written}' was turned into a number by a spreadsheet; expected a cruise code"
            " such as ZZV120090214; put the code back in the file, as text, and deliver it again,"
            " or give it in a cruise.toml beside the file ([[file]] with files and [file.constants] with expocode).",
            line,
        )
    if not code or _MISSING_TEXT.match(code):
        return DeliveryProblem(
            "no-expocode",
            f"{place}: the EXPOCODE is empty; expected a cruise code such as ZZV120090214; add it and deliver the"
            " file again.",
            line,
        )
    reason = "path-expocode" if "/" in code or "\\" in code or ".." in code else "no-expocode"
    return DeliveryProblem(
        reason,
        f"{place}: the EXPOCODE '{written[:60]}' cannot name a cruise; expected letters, digits, '_' or '-', such"
        " as ZZV120090214; correct it and deliver the file again.",
        line,
    )


def identify(
    expocode: pa.Array,
    station: pa.Array,
    cast: FloatArray | None,
    latitude: FloatArray,
    longitude: FloatArray,
) -> Identity:
    """Judge the identity of rows.

    Parameters
    ----------
    expocode, station
        Delivered text, (n_row,).
    cast
        Delivered cast numbers, NaN where not given, or None where there is no such column (then 1).
    latitude, longitude
        Delivered degrees, NaN where missing, (n_row,).

    """
    codes = expocode.dictionary_encode()
    meant = pa.array([usable_expocode(text) for text in codes.dictionary.to_pylist()], type=pa.string())
    clean = meant.take(codes.indices) if len(meant) else expocode
    no_station = pc.match_substring_regex(pc.utf8_upper(station), f"^{_MISSING_TEXT.pattern}")
    casts = np.ones(len(latitude)) if cast is None else cast
    no_cast = ~np.isfinite(casts) | (casts != np.round(casts)) | (np.abs(casts) > 1e6)
    no_position = ~((np.abs(latitude) <= 90.0) & (longitude >= -180.0) & (longitude <= 360.0))
    east = longitude > 180.0
    return Identity(
        expocode=clean,
        station=station,
        cast=np.where(no_cast, 0, casts).astype(np.int64),
        latitude=latitude,
        longitude=np.where(east, longitude - 360.0, longitude),
        unusable={
            "no-expocode": np.asarray(pc.is_null(clean).to_numpy(zero_copy_only=False), dtype=bool),
            "no-station": np.asarray(no_station.to_numpy(zero_copy_only=False), dtype=bool),
            "no-cast": no_cast,
            "no-position": no_position,
        },
        shifted_longitudes=east & ~no_position,
    )
