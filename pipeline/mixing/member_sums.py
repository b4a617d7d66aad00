"""Weighted sums of the shares of many samples, member by member of the ensemble.

The error of a sum is not that of its terms over the root of their number: all samples, of all cruises, have the
errors of the sources in common. In a member they have the same perturbed sources, so the spread of a sum over the
members, or of the difference between two cruises' sums, holds what is common and lets cancel what cancels.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.members import keys_of, measurement_noise, perturbed_sources, sample_keys
from pipeline.mixing.products import parts_in_rows, rows_of
from pipeline.mixing.properties import calcium_carbonate_ratios, respiration_ratios
from pipeline.mixing.solver import solve
from pipeline.mixing.status import MixingStatus
from pipeline.mixing.weights import mixing_problem
from pipeline.tables import floats, texts
from pipeline.usable import usable

if TYPE_CHECKING:
    from collections.abc import Iterator
    from typing import Literal

    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.mixing.entries import Catalogue, SourceSet
    from pipeline.settings import Settings

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]
    Errors = Literal["common", "independent"]

_BETWEEN = "\x1f"


@dataclass(frozen=True, eq=False)
class MemberSums:
    """Weighted sums of shares: of the best fit, and of every member."""

    sources: tuple[str, ...]  # codes, in the order of the catalogue
    best: FloatArray  # (n_sum, n_source)
    members: FloatArray  # (n_member, n_sum, n_source)
    largest_difference: (
        float  # of the leading shares from those in the table: rounding, for tables of this version
    )


def member_sums(
    samples: pa.Table,
    catalogue: Catalogue,
    settings: Settings,
    weights: FloatArray,
    *,
    errors: Errors,
    members: int,
) -> MemberSums:
    """Return weighted sums of the shares of resolved samples.

    Every sample stays with the set that it was solved with. A member of a sample that has no optimum counts with the
    best fit.

    Parameters
    ----------
    samples
        Samples of one cruise as the archive keeps them, n_sample rows.
    catalogue, settings
        Those that their shares were made with.
    weights
        (n_sum, n_sample); those of samples that are not resolved do not count.
    errors
        ``independent`` for the ensemble that the uncertainties in the tables come from: each measurement has its own
        error. ``common``: the error of a property, in standard uncertainties, is the same in all samples of the cruise.
    members
        Of the ensemble. The first of more are the same.

    """
    cruise = next((name for name in texts(samples, "expocode") if name), None)
    settings = settings.model_copy(update={"mixing": settings.mixing.of_cruise(cruise)})
    status, named = texts(samples, "mixing_status"), texts(samples, "mixing_set")
    solved = np.array([one == MixingStatus.SOLVED.label for one in status], dtype=bool)
    codes = tuple(
        source.code for source in catalogue.source if any(source.code in one.sources for one in catalogue.set)
    )
    best = np.zeros((len(weights), len(codes)))
    sums = np.zeros((members, len(weights), len(codes)))
    leading = floats(samples, "leading_share")
    furthest = 0.0
    for chosen in catalogue.set:
        rows = np.flatnonzero(solved & np.array([one == chosen.name for one in named], dtype=bool))
        if not rows.size:
            continue
        at = [codes.index(code) for code in chosen.sources]
        each = _shares(samples, rows, catalogue, chosen, settings, errors, members)
        shares = next(each)
        furthest = max(furthest, float(np.nanmax(np.abs(shares.max(axis=1) - leading[rows]))))
        best[:, at] += weights[:, rows] @ shares
        for member, perturbed in enumerate(each):
            sums[member][:, at] += weights[:, rows] @ np.where(np.isnan(perturbed), shares, perturbed)
    return MemberSums(codes, best, sums, furthest)


def _shares(
    samples: pa.Table,
    rows: IntArray,
    catalogue: Catalogue,
    chosen: SourceSet,
    settings: Settings,
    errors: Errors,
    members: int,
) -> Iterator[FloatArray]:
    """Yield the shares of samples of one set, (n_row, n_source): the best fit, then one member after the other."""
    mixing, properties = settings.mixing, chosen.properties
    ratios = respiration_ratios(settings.tracers, chosen.silicate_per_phosphate)
    problem = mixing_problem(
        catalogue, chosen, ratios, mixing.uncertainty, calcium_carbonate_ratios(settings.tracers)
    )
    listed = np.stack([usable(samples, name, settings.use)[rows] for name in properties], axis=1)
    observed = rows_of(properties, listed)
    yield solve(problem, observed, condition_limit=np.inf).shares
    keys = sample_keys(samples, mixing.seed)[rows]
    noise = measurement_noise(keys, properties, mixing.uncertainty)
    absolute, relative = parts_in_rows(properties, noise.absolute, noise.relative, problem.reference)
    size = np.hypot(absolute, relative * observed)
    sources = rows_of(
        properties, perturbed_sources(catalogue, chosen, properties, seed=mixing.seed, members=members)
    )
    if errors == "common":
        cruise = next((name for name in texts(samples, "expocode") if name), "")
        of_cruise = keys_of(_BETWEEN.join((str(mixing.seed), "cruise", cruise, name)) for name in properties)
        numbers = _numbers(of_cruise[None], members)
    else:
        numbers = _numbers(noise.keys[:, None] ^ _mixed(noise.property_keys), members)
    for member in range(members):
        yield solve(
            replace(problem, sources=sources[member]),
            observed + size * numbers[:, :, member],
            condition_limit=np.inf,
        ).shares


def _numbers(keys: NDArray[np.uint64], members: int) -> FloatArray:
    """Return the normal numbers of keys of any shape, (..., n_member)."""
    from pipeline.mixing.ensemble_kernel import normals  # noqa: PLC0415 - numba takes long to import

    numbers = np.empty((keys.size, members))
    normals(np.ascontiguousarray(keys).ravel(), numbers)
    return numbers.reshape(*keys.shape, members)


def _mixed(keys: NDArray[np.uint64]) -> NDArray[np.uint64]:
    """Return keys as the ensemble mixes those of properties into those of samples."""
    from pipeline.mixing.ensemble_kernel import _mixed as mixed  # noqa: PLC0415 - numba takes long to import

    return np.array([mixed(key) for key in keys], dtype=np.uint64)
