"""The bytes of a NetCDF file to its dimensions, variables and attributes as stored; what they mean is told elsewhere.

The classic formats are read here; HDF5 in a process of its own, which a spoiled file may bring down or hold up.
"""

from __future__ import annotations

import io
import json
import subprocess
import sys
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.io import netcdf_file

from pipeline.problems import DeliveryProblem

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from pipeline.settings import ReadingSettings

_CLASSIC_MAGICS = (b"CDF\x01", b"CDF\x02")
NETCDF_MAGICS = (*_CLASSIC_MAGICS, b"CDF\x05", b"\x89HDF\r\n\x1a\n")

_WORKER = Path(__file__).with_name("netcdf_worker.py")
_PATIENCE = 5  # times the processor time, for a machine that has other things to do


@dataclass(frozen=True, slots=True)
class StoredVariable:
    """One variable as stored: nothing masked, scaled or decoded."""

    name: str
    dimensions: tuple[str, ...]
    values: NDArray[Any]  # of numbers, single characters (S1) or texts (object)
    attributes: Mapping[str, Any] = field(default_factory=dict)  # texts, or arrays of numbers

    def text(self, name: str) -> str:
        """Return an attribute as text, "" where it has none."""
        return as_text(self.attributes.get(name, ""))


@dataclass(frozen=True, slots=True)
class StoredFile:
    """A NetCDF file as stored."""

    dimensions: Mapping[str, int]
    variables: Mapping[str, StoredVariable]
    attributes: Mapping[str, Any]
    groups: tuple[str, ...] = ()
    odd: tuple[str, ...] = ()  # variables of types that hold no numbers or letters; they were not read

    def text(self, name: str) -> str:
        """Return a global attribute by its name in any case, "" where there is none."""
        for written, value in self.attributes.items():
            if written.lower() == name.lower():
                return as_text(value)
        return ""


def as_text(value: Any) -> str:
    """Return an attribute as text."""
    if isinstance(value, bytes):
        return value.decode("utf-8", errors="replace").strip("\0 ")
    if isinstance(value, str):
        return value.strip("\0 ")
    if isinstance(value, list):
        return " ".join(as_text(part) for part in value)
    return " ".join(
        f"{number:g}" if isinstance(number, float) else str(number) for number in np.ravel(value).tolist()
    )


def open_netcdf(name: str, data: bytes, limits: ReadingSettings) -> StoredFile:
    """Read a NetCDF file as stored.

    Raises
    ------
    DeliveryProblem
        Where the file is cut or spoiled, or declares more values than the settings allow.

    """
    return _classic(name, data, limits) if data.startswith(_CLASSIC_MAGICS) else _apart(name, data, limits)


def _classic(name: str, data: bytes, limits: ReadingSettings) -> StoredFile:
    try:
        with netcdf_file(io.BytesIO(data), "r", mmap=False) as file:
            variables = {
                title: StoredVariable(
                    title, tuple(variable.dimensions), np.array(variable.data), _given(variable)
                )
                for title, variable in file.variables.items()
            }
            dimensions = {
                title: int(size) if size is not None else _records(variables, title)
                for title, size in file.dimensions.items()
            }
            attributes = _given(file)
    except MemoryError as error:
        raise _too_large(name, None, limits) from error
    except Exception as error:
        # the library promises nothing about spoiled files
        raise _broken(name, str(error) or type(error).__name__) from error
    stored = StoredFile(dimensions, variables, attributes)
    _check_shapes(name, stored, limits)
    return stored


def _given(holder: Any) -> dict[str, Any]:
    """Return the attributes of a file or variable; the library shows them in no other way."""
    return dict(holder._attributes)  # noqa: SLF001


def _records(variables: Mapping[str, StoredVariable], dimension: str) -> int:
    sizes = [
        v.values.shape[0] for v in variables.values() if v.dimensions[:1] == (dimension,) and v.values.ndim
    ]
    return max(sizes, default=0)


def _apart(name: str, data: bytes, limits: ReadingSettings) -> StoredFile:
    """Read a file in a process of its own."""
    seconds = limits.netcdf_seconds
    command = [sys.executable, "-I", str(_WORKER), str(limits.netcdf_values), str(seconds)]
    try:
        done = subprocess.run(  # noqa: S603 - our own script and interpreter
            command, input=data, capture_output=True, timeout=_PATIENCE * seconds, check=False
        )
    except subprocess.TimeoutExpired as error:
        raise _broken(name, f"reading it did not end within {_PATIENCE * seconds} s") from error
    if done.returncode < 0:
        raise _broken(name, f"reading it was ended by signal {-done.returncode}")
    if done.returncode:
        last = done.stderr.decode("utf-8", errors="replace").strip().splitlines()
        raise _broken(name, last[-1] if last else f"status {done.returncode}")
    line, _, body = done.stdout.partition(b"\n")
    head = json.loads(line)
    if head["declared"] > limits.netcdf_values:
        raise _too_large(name, head["declared"], limits)
    variables, start = {}, 0
    for one in head["variables"]:
        attributes = _attributes(one["attributes"])
        if "texts" in one:
            values: NDArray[Any] = np.array(one["texts"], dtype=object)
        else:
            kind = np.dtype(one["type"])
            values = np.frombuffer(body, kind, count=int(np.prod(one["shape"], dtype=int)), offset=start)
            start += values.nbytes
        values = values.reshape(one["shape"])
        variables[one["name"]] = StoredVariable(one["name"], tuple(one["dimensions"]), values, attributes)
    stored = StoredFile(
        head["dimensions"],
        variables,
        _attributes(head["attributes"]),
        tuple(head["groups"]),
        tuple(head["odd"]),
    )
    _check_shapes(name, stored, limits)
    return stored


def _attributes(written: Mapping[str, Any]) -> dict[str, Any]:
    return {
        name: np.array(value["numbers"], dtype=value["type"]) if isinstance(value, dict) else value
        for name, value in written.items()
    }


def _check_shapes(name: str, stored: StoredFile, limits: ReadingSettings) -> None:
    """Refuse a file whose arrays are not what its dimensions say, or that holds more than is borne."""
    for variable in stored.variables.values():
        declared = tuple(stored.dimensions.get(dimension, -1) for dimension in variable.dimensions)
        if variable.values.shape != declared:
            raise _broken(
                name,
                f"variable {variable.name[:60]} has shape {variable.values.shape}, its dimensions {declared}",
            )
    count = sum(variable.values.size for variable in stored.variables.values())
    if count > limits.netcdf_values:
        raise _too_large(name, count, limits)


def _broken(name: str, why: str) -> DeliveryProblem:
    words = " ".join(why.split())[:160]
    return DeliveryProblem(
        "broken-netcdf", f"{name}: the NetCDF file is cut or spoiled ({words}); ask for it to be sent again."
    )


def _too_large(name: str, declared: int | None, limits: ReadingSettings) -> DeliveryProblem:
    found = "more values than fit into memory" if declared is None else f"{declared} values"
    return DeliveryProblem(
        "too-large",
        f"{name}: the NetCDF file declares {found}; expected at most {limits.netcdf_values}; deliver the cruise in"
        " several files, or raise reading.netcdf_values in the settings.",
    )
