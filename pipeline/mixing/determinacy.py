"""What the properties of a source set can tell, before any sample is seen: rank, uncertainties, alike sources.

Everything here is first-order propagation at the centre of the simplex, where every source has the same
share and no bound is active. Sentences about it are in ``advice``.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.operators import RANK_TOLERANCE
from pipeline.mixing.problem import weighted_system
from pipeline.mixing.products import covariance_in_rows, usable_together
from pipeline.mixing.properties import PROCESS_UNITS, calcium_carbonate_ratios, respiration_ratios
from pipeline.mixing.weights import measured_in_rows, mixing_problem

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from pipeline.mixing.entries import Catalogue, SourceSet
    from pipeline.mixing.problem import MixingProblem
    from pipeline.settings import Settings

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]

_UNSEEN = 1e-7  # part of a combination of unknowns that may lie where the data see nothing: rounding


@dataclass(frozen=True, eq=False)
class Propagation:
    """Standard uncertainties of the unknowns of a system; infinite where the data do not see them."""

    unknown: FloatArray  # (n_unknown,) shares, then processes
    # Of moving share from one source to another, i.e. of (f_i - f_j) / 2, all other unknowns free.
    exchange: FloatArray  # (n_source, n_source) zero on the diagonal
    # The same with all other unknowns held where they are: one over the distance of the two sources.
    alone: FloatArray  # (n_source, n_source) zero on the diagonal
    company: FloatArray  # (n_unknown, n_unknown) in row i, how all unknowns err where unknown i errs by one
    rank: int


@dataclass(frozen=True, eq=False)
class Worth:
    """What becomes of a set when one of its properties is missing."""

    name: str
    condition_number: float  # of the weighted system without it
    share_uncertainty: float  # largest of the shares' without it


@dataclass(frozen=True, eq=False)
class Determinacy:
    """What a set can tell with some of its properties."""

    chosen: SourceSet  # its properties are those in use
    n_unknown: int
    n_free: int  # unknowns, less one for an exact sum
    condition_number: float  # of the weighted system, infinite where the rank is short
    propagation: Propagation
    worth: tuple[Worth, ...]  # per property in use

    @property
    def n_equation(self) -> int:
        """Properties in use, and the sum of the shares."""
        return len(self.chosen.properties) + 1

    @property
    def share_uncertainty(self) -> FloatArray:
        """Standard uncertainty of every share at the centre, (n_source,)."""
        return self.propagation.unknown[: len(self.chosen.sources)]

    @property
    def respiration_uncertainty(self) -> float | None:
        """Standard uncertainty of respiration, umol/kg of phosphate; None where the set knows none."""
        return self.process_uncertainty("respiration")

    def process_uncertainty(self, name: str) -> float | None:
        """Return the standard uncertainty of a further unknown, in umol/kg; None where the set does not know it."""
        known = zip(self.chosen.processes, self.propagation.unknown[len(self.chosen.sources) :], strict=True)
        spreads = (float(PROCESS_UNITS[name] * spread) for process, spread in known if process == name)
        return next(spreads, None)


def determinacy(catalogue: Catalogue, chosen: SourceSet, settings: Settings) -> Determinacy:
    """Return what a set can tell with its properties.

    Parameters
    ----------
    catalogue, chosen
        The catalogue and one of its sets, or such a set with fewer properties, but at least one.
    settings
        The stoichiometry, and uncertainties of measurements.

    """
    propagation, condition = _judge(catalogue, chosen, settings)
    worth = []
    for name in chosen.properties:
        fewer = _having(chosen, chosen.properties, without=name)
        if not fewer.properties:
            continue
        without, number = _judge(catalogue, fewer, settings)
        worth.append(Worth(name, number, _largest_share(without)))
    n_unknown = len(propagation.unknown)
    return Determinacy(
        chosen=chosen,
        n_unknown=n_unknown,
        n_free=n_unknown - (chosen.mass == "exact"),
        condition_number=condition,
        propagation=propagation,
        worth=tuple(worth),
    )


def with_another(catalogue: Catalogue, chosen: SourceSet, name: str, settings: Settings) -> Propagation:
    """Return what a set could tell if it had one more property, which all its sources give.

    The weights are those of the default, since none are given for the new property.
    """
    more = _having(chosen, (*chosen.properties, name))
    more = more.model_copy(update={"weights": "uncertainty", "given_weights": None})
    return _judge(catalogue, more, settings)[0]


def _judge(catalogue: Catalogue, chosen: SourceSet, settings: Settings) -> tuple[Propagation, float]:
    """Return the uncertainties of a set's unknowns and the condition number of its weighted system."""
    if chosen.mass == "weighted" and _all_the_same(catalogue, chosen):
        # Such a sum has no weight, and its row would tell no source from another either.
        chosen = chosen.model_copy(update={"mass": "exact", "mass_weight": None})
    ratios = respiration_ratios(settings.tracers, chosen.silicate_per_phosphate)
    dissolution = calcium_carbonate_ratios(settings.tracers)
    problem = mixing_problem(catalogue, chosen, ratios, settings.mixing.uncertainty, dissolution)
    system = weighted_system(problem, np.arange(len(chosen.properties)))
    misfit = misfit_at_centre(catalogue, chosen, problem, settings)
    weight = np.zeros(len(system.A))  # the row of a weighted sum is without error
    weight[: len(problem.weight)] = problem.weight
    covariance = np.zeros((len(weight), len(weight)))
    covariance[: len(misfit), : len(misfit)] = misfit
    covariance *= np.outer(weight, weight)
    # A rank that is short only by rounding is a short rank.
    propagation = propagate(system.A, system.summed, covariance, len(problem.sources))
    n_free = problem.n_unknown - bool(system.summed.any())
    return propagation, system.condition_number if propagation.rank == n_free else np.inf


