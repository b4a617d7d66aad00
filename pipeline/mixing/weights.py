"""What a misfit in each property counts: standard uncertainties, and the weights that follow from them."""

from __future__ import annotations

from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.faults import MASS
from pipeline.mixing.problem import MixingProblem
from pipeline.mixing.products import listed_of, rows_of, uncertainty_in_rows
from pipeline.mixing.properties import PROCESS_UNITS, calcium_carbonate_ratios, ratios_of
from pipeline.settings import TracerSettings
from pipeline.variables import REGISTRY, Uncertainty

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.mixing.entries import Catalogue, SourceSet

    FloatArray = NDArray[np.float64]

_NONE_GIVEN: Mapping[str, float] = MappingProxyType({})


@dataclass(frozen=True, eq=False)
class Weights:
    """How much a misfit counts, per property of a set; every array is (n_property,)."""

    uncertainty: FloatArray  # standard, in property units
    scaled: FloatArray  # of a misfit over the spread of the sources: the numbers of the published practice
    per_unit: FloatArray  # of a misfit in property units: what enters the matrix


def measurement_parts(properties: Sequence[str], given: Mapping[str, float]) -> tuple[FloatArray, FloatArray]:
    """Return the absolute and the relative part of the measurements' standard uncertainty, (n_property,) each.

    Their hypotenuse at a value is its standard uncertainty; both are zero where none is known.

    Parameters
    ----------
    properties
        Registry names.
    given
        Standard uncertainties that stand in place of the registry's, in property units.

    """
    usual = [
        Uncertainty(given[name], 0.0, "settings") if name in given else REGISTRY[name].uncertainty
        for name in properties
    ]
    absolute = np.array([one.absolute if one else 0.0 for one in usual])
    return absolute, np.array([one.relative if one else 0.0 for one in usual])


def measurement_uncertainty(
    properties: Sequence[str], values: FloatArray, given: Mapping[str, float] = _NONE_GIVEN
) -> FloatArray:
    """Return the standard uncertainty of measurements at ``values``, (..., n_property), zero where unknown.

    Parameters
    ----------
    properties
        Registry names.
    values
        (..., n_property), in property units.
    given
        As ``measurement_parts`` takes them.

    """
    absolute, relative = measurement_parts(properties, given)
    return np.asarray(np.hypot(absolute, relative * values))


def measured_in_rows(
    properties: Sequence[str], rows: FloatArray, given: Mapping[str, float] = _NONE_GIVEN
) -> FloatArray:
    """Return the standard uncertainty of measurements as they stand in the equations, (..., n_property).

    Parameters
    ----------
    properties
        Registry names.
    rows
        Values as they stand in the equations, (..., n_property).
    given
        As ``measurement_parts`` takes them.

    """
    listed = listed_of(properties, rows)
    return uncertainty_in_rows(properties, listed, measurement_uncertainty(properties, listed, given))


def joined_uncertainty(
    properties: Sequence[str],
    values: FloatArray,
    uncertainties: FloatArray,
    given: Mapping[str, float] = _NONE_GIVEN,
) -> FloatArray:
    """Return the standard uncertainty of a misfit, (n_property,): measurement and source, independent.

    The measurement's is taken at the mean of the sources. The source's is the root mean square over the
    sources, so that one number holds whichever of them the sample is made of.

    Parameters
    ----------
    properties
        Registry names.
    values, uncertainties
        Of the sources and their standard uncertainties, both (n_source, n_property), as they stand in the equations.
    given
        Of measurements, as ``measurement_parts`` takes them.

    """
    measured = measured_in_rows(properties, values.mean(axis=0), given)
    return np.asarray(np.sqrt(measured**2 + (uncertainties**2).mean(axis=0)))


