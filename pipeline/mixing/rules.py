"""The rules by which sources are found in an archive: what stands in their file, and its reading."""

from __future__ import annotations

import hashlib
import json
import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError

from pipeline.mixing.domain_faults import domain_faults
from pipeline.mixing.entries import Code, Domain, Name, Range, SourceSet, Text
from pipeline.mixing.faults import entry_faults
from pipeline.mixing.form import Fault, form_faults, refusal
from pipeline.mixing.source_faults import no_property
from pipeline.mixing.toml_files import parsed, text_of
from pipeline.variables import IDENTITY, MEASURED, REGISTRY, SEAWATER, TRACERS, Kind

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping
    from pathlib import Path

    from pipeline.problems import CatalogueProblem

LEAST_SAMPLES = 5  # of a source: fewer have no spread to speak of (common practice, no source)
_WHAT = "rules for sources"


class _Rule(BaseModel):
    model_config = ConfigDict(frozen=True, extra="forbid")


class Header(_Rule):
    """What holds for all sources."""

    title: Text
    properties: Annotated[tuple[str, ...], Field(min_length=1)]
    covariance: Annotated[bool, Field(strict=True)] = True
    most_per_cruise: Annotated[int, Field(strict=True, ge=1, le=1_000_000)] = 10  # more samples weigh no more


class Where(Domain):
    """Which samples are looked at: a domain, and a closed range of any other column that holds numbers."""

    model_config = ConfigDict(extra="allow")
    __pydantic_extra__: dict[str, Range] = Field(init=False)

    @property
    def domain(self) -> Domain:
        """What a catalogue can say too."""
        return Domain(**{name: getattr(self, name) for name in Domain.model_fields})

    @property
    def ranges(self) -> Mapping[str, Range]:
        """Ranges of columns that a domain does not know, by column."""
        return self.__pydantic_extra__


class Extremum(_Rule):
    """Only the samples nearest to the largest or smallest value of a column are kept."""

    property: str
    kind: Literal["maximum", "minimum"]
    fraction: Annotated[float, Field(strict=True, gt=0, le=1)] = 0.1  # of the weight of the samples looked at


class SourceRule(_Rule):
    """How one source is found."""

    code: Code
    name: Name
    where: Where
    extremum: Extremum | None = None


class Rules(_Rule):
    """The rules of a catalogue. The same content gives the same hash, however the file is laid out."""

    rules: Header
    source: Annotated[tuple[SourceRule, ...], Field(min_length=1)]
    set: Annotated[tuple[SourceSet, ...], Field(min_length=1)]  # goes into the catalogue as it is

    @property
    def sha256(self) -> str:
        """Hash of the content, in hexadecimal."""
        text = json.dumps(self.model_dump(mode="json"), sort_keys=True, separators=(",", ":"))
        return hashlib.sha256(text.encode()).hexdigest()


@dataclass(frozen=True, slots=True)
class RulesFile:
    """Rules and the text they stand in, so that a fault of theirs can be told with its line."""

    name: str
    text: str
    rules: Rules

    def problem(self, faults: Iterable[Fault]) -> CatalogueProblem:
        """Return what to raise for faults: a sentence each, in the order of the file."""
        return refusal(self.name, self.text, faults)


def read_rules(path: Path) -> RulesFile:
    """Read the rules by which sources are found.

    Raises
    ------
    CatalogueProblem
        With one sentence, on a line of its own, for everything that is wrong, in the order of the file.

    """
    return parse_rules(text_of(path, _WHAT), str(path))


def parse_rules(text: str, name: str) -> RulesFile:
    """Make rules of the text of the file ``name``. Raises as ``read_rules`` does."""
    written = parsed(text, name, _WHAT)
    try:
        rules = Rules.model_validate(written)
    except ValidationError as error:
        raise refusal(name, text, form_faults(error, written, Rules, "the rules")) from error
    read = RulesFile(name, text, rules)
    if faults := [*_header_faults(rules.rules), *_where_faults(rules)] or _set_faults(rules):
        raise read.problem(faults)
    return read


def _header_faults(header: Header) -> Iterator[Fault]:
    location = ("rules", "properties")
    for name in dict.fromkeys(header.properties):
        if words := no_property(name):
            yield Fault(location, words)
        if header.properties.count(name) > 1:
            yield Fault(location, f"found the property '{name}' twice; expected it once; remove one.")


def _where_faults(rules: Rules) -> Iterator[Fault]:
    for index, rule in enumerate(rules.source):
        place = ("source", index, "where")
        for name, words in domain_faults(rule.where.domain):
            yield Fault((*place, name), f"source '{rule.code}': {words}")
        for name, ends in rule.where.ranges.items():
            if not is_searchable(name):
                yield Fault((*place, name), _no_column(rule.code, name, "where"))
            elif ends[0] > ends[1]:
                yield Fault(
                    (*place, name),
                    f"source '{rule.code}': found the empty range [{ends[0]:g}, {ends[1]:g}] of {name}; expected "
                    "[low, high]; swap the ends.",
                )
        if rule.extremum and not is_searchable(rule.extremum.property):
            yield Fault(
                ("source", index, "extremum", "property"),
                _no_column(rule.code, rule.extremum.property, "extremum"),
            )


def _no_column(code: str, name: str, place: str) -> str:
    return (
        f"source '{code}': found the column '{name}' in {place}; expected a delivered or derived quantity of the "
        "registry that holds numbers; correct its spelling or remove it."
    )


def is_searchable(name: str) -> bool:
    """Return whether samples can be chosen by a column: it holds numbers that mixing has no part in."""
    known = name in {*IDENTITY, *MEASURED, *SEAWATER, *TRACERS}
    return known and REGISTRY[name].kind in {Kind.NUMBER, Kind.INTEGER}


def _within(name: str, part: float) -> float:
    """Return a value that sea water can have, another for another part from -1 to 1."""
    low, high = REGISTRY[name].plausible or (-1.0, 1.0)
    return (low + high) / 2 + part * (high - low) / 2.001


def _set_faults(rules: Rules) -> list[Fault]:
    """Return what the sets would be refused for whatever the values of the sources turn out to be."""
    standing_in = [
        {
            "code": rule.code,
            "name": rule.name,
            "properties": {
                name: {"value": _within(name, math.cos((index + 1) * (column + 1))), "uncertainty": 1e-6}
                for column, name in enumerate(rules.rules.properties)
            },
        }
        for index, rule in enumerate(rules.source)
    ]
    written: dict[str, Any] = rules.model_dump(mode="json", exclude_unset=True)
    return entry_faults({"source": standing_in, "set": written["set"]})
