"""What is wrong with a source catalogue whose single entries have the right form."""

from __future__ import annotations

from itertools import combinations
from typing import TYPE_CHECKING, Any, TypeVar

import numpy as np
from pydantic import BaseModel, ValidationError

from pipeline.mixing.conversion import asked_of, converted_source
from pipeline.mixing.domain_faults import domain_faults
from pipeline.mixing.entries import ReferenceState, Source, SourceSet
from pipeline.mixing.form import Fault
from pipeline.mixing.properties import AMOUNT_OF, LISTED_AS, ratios_of, respiration_ratios
from pipeline.mixing.source_faults import gaps, no_property, source_faults
from pipeline.settings import TracerSettings

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.mixing.form import Location

Entry = TypeVar("Entry", bound=BaseModel)

MASS = "mass"  # the row of the sum, among given weights


def entry_faults(written: Mapping[str, Any]) -> list[Fault]:
    """Return what is wrong within and between sources and sets; those of broken form are passed over."""
    given = dict(_sound(Source, written.get("source")))
    sets = dict(_sound(SourceSet, written.get("set")))
    sources = _as_used(given, sets.values(), written.get("catalogue"))
    codes = _labels(written.get("source"), "code")
    by_code = {source.code: source for source in sources.values()}
    repeated = len(set(codes.values())) < len(codes)
    # Where a code is wanting or there twice, a set may mean that source: one fault is told once.
    whole = codes and not repeated and len(codes) == _count(written.get("source"))
    known = set(codes.values()) if whole else None
    faults = [
        *_repeated(codes, ("source", "code")),
        *_repeated(_labels(written.get("set"), "name"), ("set", "name")),
    ]
    for index, source in given.items():
        for at, words in source_faults(source):
            faults.append(Fault(("source", index, *at), f"source '{source.code}': {words}"))
    for index, chosen in sets.items():
        for at, words in _set_faults(chosen, by_code, known):
            faults.append(Fault(("set", index, *at), f"set '{chosen.name}': {words}"))
    if not repeated:
        faults += _gaps(sources, sets.values(), written.get("catalogue"))
    return faults


def _sound(kind: type[Entry], entries: Any) -> Iterator[tuple[int, Entry]]:
    """Yield the entries of sound form with their places in the file."""
    for index, entry in enumerate(entries if isinstance(entries, list) else []):
        try:
            yield index, kind.model_validate(entry)
        except ValidationError:
            continue


def _as_used(given: Mapping[int, Source], sets: Iterable[SourceSet], header: Any) -> dict[int, Source]:
    """Return the sources with what can be converted, and without covariances, which may not be sound."""
    state, _ = _reference_state(header)
    return {
        index: converted_source(
            source.model_copy(update={"covariance": None}), asked_of(source, sets), state
        )[0]
        for index, source in given.items()
    }


def _count(entries: Any) -> int:
    return len(entries) if isinstance(entries, list) else 0


def _labels(entries: Any, key: str) -> dict[int, str]:
    """Return what every entry is called, sound or not."""
    return {
        index: entry[key]
        for index, entry in enumerate(entries if isinstance(entries, list) else [])
        if isinstance(entry, dict) and isinstance(entry.get(key), str)
    }


def _repeated(labels: Mapping[int, str], called: tuple[str, str]) -> Iterator[Fault]:
    kind, key = called
    seen: set[str] = set()
    for index, label in labels.items():
        if label in seen:
            yield Fault(
                (kind, index, key), f"found a second {kind} '{label}'; expected every {key} once; rename one."
            )
        seen.add(label)


def _gaps(sources: Mapping[int, Source], sets: Iterable[SourceSet], header: Any) -> Iterator[Fault]:
    """Find the properties of a set that one of its sources does not give."""
    state, doubtful = _reference_state(header)
    for chosen in sets:
        for index, source in sources.items():
            if source.code in chosen.sources:
                for words in gaps(source, chosen, state, doubtful_state=doubtful):
                    yield Fault(("source", index, "properties"), f"source '{source.code}': {words}")


def _reference_state(header: Any) -> tuple[ReferenceState | None, bool]:
    """Return the reference state, and whether one is written that cannot be used."""
    written = header.get("reference_state") if isinstance(header, dict) else None
    if written is None:
        return None, False
    try:
        return ReferenceState.model_validate(written), False
    except ValidationError:
        return None, True


def _set_faults(
    chosen: SourceSet, by_code: Mapping[str, Source], known: set[str] | None
) -> Iterator[tuple[Location, str]]:
    """Judge one set; ``known`` are the codes of the file, None where they are at fault themselves."""
    for key, names, what in (
        ("sources", chosen.sources, "source"),
        ("properties", chosen.properties, "property"),
    ):
        for name in sorted({name for name in names if names.count(name) > 1}):
            yield (key,), f"found the {what} '{name}' twice; expected it once; remove one."
    for code in chosen.sources:
        if known is not None and code not in known:
            some = ", ".join(sorted(known))
            yield ("sources",), f"found the unknown source '{code}'; expected some of {some}; correct it."
    for name in chosen.properties:
        if words := no_property(name):
            yield ("properties",), words
        elif name in LISTED_AS:
            yield (
                ("properties",),
                (
                    f"found the property '{name}'; expected {LISTED_AS[name]}, which mixes in proportion; list that "
                    f"one: sources may go on giving {name}, which is converted at [catalogue.reference_state]."
                ),
            )
    yield from _counting(chosen)
    yield from _carbon(chosen)
    yield from _weighting(chosen)
    yield from ((("valid", key), words) for key, words in domain_faults(chosen.valid))
    whole = [by_code[code] for code in dict.fromkeys(chosen.sources) if code in by_code]
    whole = [source for source in whole if set(chosen.properties) <= set(source.properties)]
    values = np.array([[s.properties[name].value for name in chosen.properties] for s in whole])
    yield from _alike([source.code for source in whole], values)
    if len(whole) == len(chosen.sources):
        yield from _scaling(chosen, values)


