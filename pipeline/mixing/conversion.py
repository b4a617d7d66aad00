"""Published source waters, in practical salinity and potential temperature, made conservative through gsw."""

from __future__ import annotations

from typing import TYPE_CHECKING

import gsw
import numpy as np

from pipeline.mixing.entries import Catalogue, Covariance, SourceValue
from pipeline.mixing.magnitudes import impossible
from pipeline.seawater import PRACTICAL_SALINITY, absolute_salinity, preformed_salinity

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from pipeline.mixing.entries import CatalogueFile, ReferenceState, Source, SourceSet

SALT, HEAT = "preformed_salinity", "conservative_temperature"
PRACTICAL, POTENTIAL = "practical_salinity", "potential_temperature"
# What a set asks for, and what it is made from: first the counterpart, then what else it takes.
MADE_FROM: Mapping[str, tuple[str, ...]] = {HEAT: (POTENTIAL, PRACTICAL), SALT: (PRACTICAL,)}
_UNITS = {SALT: "g/kg", HEAT: "degC"}

_STEP = 1e-3  # of practical salinity: Preformed Salinity is proportional to it, so any step will do


def has_counterpart(source: Source, name: str) -> bool:
    """Return whether a source lacks ``name`` and gives its counterpart of the published practice."""
    return name in MADE_FROM and name not in source.properties and MADE_FROM[name][0] in source.properties


def obstacle(source: Source, name: str, state: ReferenceState | None) -> str | None:
    """Return what stands against making ``name``, of which the source has the counterpart, None if nothing."""
    counterpart = MADE_FROM[name][0]
    if state is None:
        return (
            f"found {counterpart}, no {name} and no [catalogue.reference_state]; expected a longitude, latitude and "
            f"pressure there to convert at; add it, or give {name}."
        )
    for needed in MADE_FROM[name]:
        if needed not in source.properties:
            return f"found {counterpart} and no {needed}; expected both to make {name} of; add it, or give {name}."
        if words := impossible(needed, source.properties[needed].value):
            return words
    return None


def converted(file: CatalogueFile) -> Catalogue:
    """Return the catalogue of a file, with what its sets ask for and its sources give in the published form.

    Given values stay; their covariance is carried over to what was made of them. Each conversion leaves a
    sentence in the record.
    """
    state = file.catalogue.reference_state
    made = [converted_source(source, asked_of(source, file.set), state) for source in file.source]
    return Catalogue(
        catalogue=file.catalogue,
        source=tuple(source for source, _ in made),
        set=file.set,
        conversions=tuple(sentence for _, sentences in made for sentence in sentences),
    )


def asked_of(source: Source, sets: Iterable[SourceSet]) -> set[str]:
    """Return the properties that the sets of which a source is part ask of it."""
    return {name for chosen in sets if source.code in chosen.sources for name in chosen.properties}


def converted_source(
    source: Source, asked: Iterable[str], state: ReferenceState | None
) -> tuple[Source, list[str]]:
    """Return a source with what is asked of it and can be made, and a sentence for each value made.

    The uncertainty of Preformed Salinity is that of practical salinity by the same scale, that of
    Conservative Temperature the one of potential temperature times its derivative. What the uncertainty of
    salinity adds to the latter, less than 0.05 degC per unit of salinity, is left out.

    References
    ----------
    IOC, SCOR and IAPSO 2010, sections 3.3 and A.4.

    """
    wanted = set(asked)
    values, sentences = dict(source.properties), []
    made: dict[str, tuple[str, float]] = {}  # from the given name to the made one, and the scale
    for name, (counterpart, *_) in MADE_FROM.items():
        if name not in wanted or not has_counterpart(source, name):
            continue
        if state is None or obstacle(source, name, state) is not None:
            continue
        given = source.properties[counterpart]
        value, scale = _salt(source, state) if name == SALT else _heat(source, state)
        values[name] = SourceValue(value=value, uncertainty=scale * given.uncertainty)
        made[counterpart] = (name, scale)
        sentences.append(
            f"source '{source.code}': {name} {value:.4f} {_UNITS[name]} is made from {counterpart} {given.value:g} at "
            f"{state.longitude:g} degrees east, {state.latitude:g} degrees north, {state.pressure:g} dbar."
        )
    covariance = source.covariance and _scaled(source.covariance, made)
    return source.model_copy(update={"properties": values, "covariance": covariance}), sentences


def _scaled(covariance: Covariance, made: Mapping[str, tuple[str, float]]) -> Covariance:
    """Return a covariance of the made properties in place of those they were made from."""
    pairs = [made.get(name, (name, 1.0)) for name in covariance.properties]
    scale = np.array([factor for _, factor in pairs])
    matrix = np.array(covariance.matrix) * np.outer(scale, scale)
    return Covariance(
        properties=tuple(name for name, _ in pairs),
        matrix=tuple(tuple(row) for row in matrix.tolist()),
    )


def _salt(source: Source, state: ReferenceState) -> tuple[float, float]:
    """Return Preformed Salinity, g/kg, and its change per unit of practical salinity."""
    practical = source.properties[PRACTICAL].value
    near = practical + (_STEP if practical < PRACTICAL_SALINITY.high / 2 else -_STEP)
    here, there = preformed_salinity([practical, near], state.pressure, state.longitude, state.latitude)
    return float(here), float((there - here) / (near - practical))


def _heat(source: Source, state: ReferenceState) -> tuple[float, float]:
    """Return Conservative Temperature, degC, and its derivative by potential temperature."""
    practical, potential = source.properties[PRACTICAL].value, source.properties[POTENTIAL].value
    salinity = absolute_salinity(practical, state.pressure, state.longitude, state.latitude)
    _, slope = gsw.CT_first_derivatives(salinity, potential)
    return float(gsw.CT_from_pt(salinity, potential)), float(slope)
