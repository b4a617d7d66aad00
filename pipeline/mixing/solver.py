"""Exact constrained least squares for whole batches: shares, processes, residuals, or why there are none.

    minimise  sum_j (w_j (G f + R r - d)_j)^2    subject to   f >= 0,  sum f = 1,  r >= 0 or free

for every sample d of n_property values, n_source shares f and n_process amounts r (Tomczak 1981;
Mackas et al. 1987; Karstensen and Tomczak 1998 for the processes). Arrays in, arrays out.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.operators import support_operators
from pipeline.mixing.problem import MixingProblem, weighted_system
from pipeline.mixing.status import MixingStatus

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from pipeline.mixing.problem import WeightedSystem

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# A value further from the sources than a million of its weighted units is no measurement, and double
# precision could no longer tell the shares to ten digits.
ABSURD_DEVIATION = 1e6

_LANES = 4  # doubles in a vector register: unknowns are padded to a multiple


@dataclass(frozen=True, eq=False)
class Choices:
    """What depends only on which properties a sample has and which unknowns take part, one row per choice.

    The first row is of samples that have fewer equations than unknowns. Every other pattern of properties
    has a row for samples without an answer and one per support.
    """

    uncertainty: FloatArray  # (n_choice, n_unknown) NaN without an answer
    support: NDArray[np.int32]  # (n_choice,) 0 without an answer
    condition_number: FloatArray  # (n_choice,) NaN where there are fewer equations than unknowns


@dataclass(frozen=True, eq=False)
class MixingSolution:
    """What came of every sample. Where the status is not ``SOLVED``, floats are NaN and the support is 0."""

    shares: FloatArray  # (n_sample, n_source) never negative
    processes: FloatArray  # (n_sample, n_process) respiration in umol/kg of phosphate
    residuals: FloatArray  # (n_sample, n_property) fitted less observed, in property units; NaN where missing
    # Misfits in standard uncertainties, squared, over properties less unknowns that take part, plus one
    # for the sum: a fit has as many parameters as the face of the constraints it lies on has dimensions
    # (Tibshirani and Taylor 2012, from memory).
    reduced_chi_square: FloatArray  # (n_sample,) NaN without degrees of freedom
    optimality: FloatArray  # (n_sample,) lowest share or reduced gradient: an optimum where not negative
    status: NDArray[np.int8]  # (n_sample,) a MixingStatus
    choice: NDArray[np.int32]  # (n_sample,) row of ``choices``
    choices: Choices

    @property
    def share_uncertainty(self) -> FloatArray:
        """Standard uncertainty of every share, (n_sample, n_source).

        First-order propagation of the problem's uncertainties through the operator of the sample's
        support. Exact where no bound is active; a share that is held at zero has none.
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
    def condition_number(self) -> FloatArray:
        """Of the weighted system, (n_sample,): NaN where INCOMPLETE, known where UNDETERMINED."""
        return self.choices.condition_number[self.choice]