def variance_weights_tomczak_large_1989(values: FloatArray, uncertainties: FloatArray) -> FloatArray:
    """Return the published weights, (n_property,), of misfits over the spread of the sources.

    A property's variance over the sources (its power to tell them apart) over the largest of the sources'
    own variances. A ratio of a variance to a standard deviation, as is sometimes printed, would change
    with the unit of the property.

    Parameters
    ----------
    values, uncertainties
        Of the sources and their standard uncertainties, both (n_source, n_property), in property units.

    References
    ----------
    Tomczak and Large 1989, J. Geophys. Res. 94:16141-16149 (from memory).

    """
    return np.asarray(values.var(axis=0, ddof=1) / (uncertainties**2).max(axis=0))


def weights_of(
    chosen: SourceSet,
    values: FloatArray,
    uncertainties: FloatArray,
    given: Mapping[str, float] = _NONE_GIVEN,
) -> Weights:
    """Return the weights that a set of the catalogue asks for.

    A weight of the published practice multiplies a misfit over the standard deviation of the property
    over the sources; divided by that, it multiplies a misfit in property units, as the matrix has it. The
    default multiplies a misfit by one over its uncertainty, which makes the shares the most likely ones.

    Parameters
    ----------
    chosen
        The set.
    values, uncertainties
        Of its sources and properties, both (n_source, n_property), in property units.
    given
        Uncertainties of measurements, as ``measurement_parts`` takes them.

    """
    uncertainty = joined_uncertainty(chosen.properties, values, uncertainties, given)
    spread = values.std(axis=0, ddof=1) if len(values) > 1 else np.zeros(len(uncertainty))
    if chosen.weights == "uncertainty":
        return Weights(uncertainty, scaled=spread / uncertainty, per_unit=1 / uncertainty)
    if chosen.weights == "variance":
        scaled = variance_weights_tomczak_large_1989(values, uncertainties)
    else:
        by_hand = chosen.given_weights or {}
        scaled = np.array([by_hand[name] for name in chosen.properties])
    return Weights(uncertainty, scaled, per_unit=scaled / spread)


def mass_weight(chosen: SourceSet, weights: Weights) -> float | None:
    """Return the weight of the row of the sum, None where the sum is held exactly.

    What the catalogue says, else as much as the largest weight of a property (common practice, no source).
    """
    if chosen.mass == "exact":
        return None
    given = (chosen.given_weights or {}).get(MASS)
    return chosen.mass_weight or given or float(weights.scaled.max())


def mixing_problem(
    catalogue: Catalogue,
    chosen: SourceSet,
    ratios: Mapping[str, float],
    given: Mapping[str, float] = _NONE_GIVEN,
    dissolution: Mapping[str, float] | None = None,
) -> MixingProblem:
    """Return the problem that a set of the catalogue poses.

    Parameters
    ----------
    catalogue, chosen
        The catalogue and one of its sets.
    ratios
        Change of each property per umol/kg of phosphate that respiration releases; none for the others.
    given
        Uncertainties of measurements, as ``measurement_parts`` takes them.
    dissolution
        Change of each property per umol/kg of calcium carbonate that dissolves; that of the default settings if None.

    """
    entries = [
        [catalogue.sources[code].properties[name] for name in chosen.properties] for code in chosen.sources
    ]
    values = np.array([[one.value for one in row] for row in entries])
    uncertainties = np.array([[one.uncertainty for one in row] for row in entries])
    uncertainties = uncertainty_in_rows(chosen.properties, values, uncertainties)
    values = rows_of(chosen.properties, values)
    weights = weights_of(chosen, values, uncertainties, given)
    if dissolution is None:
        dissolution = calcium_carbonate_ratios(TracerSettings())
    changes = {"respiration": ratios, "calcium_carbonate": dissolution}
    processes = [
        PROCESS_UNITS[name] * np.array(ratios_of(chosen.properties, changes[name]))
        for name in chosen.processes
    ]
    return MixingProblem(
        sources=values,
        uncertainty=weights.uncertainty,
        weight=weights.per_unit,
        processes=np.array(processes).reshape(-1, values.shape[1]),
        signs=tuple(chosen.processes.values()),
        mass_weight=mass_weight(chosen, weights),
    )
