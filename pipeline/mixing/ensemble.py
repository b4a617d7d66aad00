"""Ensembles: what is left uncertain when sources and measurements are perturbed within their uncertainties.

A true source lies about the catalogue's value, and a measured value about the true one, each with its
standard uncertainty. To first order an error e of the sources and m of the measurement moves the shares f by
P (m - sum_i f_i e_i), where P is the operator of the sample's support: that is how far the solution is from
the truth. A member perturbs the catalogue and the sample by e' and m' of the same distribution, and differs
from the unperturbed solution by P (m' - sum_i f_i e'_i): so the spread of the members is the standard error
of the unperturbed solution. That the sample holds its own noise already does not count it twice: members
spread about the solution, not about the truth, and only e' and m' differ between them.

The uncertainty that joins measurement and source is in the weights of all members. Weights choose among the
misfits which to believe; whatever they are, the solution moves with the data by their P, which the members
move by. Both perturbing and weighting by the same uncertainties therefore counts nothing twice. Weights are
those of the unperturbed problem, since they belong to the way of estimating and not to what is estimated.
``python -m tests.coverage`` tests all of this on oceans of known truth.
"""

from __future__ import annotations

import hashlib
from collections import OrderedDict
from dataclasses import dataclass, field
from threading import Lock
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.operators import RANK_TOLERANCE, bits_of, sizes_of
from pipeline.mixing.problem import weighted_system
from pipeline.mixing.solver import groups

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.members import Noise
    from pipeline.mixing.problem import MixingProblem

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

_LANES = 4  # doubles in a vector register: unknowns are padded to a multiple
_ROOM = 64_000_000  # bytes of operators of one system; memory is taken as they are made
_KEPT = 256_000_000  # bytes of operators of all systems that are kept for the next cruise


@dataclass(frozen=True, eq=False)
class Ensemble:
    """What the members of every sample show; NaN where no member could be solved."""

    share_uncertainty: FloatArray  # (n_sample, n_source) standard deviation over the members
    process_uncertainty: FloatArray  # (n_sample, n_process)
    share_percentiles: FloatArray  # (n_sample, 3, n_source) 16th, 50th and 84th
    leading_probability: FloatArray  # (n_sample,) part of the members in which the leading source leads
    carried_uncertainty: FloatArray  # (n_sample, n_quantity) of what the source waters brought along


