"""A process of its own that reads a NetCDF-4 file: a spoiled one may bring the HDF5 library down, or never end.

Run as a script: the file's bytes come in on standard input; a line of JSON and the bytes of the arrays go out.
"""

from __future__ import annotations

import contextlib
import json
import resource
import sys
from math import prod
from typing import Any

import numpy as np

_NUMBERS = frozenset("iuf")
_MEGABYTE = 1 << 20


def main(values: int, seconds: int) -> None:
    """Read standard input; declare at most ``values`` values, take at most ``seconds`` of processor time."""
    resource.setrlimit(resource.RLIMIT_CPU, (seconds, seconds + 1))
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    data = sys.stdin.buffer.read()
    room = 1024 * _MEGABYTE + 4 * len(data) + 24 * values
    with contextlib.suppress(OSError, ValueError):  # not every system has this one
        resource.setrlimit(resource.RLIMIT_AS, (room, room))
    head, arrays = read(data, values)
    sys.stdout.buffer.write(json.dumps(head).encode() + b"\n")
    for array in arrays:
        sys.stdout.buffer.write(array.tobytes())
    sys.stdout.buffer.flush()


def read(data: bytes, values: int) -> tuple[dict[str, Any], list[np.ndarray[Any, Any]]]:
    """Return what a file declares, and the values of its variables of numbers and characters in that order."""
    from netCDF4 import Dataset  # noqa: PLC0415 - after the limits are set

    with Dataset("delivered.nc", memory=data) as file:
        file.set_auto_maskandscale(False)
        file.set_auto_chartostring(False)
        head: dict[str, Any] = {
            "dimensions": {name: len(dimension) for name, dimension in file.dimensions.items()},
            "attributes": _attributes(file),
            "groups": list(file.groups),
            "variables": [],
            "odd": [],
        }
        declared = sum(prod(variable.shape) for variable in file.variables.values())
        head["declared"] = declared
        arrays: list[np.ndarray[Any, Any]] = []
        if declared > values:
            return head, arrays
        for name, variable in file.variables.items():
            one: dict[str, Any] = {
                "name": name,
                "dimensions": list(variable.dimensions),
                "shape": list(variable.shape),
            }
            if variable.dtype is str:
                one |= {
                    "attributes": _attributes(variable),
                    "texts": [str(t) for t in np.ravel(variable[...])],
                }
            elif isinstance(variable.dtype, np.dtype) and variable.dtype.kind in _NUMBERS | {"S"}:
                array = np.ascontiguousarray(variable[...]).reshape(variable.shape)
                array = array.astype(array.dtype.newbyteorder("<"))
                one |= {"attributes": _attributes(variable), "type": array.dtype.str}
                arrays.append(array)
            else:
                head["odd"].append(name)
                continue
            head["variables"].append(one)
        return head, arrays


def _attributes(holder: Any) -> dict[str, Any]:
    """Return the attributes of a file or variable: texts, or a type and its numbers."""
    found: dict[str, Any] = {}
    for name in holder.ncattrs():
        try:
            value = holder.getncattr(name)
        except (KeyError, AttributeError, UnicodeDecodeError):
            continue  # of a type that has no numbers or letters
        if isinstance(value, str | list):
            found[name] = value
            continue
        array = np.asarray(value)
        if array.dtype.kind in _NUMBERS:
            found[name] = {"type": array.dtype.newbyteorder("<").str, "numbers": np.ravel(array).tolist()}
    return found


if __name__ == "__main__":
    main(int(sys.argv[1]), int(sys.argv[2]))
