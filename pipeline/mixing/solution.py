"""What came of a batch of samples: arrays in the order of the samples, some of them made when asked for."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.hull import Hull
    from pipeline.mixing.problem import MixingProblem

    FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Choices:
    """What depends only on which properties a sample has and which unknowns take part, one row per choice.

    The first row is of samples that have fewer equations than unknowns. Every other pattern of properties
    has a row for samples without an answer and one per support that was visited.
    """

    uncertainty: FloatArray  # (n_choice, n_unknown) NaN without an answer or where a bound holds the unknown
    support: NDArray[np.int32]  # (n_choice,) 0 without an answer
    condition_number: FloatArray  # (n_choice,) NaN where there are fewer equations than unknowns
    n_inside: NDArray[np.int64]  # (n_choice,) unknowns that take part, 0 without an answer


@dataclass(frozen=True, eq=False)
class MixingSolution:
    """What came of every sample. Where the status is not ``SOLVED``, floats are NaN and the support is 0."""

    problem: MixingProblem
    observed: FloatArray  # (n_sample, n_property) as given and not copied: residuals are made from it
    shares: FloatArray  # (n_sample, n_source) never negative
    processes: FloatArray  # (n_sample, n_process) respiration in umol/kg of phosphate
    # Misfits in standard uncertainties, squared, over properties less unknowns that take part, plus one
    # for the sum: a fit has as many parameters as the face of the constraints it lies on has dimensions
    # (Tibshirani and Taylor 2012, from memory).
    reduced_chi_square: FloatArray  # (n_sample,) NaN without degrees of freedom
    optimality: FloatArray  # (n_sample,) lowest share or reduced gradient: an optimum where not negative
    status: NDArray[np.int8]  # (n_sample,) a MixingStatus
    choice: NDArray[np.int32]  # (n_sample,) row of ``choices``
    choices: Choices

    @cached_property
    def residuals(self) -> FloatArray:
        """Fitted less observed, (n_sample, n_property), in property units; NaN where missing.

        Made when first asked for, from the ``observed`` that was solved: do not change it before.
        """
        from pipeline.mixing.residuals import write_residuals  # noqa: PLC0415 - numba takes long to import

        residuals = np.empty(self.observed.shape)
        problem = self.problem
        write_residuals(
            self.observed, problem.reference, problem.design, self.shares, self.processes, residuals
        )
        return residuals

    @cached_property
    def hull(self) -> Hull:
        """Where the samples lie against what the sources can mix to. Made when first asked for, like residuals."""
        from pipeline.mixing.hull import hull_of  # noqa: PLC0415 - it stands on the solver, which makes solutions

        return hull_of(self)

    @property
    def share_uncertainty(self) -> FloatArray:
        """Standard uncertainty of every share, (n_sample, n_source).

        First-order propagation of the problem's uncertainties through the operator of the sample's
        support. Exact where no bound is active. NaN where a share cannot move at all: it is held at zero, or
        all others are and the sum holds it at one. How far it is from the truth is not known to first order.
        """
        return self.choices.uncertainty[self.choice, : self.shares.shape[1]]

    @property
    def process_uncertainty(self) -> FloatArray:
        """Standard uncertainty of every process, (n_sample, n_process), like that of the shares."""
        return self.choices.uncertainty[self.choice, self.shares.shape[1] :]

    @property
    def support(self) -> NDArray[np.int32]:
        """Which unknowns take part, (n_sample,): bit i is set where the i-th that is not free does."""
        return self.choices.support[self.choice]

    @property
    def degrees_of_freedom(self) -> FloatArray:
        """Properties and the sum less unknowns that take part, (n_sample,); NaN where not solved."""
        n_equation = (~np.isnan(self.observed)).sum(axis=1) + 1
        n_inside = self.choices.n_inside[self.choice]
        return np.where(n_inside > 0, n_equation - n_inside, np.nan)

    @property
    def condition_number(self) -> FloatArray:
        """Of the weighted properties, (n_sample,): NaN where INCOMPLETE, known where UNDETERMINED."""
        return self.choices.condition_number[self.choice]
