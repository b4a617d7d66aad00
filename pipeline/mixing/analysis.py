"""Optimum multiparameter analysis of a table of samples: every set where it is valid, the best one kept."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa

from pipeline.mixing.domains import validity
from pipeline.mixing.properties import respiration_ratios
from pipeline.mixing.solver import solve
from pipeline.mixing.status import MixingStatus
from pipeline.mixing.tags import tags
from pipeline.mixing.weights import mixing_problem
from pipeline.tables import MIXTURES, as_arrow, registry_field
from pipeline.usable import usable
from pipeline.variables import residual_name

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.mixing.entries import Catalogue, SourceSet
    from pipeline.mixing.solver import MixingSolution
    from pipeline.settings import Settings

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

# Of several reasons why a sample is not solved, one per set, the one that came furthest is told.
_FURTHEST = (
    MixingStatus.OUTSIDE,
    MixingStatus.INCOMPLETE,
    MixingStatus.UNDETERMINED,
    MixingStatus.NOT_OPTIMAL,
    MixingStatus.ABSURD,
    MixingStatus.SOLVED,
)
_HOW_FAR = np.argsort(_FURTHEST)  # by status


@dataclass(frozen=True, eq=False)
class Resolution:
    """What the mixing analysis adds to a table of samples."""

    columns: Mapping[str, Any]  # registry name to n_sample values; NaN or None where missing
    mixtures: pa.Table  # a row is a solved sample and a source of the set it was solved with


@dataclass(frozen=True, eq=False)
class _Attempt:
    """A set's answer to the samples for which it is valid."""

    chosen: SourceSet
    rows: IntArray  # (n_valid,) samples
    unknown: BoolArray  # (n_sample,) whether it is valid cannot be told: a coordinate is missing
    solution: MixingSolution  # of n_valid samples


def resolve(samples: pa.Table, catalogue: Catalogue, settings: Settings) -> Resolution:
    """Resolve every sample of a table into the source waters of a catalogue.

    A sample for which several sets are valid keeps the one with the lowest reduced chi-square; of equal
    ones, and of those without degrees of freedom, the first of the catalogue.

    Parameters
    ----------
    samples
        Table of registry columns, n_sample rows.
    catalogue
        The source waters and the sets.
    settings
        Which values may be used, the stoichiometry, and the limits of the tags.

    """
    attempts = [_attempt(samples, catalogue, chosen, settings) for chosen in catalogue.set]
    status, picked = _pick(attempts, samples.num_rows)
    columns: dict[str, Any] = {"tag": None, **_columns(attempts, picked)}
    columns["tag"] = tags(
        status,
        columns["leading_source"],
        columns["leading_share"],
        columns["reduced_chi_square"],
        settings.mixing,
    )
    columns["mixing_status"] = np.array([MixingStatus(code).label for code in status], dtype=object)
    return Resolution(columns, _mixtures(samples, attempts, picked))


def _attempt(samples: pa.Table, catalogue: Catalogue, chosen: SourceSet, settings: Settings) -> _Attempt:
    ratios = respiration_ratios(settings.tracers, chosen.silicate_per_phosphate)
    problem = mixing_problem(catalogue, chosen, ratios)
    inside, unknown = validity(samples, chosen.valid, settings.use)
    rows = np.flatnonzero(inside)
    observed = np.stack([usable(samples, name, settings.use)[rows] for name in chosen.properties], axis=1)
    solution = solve(problem, observed, condition_limit=settings.mixing.condition_limit)
    return _Attempt(chosen, rows, unknown, solution)


def _pick(attempts: Sequence[_Attempt], n_sample: int) -> tuple[NDArray[np.int8], IntArray]:
    """Return the status of every sample and the attempt it keeps, -1 for none, both (n_sample,)."""
    status = np.full(n_sample, MixingStatus.OUTSIDE, dtype=np.int8)
    picked = np.full(n_sample, -1)
    lowest = np.full(n_sample, np.inf)
    for index, attempt in enumerate(attempts):
        own = np.full(n_sample, MixingStatus.OUTSIDE, dtype=np.int8)
        own[attempt.unknown] = MixingStatus.INCOMPLETE
        own[attempt.rows] = attempt.solution.status
        status = np.where(_HOW_FAR[own] > _HOW_FAR[status], own, status)
        chi_square = np.full(n_sample, np.inf)
        chi_square[attempt.rows] = np.nan_to_num(attempt.solution.reduced_chi_square, nan=np.inf)
        better = (own == MixingStatus.SOLVED) & ((picked < 0) | (chi_square < lowest))
        picked[better] = index
        lowest[better] = chi_square[better]
    return status, picked


def _columns(attempts: Sequence[_Attempt], picked: IntArray) -> dict[str, Any]:
    """Return the columns of the solved samples, (n_sample,) each."""
    n_sample = len(picked)
    names = ["leading_share", "leading_share_uncertainty", "respiration", "reduced_chi_square"]
    residuals = dict.fromkeys(
        residual_name(name) for attempt in attempts for name in attempt.chosen.properties
    )
    columns: dict[str, Any] = {
        name: np.full(n_sample, None, dtype=object) for name in ("leading_source", "mixing_set")
    }
    columns |= {name: np.full(n_sample, np.nan) for name in (*names, *residuals)}
    for index, attempt in enumerate(attempts):
        solution, kept = attempt.solution, picked[attempt.rows] == index
        rows = attempt.rows[kept]
        shares = solution.shares[kept]
        leading = shares.argmax(axis=1)
        columns["leading_source"][rows] = np.array(attempt.chosen.sources, dtype=object)[leading]
        columns["leading_share"][rows] = np.take_along_axis(shares, leading[:, None], axis=1)[:, 0]
        columns["leading_share_uncertainty"][rows] = np.take_along_axis(
            solution.share_uncertainty[kept], leading[:, None], axis=1
        )[:, 0]
        if solution.processes.shape[1]:
            columns["respiration"][rows] = solution.processes[kept, 0]
        columns["reduced_chi_square"][rows] = solution.reduced_chi_square[kept]
        columns["mixing_set"][rows] = attempt.chosen.name
        for position, name in enumerate(attempt.chosen.properties):
            columns[residual_name(name)][rows] = solution.residuals[kept, position]
    return columns


def _mixtures(samples: pa.Table, attempts: Sequence[_Attempt], picked: IntArray) -> pa.Table:
    """Return a row per solved sample and source of its set, in the order of the samples."""
    parts: list[tuple[Any, ...]] = []
    for index, attempt in enumerate(attempts):
        kept = picked[attempt.rows] == index
        n_source = len(attempt.chosen.sources)
        rows = np.repeat(attempt.rows[kept], n_source)
        codes = np.tile(np.array(attempt.chosen.sources, dtype=object), int(kept.sum()))
        names = np.full(len(rows), attempt.chosen.name, dtype=object)
        shares, uncertainties = attempt.solution.shares[kept], attempt.solution.share_uncertainty[kept]
        parts.append((rows, names, codes, shares.ravel(), uncertainties.ravel()))
    rows, *made = (np.concatenate(column) for column in zip(*parts, strict=True))
    order = np.argsort(rows, kind="stable")
    own = dict(zip(("mixing_set", "source", "share", "share_uncertainty"), made, strict=True))
    fields = [registry_field(name) for name in MIXTURES]
    columns = [
        as_arrow(own[field.name][order], field.type)
        if field.name in own
        else samples.column(field.name).take(pa.array(rows[order])).cast(field.type)
        for field in fields
    ]
    return pa.table(columns, schema=pa.schema(fields))
