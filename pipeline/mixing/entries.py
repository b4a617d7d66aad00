"""What stands in a source catalogue, entry by entry, under the names of its file."""

from __future__ import annotations

import hashlib
import json
from typing import TYPE_CHECKING, Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field

if TYPE_CHECKING:
    from collections.abc import Mapping

LARGEST = 1e6  # no property of sea water comes near it in the registry's units
MOST_SOURCES = 12

Number = Annotated[float, Field(strict=True, ge=-LARGEST, le=LARGEST, allow_inf_nan=False)]
Positive = Annotated[float, Field(strict=True, gt=0, le=LARGEST, allow_inf_nan=False)]
Code = Annotated[str, Field(pattern=r"^[A-Za-z0-9_-]{1,12}$")]
Text = Annotated[str, Field(min_length=1, max_length=2_000)]
Name = Annotated[str, Field(min_length=1, max_length=60)]
Range = tuple[Number, Number]


class _Entry(BaseModel):
    model_config = ConfigDict(frozen=True, extra="forbid")


class Header(_Entry):
    """What the catalogue is and where its numbers come from."""

    title: Text
    reference: Text


class SourceValue(_Entry):
    """Value of a property in a source and its standard uncertainty, in the registry's unit."""

    value: Number
    uncertainty: Positive


class Source(_Entry):
    """One source water."""

    code: Code
    name: Name
    note: Annotated[str, Field(max_length=2_000)] = ""
    properties: Annotated[dict[str, SourceValue], Field(min_length=1)]


class Domain(_Entry):
    """Where a set is valid: closed ranges, all of which must hold. West above east crosses the date line."""

    pressure: Range | None = None  # dbar
    sigma0: Range | None = None  # kg/m3
    latitude: Range | None = None  # degrees north
    longitude: Range | None = None  # degrees east, from the west end to the east end


class SourceSet(_Entry):
    """Sources that are solved for together, by which properties, and where."""

    name: Name
    sources: Annotated[tuple[str, ...], Field(min_length=1, max_length=MOST_SOURCES)]
    properties: Annotated[tuple[str, ...], Field(min_length=1)]
    respiration: Literal["none", "non_negative", "free"] = "none"
    silicate_per_phosphate: Number = 0.0
    mass: Literal["exact", "weighted"] = "exact"
    weights: Literal["uncertainty", "variance", "given"] = "uncertainty"
    given_weights: dict[str, Positive] | None = None  # per property, and "mass" for a weighted sum
    mass_weight: Positive | None = None
    valid: Domain = Domain()


class Catalogue(_Entry):
    """A source catalogue. The same content gives the same hash, however the file is laid out."""

    catalogue: Header
    source: Annotated[tuple[Source, ...], Field(min_length=1)]
    set: Annotated[tuple[SourceSet, ...], Field(min_length=1)]  # in the order that decides between equals

    @property
    def title(self) -> str:
        """What the catalogue is called."""
        return self.catalogue.title

    @property
    def sources(self) -> Mapping[str, Source]:
        """The sources by code."""
        return {source.code: source for source in self.source}

    @property
    def sha256(self) -> str:
        """Hash of the content, in hexadecimal."""
        text = json.dumps(self.model_dump(mode="json"), sort_keys=True, separators=(",", ":"))
        return hashlib.sha256(text.encode()).hexdigest()