@dataclass(eq=False)
class _Workshop:
    """The systems of all members of a set for one pattern of properties, and their operators so far."""

    key: bytes  # hash of all that the operators depend on
    systems: FloatArray  # (n_member, n_unknown, n_equation)
    bit: IntArray  # (n_unknown,)
    n_summed: int
    mass: float
    weight: FloatArray  # (n_used,)
    sizes: FloatArray = field(init=False)  # (n_member, n_unknown)
    slots: NDArray[np.int32] = field(init=False)  # (n_member, n_support)
    filled: IntArray = field(init=False)  # (1,)
    room: FloatArray = field(init=False)  # (n_room, n_used + 1, n_lane)

    def __post_init__(self) -> None:
        """Make room, none of which is in use yet."""
        n_member, n_unknown, _ = self.systems.shape
        self.sizes = sizes_of(self.systems)
        n_support = int(self.bit.max()) << 1
        one = (self.weight.size + 1, -(-n_unknown // _LANES) * _LANES)
        n_room = max(1, min(n_member * n_support, _ROOM // (8 * one[0] * one[1])))
        self.slots = np.full((n_member, n_support), -1, dtype=np.int32)
        self.filled = np.zeros(1, dtype=np.int64)
        self.room = np.empty((n_room, *one))

    @property
    def size(self) -> int:
        """Bytes in use."""
        return int(self.filled[0] * self.room[0].nbytes + self.slots.nbytes)


# Workshops that no call is using: operators for the next cruise with the same catalogue. They hold nothing
# that could not be made again to the same bits, so what is found here changes no result.
_idle: OrderedDict[bytes, _Workshop] = OrderedDict()
_idle_lock = Lock()


def run_ensemble(
    problem: MixingProblem,
    observed: FloatArray,
    support: NDArray[np.int32],
    leading: IntArray,
    noise: Noise,
    sources: FloatArray,
    carried: FloatArray,
) -> Ensemble:
    """Solve every member of samples that have been solved unperturbed.

    Parameters
    ----------
    problem
        The unperturbed problem: its weights and processes are those of all members.
    observed
        (n_sample, n_property) in property units, NaN where missing.
    support, leading
        Of the unperturbed solution, (n_sample,): the support and the source with the largest share.
    noise
        How the measurements are perturbed.
    sources
        Of every member, (n_member, n_source, n_property).
    carried
        Value of further quantities in every source of every member, (n_member, n_source, n_quantity).

    Notes
    -----
    The numbers of a sample depend on its values, its key and the members alone, to the last bit. A member
    that has no optimum (its sources have become dependent) is left out.

    """
    from pipeline.mixing import ensemble_kernel as kernel  # noqa: PLC0415 - numba takes long to import

    n_sample, n_source = len(observed), len(problem.sources)
    spread = np.full((n_sample, problem.n_unknown), np.nan)
    percentiles = np.full((n_sample, 3, n_source), np.nan)
    probability = np.full(n_sample, np.nan)
    carried_spread = np.full((n_sample, carried.shape[2]), np.nan)
    values = np.ascontiguousarray(observed, dtype=np.float64)
    reference = sources.mean(axis=1)  # (n_member, n_property), every member's own
    for columns, rows in groups(values):
        workshop = _taken(_workshop(problem, sources - reference[:, None], columns))
        kernel.run_rows(
            values,
            rows,
            columns,
            noise.keys,
            noise.property_keys[columns],
            noise.absolute[columns],
            noise.relative[columns],
            support,
            leading,
            np.ascontiguousarray(reference[:, columns].T),
            workshop.systems,
            workshop.sizes,
            workshop.weight,
            workshop.bit,
            workshop.n_summed,
            workshop.mass,
            RANK_TOLERANCE,
            np.ascontiguousarray(carried.transpose(2, 1, 0)),
            workshop.slots,
            workshop.filled,
            workshop.room,
            spread,
            percentiles,
            probability,
            carried_spread,
        )
        _put_back(workshop)
    return Ensemble(spread[:, :n_source], spread[:, n_source:], percentiles, probability, carried_spread)


def operators_kept() -> int:
    """Return how many operators are kept for the next cruise."""
    with _idle_lock:
        return sum(int(one.filled[0]) for one in _idle.values())


def forget_operators() -> None:
    """Let go of the operators that are kept for the next cruise: they are made again when wanted."""
    with _idle_lock:
        _idle.clear()


def _workshop(problem: MixingProblem, deviations: FloatArray, columns: IntArray) -> _Workshop:
    """Return an empty workshop for members whose sources deviate so from their mean, as (member, source, property)."""
    n_member, n_source, _ = deviations.shape
    unperturbed = weighted_system(problem, columns)
    processes = np.broadcast_to(problem.processes, (n_member, *problem.processes.shape))
    weight = problem.weight[columns]
    systems = np.concatenate([deviations, processes], axis=1)[:, :, columns] * weight
    mass = problem.mass_weight or 0.0
    if problem.mass_weight is not None:
        row = np.where(np.arange(problem.n_unknown) < n_source, mass, 0.0)
        systems = np.concatenate([systems, np.broadcast_to(row[:, None], (n_member, len(row), 1))], axis=2)
    bit = bits_of(unperturbed.constrained)
    n_summed = int(unperturbed.summed.sum())
    content = hashlib.blake2b(systems.tobytes())
    for part in (np.array(systems.shape), weight, bit, np.array([n_summed, mass])):
        content.update(part.tobytes())
    return _Workshop(content.digest(), np.ascontiguousarray(systems), bit, n_summed, mass, weight)


def _taken(empty: _Workshop) -> _Workshop:
    """Return an idle workshop like ``empty``, which no other call gets until it is put back, else ``empty``."""
    with _idle_lock:
        return _idle.pop(empty.key, empty)


def _put_back(workshop: _Workshop) -> None:
    """Keep a workshop for the next call; those not used for longest give way."""
    with _idle_lock:
        _idle[workshop.key] = workshop
        while sum(one.size for one in _idle.values()) > _KEPT:
            _idle.popitem(last=False)
