"""NetCDF files of the classic form as bytes: the same content gives the same bytes, on any day and machine.

NetCDF-4 would be smaller, but its HDF5 library writes the time of day into the file. Text is stored as characters
(UTF-8), since the classic form has no other.
"""

from __future__ import annotations

import io
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.io import netcdf_file

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

FILLS: Mapping[str, Any] = {
    "f8": np.float64(np.nan), "i2": np.int16(np.iinfo(np.int16).min), "i4": np.int32(np.iinfo(np.int32).min),
}  # fmt: skip
_OFFSETS_OF_64_BITS = 2


class ClassicFile:
    """A NetCDF file that is being written."""

    def __init__(self, attributes: Mapping[str, Any]) -> None:
        self._bytes = io.BytesIO()
        self._file = netcdf_file(self._bytes, mode="w", version=_OFFSETS_OF_64_BITS)
        self.names: set[str] = set()
        _describe(self._file, attributes)

    def add_dimension(self, name: str, size: int) -> None:
        """Add a dimension."""
        self._file.createDimension(name, size)

    def add_variable(
        self,
        name: str,
        values: NDArray[Any],
        dimensions: Sequence[str],
        attributes: Mapping[str, Any],
        *,
        filled: bool,
    ) -> None:
        """Add a variable.

        Parameters
        ----------
        name
            Of the variable.
        values
            float64, int16 or int32, or texts as objects.
        dimensions, attributes
            Of the variable; one dimension more is made for texts.
        filled
            Whether values may be missing: then they are the fill value of their kind.

        """
        self.names.add(name)
        own: dict[str, Any] = dict(attributes)
        if values.dtype.kind == "O":
            letters = _letters(values)
            if (letters.view(np.uint8) > 127).any():
                own["_Encoding"] = "utf-8"
            along = f"string{letters.shape[-1]}"
            if along not in self._file.dimensions:
                self.add_dimension(along, letters.shape[-1])
            values, dimensions = letters, (*dimensions, along)
        elif filled:
            own["_FillValue"] = FILLS[values.dtype.str[1:]]
        kind = "c" if values.dtype.kind == "S" else values.dtype.newbyteorder(">")
        variable = self._file.createVariable(name, kind, tuple(dimensions))
        variable.data[...] = values
        _describe(variable, own)

    def as_bytes(self) -> bytes:
        """Return the file."""
        self._file.flush()
        return self._bytes.getvalue()


def _letters(texts: NDArray[Any]) -> NDArray[np.bytes_]:
    """Return texts as characters, (..., n_letter), of the longest one's length."""
    coded = [str(text).encode() for text in texts.ravel()]
    longest = max((len(text) for text in coded), default=0) or 1
    letters = np.array(coded, dtype=f"S{longest}").view("S1")
    return letters.reshape(*texts.shape, longest)


def _describe(what: Any, attributes: Mapping[str, Any]) -> None:
    for key, value in attributes.items():
        setattr(what, key, value.encode() if isinstance(value, str) else np.asarray(value))