def solve(problem: MixingProblem, observed: FloatArray, *, condition_limit: float = 1e3) -> MixingSolution:
    """Resolve every sample into the sources and processes of ``problem``.

    Parameters
    ----------
    problem
        Sources, weights, processes, and how the sum of the shares is held.
    observed
        (n_sample, n_property) in property units, NaN where missing.
    condition_limit
        Condition number of the weighted system above which samples are left UNDETERMINED. With weights
        of one over the uncertainty, singular values are one over the uncertainties of combinations of
        shares. None is known to much better than 0.001, so at 1000 another is known no better than 1,
        the whole range.

    Raises
    ------
    ValueError
        Where ``observed`` has another shape. No value of a sample makes this raise.

    Notes
    -----
    The answer to a sample depends on that sample alone, to the last bit: not on its neighbours, their
    order, or how a cruise is cut into batches.

    """
    values = np.ascontiguousarray(observed, dtype=np.float64)
    n_source, n_property = problem.sources.shape
    if values.ndim != 2 or values.shape[1] != n_property:
        raise ValueError(f"observed has shape {values.shape}; expected (n_sample, {n_property})")
    n_sample = len(values)
    unknowns = np.empty((n_sample, problem.n_unknown))
    residuals = np.empty((n_sample, n_property))
    chi_square, optimality = np.empty((2, n_sample))
    choice = np.zeros(n_sample, dtype=np.int32)
    status = np.full(n_sample, MixingStatus.INCOMPLETE, dtype=np.int8)
    # Uncertainties of the unknowns and condition number, for choices that follow one another.
    no_answer = np.full((1, problem.n_unknown), np.nan)
    listed: list[tuple[FloatArray, float]] = [(no_answer, np.nan)]
    n_choice = 1
    for columns, rows in _groups(values):
        if columns.size == 0 or columns.size + 1 < problem.n_unknown:
            continue
        system = weighted_system(problem, columns)
        choice[rows] = n_choice
        listed.append((no_answer, system.condition_number))
        n_choice += 1
        if system.condition_number > condition_limit:
            status[rows] = MixingStatus.UNDETERMINED
            continue
        results = (unknowns, residuals, chi_square, optimality, choice, status)
        spread = _solve_group(problem, system, values, columns, rows, n_choice, results)
        listed.append((spread, system.condition_number))
        n_choice += len(spread)

    unsolved = np.flatnonzero(status != MixingStatus.SOLVED)
    for result in (unknowns, residuals, chi_square, optimality):
        result[unsolved] = np.nan
    return MixingSolution(
        shares=unknowns[:, :n_source],
        processes=unknowns[:, n_source:],
        residuals=residuals,
        reduced_chi_square=chi_square,
        optimality=optimality,
        status=status,
        choice=choice,
        choices=Choices(
            uncertainty=np.concatenate([spread for spread, _ in listed]),
            support=np.concatenate([np.arange(len(spread), dtype=np.int32) for spread, _ in listed]),
            condition_number=np.concatenate([np.full(len(spread), number) for spread, number in listed]),
        ),
    )


def _groups(values: FloatArray) -> Iterator[tuple[IntArray, IntArray]]:
    """Yield the properties that are there, and the samples that have just these, in their order."""
    n_sample, n_property = values.shape
    there = ~np.isnan(values)
    if there.all():
        if n_sample:
            yield np.arange(n_property), np.arange(n_sample)
        return
    pattern = there @ (1 << np.arange(n_property))
    if n_property <= 16:
        pattern = pattern.astype(np.uint16)  # sorted in linear time
    order = np.argsort(pattern, kind="stable")
    for rows in np.split(order, np.flatnonzero(np.diff(pattern[order])) + 1):
        yield np.flatnonzero(there[rows[0]]), rows


def _solve_group(
    problem: MixingProblem,
    system: WeightedSystem,
    values: FloatArray,
    columns: IntArray,
    rows: IntArray,
    first_choice: int,
    results: tuple[NDArray[np.generic], ...],
) -> FloatArray:
    """Solve the samples ``rows``, all of which have the properties ``columns``, into their rows of ``results``.

    Returns the standard uncertainty of every unknown per support, (n_support, n_unknown).
    """
    from pipeline.mixing import kernel  # noqa: PLC0415 - numba takes longer to import than all else here

    n_used, n_unknown = columns.size, problem.n_unknown
    operators = support_operators(system.A, system.constrained, system.summed)
    n_support = operators.usable.size
    n_lane = -(-n_unknown // _LANES) * _LANES
    matrix = np.zeros((n_support, n_used, n_lane))  # acts on deviations in property units
    matrix[:, :, :n_unknown] = operators.matrix[:, :n_used] * problem.weight[columns, None]
    constant = np.zeros((n_support, n_lane))
    constant[:, :n_unknown] = operators.constant
    if problem.mass_weight is not None:
        constant[:, :n_unknown] += operators.matrix[:, n_used] * problem.mass_weight

    freedom = n_used + 1.0 - np.maximum(operators.inside.sum(axis=1), 1)
    bit = np.zeros(n_unknown, dtype=np.int64)
    bit[system.constrained] = 1 << np.arange(system.constrained.sum())
    kernel.solve_rows(
        values,
        rows,
        columns,
        problem.reference[columns],
        problem.weight[columns],
        1 / problem.uncertainty[columns],
        ABSURD_DEVIATION,
        system.reach,
        matrix,
        constant,
        operators.usable,
        bit,
        int(system.summed.sum()),
        np.ascontiguousarray(problem.design[:, columns]),
        1 / np.where(freedom > 0, freedom, np.nan),
        first_choice,
        *results,
    )
    spread = np.sqrt(np.einsum("sji,j->si", matrix[:, :, :n_unknown] ** 2, problem.uncertainty[columns] ** 2))
    return np.where(operators.inside, spread, 0.0)