def _counting(chosen: SourceSet) -> Iterator[tuple[Location, str]]:
    respired = chosen.respiration != "none"
    n_unknown, n_equation = len(chosen.sources) + len(chosen.processes), len(chosen.properties) + 1
    if n_unknown > n_equation:
        shares = chosen.unknowns
        yield (
            ("sources",),
            (
                f"found {n_unknown} unknowns ({shares}) for {n_equation} equations ({len(chosen.properties)} "
                f"{'property' if n_equation == 2 else 'properties'} and the sum of the shares); expected "
                f"no more unknowns than equations; add properties or take sources away."
            ),
        )
    ratios = respiration_ratios(TracerSettings(), chosen.silicate_per_phosphate)
    if respired and not any(ratios_of(chosen.properties, ratios)):
        yield (
            ("respiration",),
            (
                f"found respiration = '{chosen.respiration}' and no property that respiration changes; expected "
                f"oxygen, phosphate, nitrate or dic among them; add one, or set respiration = 'none'."
            ),
        )


def _carbon(chosen: SourceSet) -> Iterator[tuple[Location, str]]:
    """Judge isotope ratios and calcium carbonate, which need carbon among the properties."""
    for name, amount in AMOUNT_OF.items():
        if name in chosen.properties and amount not in chosen.properties:
            yield (
                ("properties",),
                (
                    f"found {name} without {amount}; expected both, since a mixture has the mean of their product and "
                    f"not that of the ratio; add {amount}, to the sources too, or take {name} away."
                ),
            )
    if chosen.calcium_carbonate != "none" and not {"dic", "alkalinity"} & {*chosen.properties}:
        yield (
            ("calcium_carbonate",),
            (
                f"found calcium_carbonate = '{chosen.calcium_carbonate}' and no property that it changes; expected "
                f"alkalinity or dic among them; add one, or set calcium_carbonate = 'none'."
            ),
        )


def _weighting(chosen: SourceSet) -> Iterator[tuple[Location, str]]:
    given = chosen.given_weights
    if chosen.weights == "given":
        missing = [name for name in chosen.properties if name not in (given or {})]
        unknown = [name for name in given or {} if name not in {*chosen.properties, MASS}]
        if missing:
            yield (
                ("given_weights",),
                f"found no given weight for {', '.join(missing)}; expected one each; add them.",
            )
        if unknown:
            yield (
                ("given_weights",),
                f"found given weights for {', '.join(unknown)}, not among its properties; remove them.",
            )
    elif given is not None:
        yield (
            ("given_weights",),
            (
                f"found given_weights with weights = '{chosen.weights}'; expected them only with weights = 'given'; "
                f"remove one of the two."
            ),
        )
    if chosen.mass_weight is not None and chosen.mass == "exact":
        yield (
            ("mass_weight",),
            "found a mass_weight with mass = 'exact'; expected it only with mass = 'weighted'; remove one of the two.",
        )
    if chosen.mass_weight is not None and MASS in (given or {}):
        yield (
            ("mass_weight",),
            "found mass_weight and a given weight for mass; expected one; remove the other.",
        )


def _alike(codes: Sequence[str], values: NDArray[np.float64]) -> Iterator[tuple[Location, str]]:
    """Judge values (n_source, n_property) of the sources that give every property of the set."""
    for one, other in combinations(range(len(codes)), 2):
        if (values[one] == values[other]).all():
            yield (
                ("sources",),
                (
                    f"found the same value of every property in the sources '{codes[one]}' and '{codes[other]}'; "
                    f"expected sources that differ; add a property that tells them apart or remove one."
                ),
            )


def _scaling(chosen: SourceSet, values: NDArray[np.float64]) -> Iterator[tuple[Location, str]]:
    """Judge whether rows can be scaled with the spread of the sources, as in the published practice."""
    if chosen.weights != "uncertainty":
        flat = [name for name, column in zip(chosen.properties, values.T, strict=True) if np.ptp(column) == 0]
        if flat:
            yield (
                ("weights",),
                (
                    f"found the same {', '.join(flat)} in all sources, which weights = '{chosen.weights}' cannot "
                    f"scale; expected values that differ; take it from the set, or set weights = 'uncertainty'."
                ),
            )
    elif chosen.mass == "weighted" and chosen.mass_weight is None and len(values) == 1:
        yield (
            ("mass",),
            (
                "found mass = 'weighted' for a single source, whose values have no spread to set its weight by; "
                "expected a mass_weight; add it, or set mass = 'exact'."
            ),
        )
