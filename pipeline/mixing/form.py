"""Words for entries of broken form in catalogues and rules: what was found where, what was expected, what to do."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, get_args

from pydantic import BaseModel

from pipeline.mixing.domains import RANGES
from pipeline.mixing.entries import LARGEST, MOST_SOURCES, MOST_VERTICES, SMALLEST
from pipeline.problems import CatalogueProblem
from pipeline.toml_text import is_echo, line_of

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from pydantic import ValidationError

    Location = tuple[str | int, ...]

_NUMBER = f"a number from -{LARGEST:.0f} to {LARGEST:.0f}"
_POSITIVE = f"a number above 0, from {SMALLEST:g} to {LARGEST:.0f}"
_RANGE = "two numbers, [low, high]"
_TEXT = "text"
_EXPECTED = {
    "catalogue": "a table [catalogue] with title and reference",
    "rules": "a table [rules] with title and properties",
    "source": "at least one table [[source]]",
    "set": "at least one table [[set]]",
    "code": "1 to 12 of the characters A-Z a-z 0-9 _ -",
    "name": "a name of 1 to 60 characters",
    "value": f"{_NUMBER}, in the unit of the registry",
    "uncertainty": f"{_POSITIVE}, in the unit of the registry",
    "sources": f"a list of 1 to {MOST_SOURCES} source codes",
    "properties": "a list of at least one property",
    "respiration": '"none", "non_negative" or "free"',
    "silicate_per_phosphate": _NUMBER,
    "calcium_carbonate": '"none", "non_negative" or "free"',
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
    "where": "a table [source.where] of conditions",
    "extremum": "a table [source.extremum] with property, kind and perhaps fraction",
    "property": "a column by its name",
    "kind": '"maximum" or "minimum"',
    "fraction": "a number above 0, up to 1",
    "most_per_cruise": "a whole number from 1 to 1000000",
}
_STATE = {
    "longitude": "degrees east, from -180 to 360",
    "latitude": "degrees north, from -90 to 90",
    "pressure": "a pressure in dbar, from 0 to 12000",
}
_LONGEST_QUOTE = 60


@dataclass(frozen=True, order=True)
class Fault:
    """One fault of a file."""

    location: Location  # nested keys of the file
    sentence: str  # without the file and the line


def form_faults(
    error: ValidationError, written: Mapping[str, Any], root: type[BaseModel], called: str
) -> list[Fault]:
    """Return the faults that pydantic found in the form of single entries, one a key.

    Parameters
    ----------
    error
        What pydantic found.
    written
        The parsed file.
    root
        What it should be.
    called
        What it is called, as "the catalogue".

    """
    faults: dict[Location, Fault] = {}
    for fault in error.errors():
        if is_echo(fault):
            continue
        location: Location = fault["loc"]
        depth = max(position for position, part in enumerate(location) if isinstance(part, str))
        key = location[: depth + 1]
        faults.setdefault(key, Fault(location, _sentence(fault, key, written, root, called)))
    return list(faults.values())


def refusal(name: str, text: str, faults: Iterable[Fault]) -> CatalogueProblem:
    """Return what to raise for the faults of the file ``name``: a sentence each, once, in the order of its lines."""
    placed = sorted({(_line(text, fault.location), fault.sentence) for fault in faults})
    return CatalogueProblem(
        "\n".join(f"{name}, line {line}: {words}" if line else f"{name}: {words}" for line, words in placed)
    )


def _line(text: str, location: Location) -> int:
    """Return the line of a location, 0 where nothing of it is written; of a list of tables, its first."""
    return line_of(text, location) or line_of(text, (*location, 0)) or 0


def _sentence(
    fault: Any, location: Location, written: Mapping[str, Any], root: type[BaseModel], called: str
) -> str:
    """Return the words for a fault in the value of a key; of a list the whole is quoted, unless it is long."""
    key, above = str(location[-1]), location[:-1]
    place = place_of(above, written, called)
    if fault["type"] == "extra_forbidden":
        known = ", ".join(_kind_at(root, above).model_fields)
        return f"found the unknown key '{key}' in {place}; expected one of {known}; correct or remove it."
    expected = _expected(key, above)
    if fault["type"] == "missing" and fault["loc"] == location:
        return f"found no '{key}' in {place}; expected {expected}; add it."
    found, entry = repr(_written_at(written, location)), repr(fault["input"])
    if len(found) > _LONGEST_QUOTE and len(entry) <= _LONGEST_QUOTE:
        return f"found {entry} in the '{key}' of {place}; expected {expected}; correct it."
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
        case ("rules",) if key == "covariance":
            return "true or false"
        case ("source", int(), "where"):
            return _EXPECTED.get(key, _RANGE)  # of any other column too
        case _:
            return _EXPECTED.get(key, _TEXT)


def _kind_at(root: type[BaseModel], location: Location) -> type[BaseModel]:
    """Return what stands at a location of what should be a ``root``."""
    kind = root
    for part in location:
        if part in kind.model_fields:
            kind = _model_in(kind.model_fields[str(part)].annotation) or kind
    return kind


def _model_in(annotation: Any) -> type[BaseModel] | None:
    """Return the model that a field holds, one or many of it; None where it holds none."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    return next((found for part in get_args(annotation) if (found := _model_in(part))), None)


def _written_at(written: Any, location: Location) -> Any:
    for part in location:
        written = written[part]
    return written


def place_of(location: Location, written: Mapping[str, Any], called: str) -> str:
    """Return what a person calls the entry at ``location`` of the parsed file, itself ``called`` so."""
    match location:
        case ("source" | "set" as kind, int() as index, *rest):
            entries = written.get(kind)
            entry = entries[index] if isinstance(entries, list) else None
            label = entry.get("code" if kind == "source" else "name") if isinstance(entry, dict) else None
            called = f"{kind} '{label}'" if isinstance(label, str) and label else f"{kind} {index + 1}"
            return ", ".join([called, *(str(part) for part in rest if part != "properties")])
        case ("catalogue" | "rules" as table, *rest):
            return f"[{'.'.join([table, *(str(part) for part in rest)])}]"
        case _:
            return called
