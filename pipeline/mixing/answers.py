"""What a set says about the samples that keep its solution: shares, respiration and split, with uncertainties."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.carbon_parts import CALCIUM_CARBONATE, carbonate_parts, carried_of, isotope_parts
from pipeline.mixing.ensemble import run_ensemble
from pipeline.mixing.members import measurement_noise, perturbed_sources
from pipeline.mixing.products import listed_residuals, parts_in_rows, rows_of
from pipeline.mixing.properties import PROCESS_UNITS, ratios_of
from pipeline.mixing.split import (
    first_order_uncertainty,
    pseudo_age,
    quantities_of,
    source_values,
    split,
)
from pipeline.mixing.weights import measured_in_rows
from pipeline.variables import residual_name

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from pipeline.mixing.carbon_parts import Carried
    from pipeline.mixing.entries import Catalogue, SourceSet
    from pipeline.mixing.problem import MixingProblem
    from pipeline.mixing.solver import MixingSolution
    from pipeline.settings import MixingSettings

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Attempt:
    """A set's solution of the samples for which it is valid."""

    chosen: SourceSet
    ratios: Mapping[str, float]  # change of each property per umol/kg of phosphate released
    dissolution: Mapping[str, float]  # and per umol/kg of calcium carbonate dissolved
    problem: MixingProblem
    rows: IntArray  # (n_valid,) samples
    unknown: BoolArray  # (n_sample,) whether it is valid cannot be told: a coordinate is missing
    observed: FloatArray  # (n_valid, n_property) as they stand in the equations
    solution: MixingSolution  # of n_valid samples


@dataclass(frozen=True, eq=False)
class Answer:
    """What a set says about the samples that keep its solution."""

    chosen: SourceSet
    rows: IntArray  # (n_kept,) samples
    leading: IntArray  # (n_kept,) source with the largest share
    outside: BoolArray  # (n_kept,) beyond what its sources can mix to, by more than noise
    side: IntArray  # (n_kept,) unknown that would be negative without bounds, -1 where none would
    per_sample: Mapping[str, FloatArray]  # registry name to (n_kept,)
    per_share: Mapping[str, FloatArray]  # registry name to (n_kept, n_source)


@dataclass(frozen=True, eq=False)
class _Uncertain:
    """How far the numbers of some samples are from the truth; NaN where only an ensemble could say."""

    shares: FloatArray  # (n_kept, n_source)
    processes: FloatArray  # (n_kept, n_process)
    carried: FloatArray  # (n_kept, n_quantity)
    percentiles: FloatArray  # (n_kept, 3, n_source)
    leading_probability: FloatArray  # (n_kept,)


