"""What stands in a source catalogue, entry by entry, under the names of its file."""

from __future__ import annotations

import hashlib
import json
from typing import TYPE_CHECKING, Annotated, Literal

import numpy as np
from pydantic import BaseModel, ConfigDict, Field

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

LARGEST = 1e6  # no property of sea water comes near it in the registry's units
SMALLEST = 1e-9  # nor is any known so well; squares of what is far smaller would be zero
MOST_SOURCES = 12
MOST_VERTICES = 500

Number = Annotated[float, Field(strict=True, ge=-LARGEST, le=LARGEST, allow_inf_nan=False)]
Positive = Annotated[float, Field(strict=True, ge=SMALLEST, le=LARGEST, allow_inf_nan=False)]
Code = Annotated[str, Field(pattern=r"^[A-Za-z0-9_-]{1,12}$")]
Text = Annotated[str, Field(min_length=1, max_length=2_000)]
Name = Annotated[str, Field(min_length=1, max_length=60)]
Range = tuple[Number, Number]
Latitude = Annotated[float, Field(strict=True, ge=-90, le=90, allow_inf_nan=False)]
Longitude = Annotated[float, Field(strict=True, ge=-180, le=360, allow_inf_nan=False)]
Month = Annotated[int, Field(strict=True, ge=1, le=12)]
Vertex = tuple[Longitude, Latitude]
Sign = Literal["none", "non_negative", "free"]


class _Entry(BaseModel):
    model_config = ConfigDict(frozen=True, extra="forbid")


class ReferenceState(_Entry):
    """Where potential temperature and practical salinity of a published table are converted."""

    longitude: Longitude  # degrees east
    latitude: Latitude  # degrees north
    pressure: Annotated[float, Field(strict=True, ge=0, le=12_000, allow_inf_nan=False)]  # dbar


class Header(_Entry):
    """What the catalogue is and where its numbers come from."""

    title: Text
    reference: Text
    reference_state: ReferenceState | None = None


class SourceValue(_Entry):
    """Value of a property in a source and its standard uncertainty, in the registry's unit."""

    value: Number
    uncertainty: Positive


class Covariance(_Entry):
    """How the uncertainties of some properties of a source go together."""

    properties: Annotated[tuple[str, ...], Field(min_length=1)]
    matrix: Annotated[tuple[tuple[Number, ...], ...], Field(min_length=1)]  # product of the two units


class Source(_Entry):
    """One source water."""

    code: Code
    name: Name
    note: Annotated[str, Field(max_length=2_000)] = ""
    properties: Annotated[dict[str, SourceValue], Field(min_length=1)]
    covariance: Covariance | None = None  # its diagonal repeats the uncertainties

    def values_of(self, names: Sequence[str]) -> NDArray[np.float64]:
        """Return the source's values of ``names``, (n,), in property units.

        Raises
        ------
        KeyError
            Where the source does not give one of the properties.

        """
        return np.array([self.properties[name].value for name in names])

    def covariance_of(self, names: Sequence[str]) -> NDArray[np.float64]:
        """Return the covariance of the source's values of ``names``, (n, n), in property units.

        Properties of which no covariance is given are independent of all others. The diagonal is the
        squared uncertainties; the matrix of the catalogue, which repeats them, adds how they go together.

        Raises
        ------
        KeyError
            Where the source does not give one of the properties.

        """
        spread = np.array([self.properties[name].uncertainty for name in names])
        together = np.eye(len(names))
        if self.covariance is not None:
            given = np.array(self.covariance.matrix)
            given = (given + given.T) / 2  # the two halves may be rounded apart
            own = np.sqrt(np.diag(given))
            place = {name: index for index, name in enumerate(self.covariance.properties)}
            rows = [index for index, name in enumerate(names) if name in place]
            at = [place[names[index]] for index in rows]
            together[np.ix_(rows, rows)] = (given / np.outer(own, own))[np.ix_(at, at)]
        return together * np.outer(spread, spread)


class Domain(_Entry):
    """Where a set is valid: all that is given must hold. Ranges include their ends."""

    pressure: Range | None = None  # dbar
    depth: Range | None = None  # m
    sigma0: Range | None = None  # kg/m3
    sigma2: Range | None = None  # kg/m3
    sigma4: Range | None = None  # kg/m3
    latitude: Range | None = None  # degrees north
    longitude: Range | None = None  # degrees east, from the west end to the east; west above east crosses 180
    region: Annotated[tuple[Vertex, ...], Field(min_length=3, max_length=MOST_VERTICES)] | None = None
    months: Annotated[tuple[Month, ...], Field(min_length=1)] | None = None
    mixed_layer: Literal["exclude", "include"] = "exclude"


class SourceSet(_Entry):
    """Sources that are solved for together, by which properties, and where."""

    name: Name
    sources: Annotated[tuple[str, ...], Field(min_length=1, max_length=MOST_SOURCES)]
    properties: Annotated[tuple[str, ...], Field(min_length=1)]
    respiration: Sign = "none"
    silicate_per_phosphate: Number = 0.0
    calcium_carbonate: Sign = "none"  # that dissolved, beside respiration
    mass: Literal["exact", "weighted"] = "exact"
    weights: Literal["uncertainty", "variance", "given"] = "uncertainty"
    given_weights: dict[str, Positive] | None = None  # per property, and "mass" for a weighted sum
    mass_weight: Positive | None = None
    valid: Domain = Domain()

    @property
    def processes(self) -> Mapping[str, Literal["non_negative", "free"]]:
        """What changes samples beside mixing, in the order of the further unknowns, and of which sign it can be."""
        each = (("respiration", self.respiration), ("calcium_carbonate", self.calcium_carbonate))
        return {name: sign for name, sign in each if sign != "none"}

    @property
    def unknowns(self) -> str:
        """What the set is solved for in words, such as ``2 shares and respiration``."""
        n_source = len(self.sources)
        words = [
            f"{n_source} share{'s' if n_source != 1 else ''}",
            *(name.replace("_", " ") for name in self.processes),
        ]
        return " and ".join([", ".join(words[:-1]), words[-1]]) if len(words) > 1 else words[0]


class CatalogueFile(_Entry):
    """What a catalogue's file holds."""

    catalogue: Header
    source: Annotated[tuple[Source, ...], Field(min_length=1)]
    set: Annotated[tuple[SourceSet, ...], Field(min_length=1)]  # in the order that decides between equals


class Catalogue(CatalogueFile):
    """A source catalogue as it is used. The same content gives the same hash, however the file is laid out."""

    conversions: tuple[str, ...] = ()  # a sentence for every value that was converted in reading

    @property
    def title(self) -> str:
        """What the catalogue is called."""
        return self.catalogue.title

    @property
    def sources(self) -> Mapping[str, Source]:
        """The sources by code."""
        return {source.code: source for source in self.source}

    @property
    def text(self) -> bytes:
        """The content as JSON, the same bytes for the same content."""
        return json.dumps(self.model_dump(mode="json"), sort_keys=True, separators=(",", ":")).encode()

    @property
    def sha256(self) -> str:
        """Hash of ``text``, in hexadecimal."""
        return hashlib.sha256(self.text).hexdigest()