def misfit_at_centre(
    catalogue: Catalogue, chosen: SourceSet, problem: MixingProblem, settings: Settings
) -> FloatArray:
    """Return the covariance of a sample's misfit at equal shares, (n_property, n_property), in property units.

    The measurement's, and that of every source times its share squared, 1 / n_source**2.
    """
    names = chosen.properties
    measured = measured_in_rows(names, problem.reference, settings.mixing.uncertainty)
    each = [catalogue.sources[code] for code in chosen.sources]
    sources = [
        covariance_in_rows(names, source.values_of(names), source.covariance_of(names)) for source in each
    ]
    return np.asarray(np.diag(measured**2) + np.sum(sources, axis=0) / len(sources) ** 2)


def propagate(A: FloatArray, summed: BoolArray, covariance: FloatArray, n_source: int) -> Propagation:
    """Return how uncertain the optimum of ``min |A x - b|`` is where no bound is active.

    The optimum is x = x0 + T y with free y, where T spans the plane on which the summed unknowns add up to
    one. With A T = U diag(s) V', the uncertainty of any combination q'x is that of (V'T'q / s)' U'b. It is
    infinite where part of T'q lies in directions without singular value. For a pair, q is half the
    difference of the two shares: the coordinate along which share is moved from the one to the other.

    Parameters
    ----------
    A
        Weighted system, (n_equation, n_unknown), shares first.
    summed
        Unknowns whose sum is held exactly, (n_unknown,).
    covariance
        Of the weighted data ``b``, (n_equation, n_equation).
    n_source
        How many of the unknowns are shares.

    """
    n_unknown = A.shape[1]
    T = _directions(summed)  # (n_unknown, n_free)
    U, s, Vt = np.linalg.svd(A @ T)
    rank = int((s > RANK_TOLERANCE * s[0]).sum()) if s.size and s[0] > 0 else 0

    one, other = np.triu_indices(n_source, k=1)
    pairs = np.zeros((len(one), n_unknown))  # (n_pair, n_unknown)
    pairs[np.arange(len(one)), one], pairs[np.arange(len(one)), other] = 0.5, -0.5
    seen = np.concatenate([np.eye(n_unknown), pairs]) @ T @ Vt.T  # (n_unknown + n_pair, n_free)
    size = np.sqrt((seen**2).sum(axis=1))
    lost = np.sqrt((seen[:, rank:] ** 2).sum(axis=1)) > _UNSEEN * np.where(size > 0, size, 1.0)
    to_data = (seen[:, :rank] / s[:rank]) @ U[:, :rank].T  # (n_unknown + n_pair, n_equation)
    spread = np.sqrt(np.einsum("ki,ij,kj->k", to_data, covariance, to_data))
    spread[lost] = np.inf

    exchange, alone = np.zeros((2, n_source, n_source))
    exchange[one, other] = exchange[other, one] = spread[n_unknown:]
    step = (
        2 * pairs @ A.T
    )  # (n_pair, n_equation) what moving the whole sample from the one to the other changes
    distance = (step**2).sum(axis=1)
    width = np.sqrt(np.einsum("ki,ij,kj->k", step, covariance, step))
    apart = distance > (RANK_TOLERANCE * (s[0] if s.size else 0.0)) ** 2
    alone[one, other] = alone[other, one] = np.where(apart, width / np.where(apart, distance, 1.0), np.inf)

    company = _company(T @ Vt[rank:].T, to_data[:n_unknown], covariance, lost[:n_unknown])
    return Propagation(spread[:n_unknown], exchange, alone, company, rank)


def _company(free: FloatArray, to_data: FloatArray, covariance: FloatArray, lost: BoolArray) -> FloatArray:
    """Return how all unknowns err where unknown i errs by one, in row i of (n_unknown, n_unknown).

    Parameters
    ----------
    free
        Changes of the unknowns that the data do not see, (n_unknown, n_unseen).
    to_data
        From weighted data to unknowns, (n_unknown, n_equation).
    covariance
        Of the weighted data.
    lost
        Unknowns that are not seen, (n_unknown,): in their rows stand changes that nothing sees.

    """
    together = np.where(lost[:, None], free @ free.T, to_data @ covariance @ to_data.T)
    own = np.diag(together)
    return np.asarray(together / np.where(own > 0, own, 1.0)[:, None])


def _directions(summed: BoolArray) -> FloatArray:
    """Return vectors that span the unknowns whose summed entries add up to zero, (n_unknown, n_free)."""
    T = np.eye(len(summed))
    if not summed.any():
        return T
    last = int(np.flatnonzero(summed)[-1])
    T[last, summed] = -1.0
    return np.delete(T, last, axis=1)


def _having(chosen: SourceSet, properties: Sequence[str], without: str | None = None) -> SourceSet:
    left = usable_together([name for name in properties if name != without])
    return chosen.model_copy(update={"properties": left})


def _all_the_same(catalogue: Catalogue, chosen: SourceSet) -> bool:
    """Return whether no property of a set differs between its sources."""
    first, *others = (catalogue.sources[code].properties for code in chosen.sources)
    return all(one[name].value == first[name].value for one in others for name in chosen.properties)


def _largest_share(propagation: Propagation) -> float:
    return float(propagation.unknown[: len(propagation.exchange)].max())