def answer_of(
    catalogue: Catalogue,
    attempt: Attempt,
    kept: BoolArray,
    keys: NDArray[np.uint64],
    settings: MixingSettings,
) -> Answer:
    """Return what a set says about the samples ``kept``.

    Parameters
    ----------
    catalogue, attempt
        The catalogue, and the solution of one of its sets.
    kept
        Which of the valid samples keep this solution, (n_valid,); all of them are solved.
    keys
        Of all samples, (n_sample,).
    settings
        Members, seed, uncertainties of measurements, what is outside, and the rate of a pseudo-age.

    """
    chosen, solution = attempt.chosen, attempt.solution
    rows, shares = attempt.rows[kept], solution.shares[kept]
    leading = shares.argmax(axis=1)
    names = quantities_of(catalogue, chosen)
    carried = carried_of(catalogue, chosen, names)
    found = (
        _by_members(catalogue, attempt, kept, keys[rows], leading, carried, settings)
        if settings.members
        else _to_first_order(catalogue, attempt, kept, carried, settings)
    )

    none = np.full(len(rows), np.nan)
    places = {name: (place, PROCESS_UNITS[name]) for place, name in enumerate(chosen.processes)}
    processes = {name: unit * solution.processes[kept, place] for name, (place, unit) in places.items()}
    of_processes = {name: unit * found.processes[:, place] for name, (place, unit) in places.items()}
    respiration = processes.get("respiration", none)
    of_respiration = of_processes.get("respiration", none)
    hull = solution.hull
    per_sample = {
        "leading_share": _at(shares, leading),
        "leading_share_uncertainty": _at(found.shares, leading),
        "leading_probability": found.leading_probability,
        "respiration": respiration,
        "respiration_uncertainty": of_respiration,
        "reduced_chi_square": solution.reduced_chi_square[kept],
        "degrees_of_freedom": solution.degrees_of_freedom[kept],
        "hull_distance": hull.distance[kept],
    }
    ratios = ratios_of(names, attempt.ratios)
    brought = source_values(catalogue, chosen, names)
    from_sources, from_respiration = split(shares, respiration, brought, ratios)
    for q, name in enumerate(names):
        per_sample[f"{name}_from_sources"] = from_sources[:, q]
        per_sample[f"{name}_from_sources_uncertainty"] = found.carried[:, q]
        per_sample[f"{name}_from_respiration"] = from_respiration[:, q]
        per_sample[f"{name}_from_respiration_uncertainty"] = of_respiration * abs(ratios[q])
    if settings.oxygen_utilisation_rate is not None:
        per_sample["pseudo_age"] = pseudo_age(respiration, attempt.ratios, settings.oxygen_utilisation_rate)
    if CALCIUM_CARBONATE in processes:
        per_sample |= carbonate_parts(
            processes[CALCIUM_CARBONATE], of_processes[CALCIUM_CARBONATE], attempt.dissolution
        )
    changes = {"respiration": attempt.ratios, CALCIUM_CARBONATE: attempt.dissolution}
    if carried.has_ratio:
        both = {name: (processes[name], of_processes[name]) for name in processes}
        per_sample |= isotope_parts(carried, shares, found.carried[:, -1], both, changes)
    residuals = listed_residuals(chosen.properties, attempt.observed[kept], solution.residuals[kept])
    for position, name in enumerate(chosen.properties):
        per_sample[residual_name(name)] = residuals[:, position]
    per_share = {"share": shares, "share_uncertainty": found.shares}
    for index, name in enumerate(("share_p16", "share_p50", "share_p84")):
        per_share[name] = found.percentiles[:, index]
    outside = hull.outside(settings.hull_probability)[kept]
    return Answer(chosen, rows, leading, outside, hull.side[kept], per_sample, per_share)


def _at(values: FloatArray, position: IntArray) -> FloatArray:
    """Return one of each row, (n,), of (n, m)."""
    return np.asarray(np.take_along_axis(values, position[:, None], axis=1)[:, 0])


def _by_members(
    catalogue: Catalogue,
    attempt: Attempt,
    kept: BoolArray,
    keys: NDArray[np.uint64],
    leading: IntArray,
    carried: Carried,
    settings: MixingSettings,
) -> _Uncertain:
    properties = attempt.chosen.properties
    perturbed = perturbed_sources(
        catalogue, attempt.chosen, carried.names, seed=settings.seed, members=settings.members
    )
    sources = rows_of(carried.names, perturbed)
    noise = measurement_noise(keys, properties, settings.uncertainty)
    absolute, relative = parts_in_rows(properties, noise.absolute, noise.relative, attempt.problem.reference)
    ensemble = run_ensemble(
        attempt.problem,
        attempt.observed[kept],
        attempt.solution.support[kept],
        leading,
        replace(noise, absolute=absolute, relative=relative),
        sources[:, :, list(carried.listed)],
        sources @ carried.combined.T,
    )
    return _Uncertain(
        ensemble.share_uncertainty,
        ensemble.process_uncertainty,
        ensemble.carried_uncertainty,
        ensemble.share_percentiles,
        ensemble.leading_probability,
    )


def _to_first_order(
    catalogue: Catalogue,
    attempt: Attempt,
    kept: BoolArray,
    carried: Carried,
    settings: MixingSettings,
) -> _Uncertain:
    properties, solution, observed = attempt.chosen.properties, attempt.solution, attempt.observed[kept]
    shares = solution.shares[kept]
    of_shares = solution.share_uncertainty[kept]
    of_carried = first_order_uncertainty(
        attempt.problem,
        observed,
        solution.support[kept],
        shares,
        measured_in_rows(properties, observed, settings.uncertainty),
        carried.covariances(catalogue, attempt.chosen),
        carried.values,
    )
    if shares.shape[1] > 1:  # where bounds hold all shares, they hold what these carry
        of_carried[np.isnan(of_shares).all(axis=1)] = np.nan
    return _Uncertain(
        of_shares,
        solution.process_uncertainty[kept],
        of_carried,
        percentiles=np.full((len(shares), 3, shares.shape[1]), np.nan),
        leading_probability=np.full(len(shares), np.nan),
    )
