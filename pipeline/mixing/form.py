"""Words for catalogue entries of broken form: what was found where, what was expected, what to do."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from pipeline.mixing.domains import RANGES
from pipeline.mixing.entries import (
    LARGEST,
    MOST_SOURCES,
    MOST_VERTICES,
    CatalogueFile,
    Covariance,
    Domain,
    Header,
    ReferenceState,
    Source,
    SourceSet,
    SourceValue,
)
from pipeline.toml_text import is_echo

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pydantic import BaseModel, ValidationError

    Location = tuple[str | int, ...]

_NUMBER = f"a number from -{LARGEST:.0f} to {LARGEST:.0f}"
_POSITIVE = f"a number above 0 and up to {LARGEST:.0f}"
_RANGE = "two numbers, [low, high]"
_TEXT = "text"
_EXPECTED = {
    "catalogue": "a table [catalogue] with title and reference",
    "source": "at least one table [[source]]",
    "set": "at least one table [[set]]",
    "code": "1 to 12 of the characters A-Z a-z 0-9 _ -",
    "name": "a name of 1 to 60 characters",
    "value": f"{_NUMBER}, in the unit of the registry",
    "uncertainty": f"{_POSITIVE}, in the unit of the registry",
    "sources": f"a list of 1 to {MOST_SOURCES} source codes",
    "properties": "at least one property",
    "respiration": '"none", "non_negative" or "free"',
    "silicate_per_phosphate": _NUMBER,
    "mass": '"exact" or "weighted"',
    "weights": '"uncertainty", "variance" or "given"',
    "mass_weight": _POSITIVE,
    "given_weights": f"for every property {_POSITIVE}",
    "reference_state": "a table with longitude, latitude and pressure",
    "covariance": "a table with properties and matrix",
    "matrix": f"as many rows of as many numbers, each {_NUMBER}",
    **dict.fromkeys((*RANGES, "longitude"), _RANGE),
    "region": f"3 to {MOST_VERTICES} vertices, [[longitude, latitude], ...], from -180 to 360 and -90 to 90 degrees",
    "months": "a list of months, 1 to 12",
    "mixed_layer": '"exclude" or "include"',
    "valid": "a table of ranges",
}
_STATE = {
    "longitude": "degrees east, from -180 to 360",
    "latitude": "degrees north, from -90 to 90",
    "pressure": "a pressure in dbar, from 0 to 12000",
}
_LONGEST_QUOTE = 60


@dataclass(frozen=True, order=True)
class Fault:
    """One fault of a catalogue."""

    location: Location  # nested keys of the file
    sentence: str  # without the file and the line


def form_faults(error: ValidationError, written: Mapping[str, Any]) -> list[Fault]:
    """Return the faults that pydantic found in the form of single entries of the parsed file ``written``."""
    return [Fault(fault["loc"], _sentence(fault, written)) for fault in error.errors() if not is_echo(fault)]


def _sentence(fault: Any, written: Mapping[str, Any]) -> str:
    location: Location = fault["loc"]
    depth = max(position for position, part in enumerate(location) if isinstance(part, str))
    key, above = str(location[depth]), location[:depth]
    place = place_of(above, written)
    if fault["type"] == "extra_forbidden":
        known = ", ".join(_kind_at(above).model_fields)
        return f"found the unknown key '{key}' in {place}; expected one of {known}; correct or remove it."
    expected = _expected(key, above)
    if fault["type"] == "missing" and depth == len(location) - 1:
        return f"found no '{key}' in {place}; expected {expected}; add it."
    found = repr(fault["input"])
    found = found if len(found) <= _LONGEST_QUOTE else f"{found[:_LONGEST_QUOTE]}..."
    return f"found {found} as '{key}' of {place}; expected {expected}; correct it."


def _expected(key: str, above: Location) -> str:
    match above:
        case ("source", int(), "properties"):
            return "{ value = ..., uncertainty = ... }"
        case ("set", int(), "given_weights"):
            return _POSITIVE
        case ("catalogue", "reference_state"):
            return _STATE.get(key, _TEXT)
        case _:
            return _EXPECTED.get(key, _TEXT)


def _kind_at(location: Location) -> type[BaseModel]:
    match location:
        case ("catalogue",):
            return Header
        case ("catalogue", "reference_state"):
            return ReferenceState
        case ("source", int()):
            return Source
        case ("source", int(), "covariance"):
            return Covariance
        case ("source", int(), "properties", str()):
            return SourceValue
        case ("set", int()):
            return SourceSet
        case ("set", int(), "valid"):
            return Domain
        case _:
            return CatalogueFile


def place_of(location: Location, written: Mapping[str, Any]) -> str:
    """Return what a person calls the entry at ``location`` of the parsed file."""
    match location:
        case ("source" | "set" as kind, int() as index, *rest):
            entries = written.get(kind)
            entry = entries[index] if isinstance(entries, list) else None
            label = entry.get("code" if kind == "source" else "name") if isinstance(entry, dict) else None
            called = f"{kind} '{label}'" if isinstance(label, str) and label else f"{kind} {index + 1}"
            return ", ".join([called, *(str(part) for part in rest if part != "properties")])
        case ("catalogue", *rest):
            return f"[{'.'.join(['catalogue', *(str(part) for part in rest)])}]"
        case _:
            return "the catalogue"
