"""Exact constrained least squares for whole batches: shares, processes, residuals, or why there are none.

    minimise  sum_j (w_j (G f + R r - d)_j)^2    subject to   f >= 0,  sum f = 1,  r >= 0 or free

for every sample d of n_property values, n_source shares f and n_process amounts r (Tomczak 1981;
Mackas et al. 1987; Karstensen and Tomczak 1998 for the processes). Arrays in, arrays out.
"""

from __future__ import annotations

from dataclasses import fields
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.blocks import Results, System
from pipeline.mixing.operators import inside, no_operators
from pipeline.mixing.problem import MixingProblem, equations_for, weighted_system
from pipeline.mixing.solution import Choices, MixingSolution
from pipeline.mixing.status import MixingStatus

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from pipeline.mixing.problem import WeightedSystem

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

__all__ = ["ABSURD_DEVIATION", "Choices", "MixingSolution", "groups", "solve"]

# A value further from the sources than a million of its weighted units is no measurement, and double
# precision could no longer tell the shares to ten digits.
ABSURD_DEVIATION = 1e6


def solve(problem: MixingProblem, observed: FloatArray, *, condition_limit: float = 1e3) -> MixingSolution:
    """Resolve every sample into the sources and processes of ``problem``.

    Parameters
    ----------
    problem
        Sources, weights, processes, and how the sum of the shares is held.
    observed
        (n_sample, n_property) in property units, NaN where missing.
    condition_limit
        Condition number of the weighted properties above which samples are left UNDETERMINED. With weights
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
    results = Results(
        unknowns=np.empty((n_sample, problem.n_unknown)),
        chi_square=np.empty(n_sample),
        optimality=np.empty(n_sample),
        choice=np.zeros(n_sample, dtype=np.int32),
        status=np.full(n_sample, MixingStatus.INCOMPLETE, dtype=np.int8),
    )
    listed = [_no_answer(problem, np.nan)]
    n_choice = 1
    for columns, rows in _passes(problem, values, results.status, condition_limit):
        system = weighted_system(problem, columns)
        listed.append(_no_answer(problem, system.condition_number))
        n_choice += 1
        if system.condition_number > condition_limit:
            results.choice[rows] = n_choice - 1
            results.status[rows] = MixingStatus.UNDETERMINED
            continue
        listed.append(_solve_rows(problem, system, values, columns, rows, n_choice, results))
        n_choice += len(listed[-1].support)

    unsolved = np.flatnonzero(results.status != MixingStatus.SOLVED)
    for result in (results.unknowns, results.chi_square, results.optimality):
        result[unsolved] = np.nan
    return MixingSolution(
        problem=problem,
        observed=values,
        shares=results.unknowns[:, :n_source],
        processes=results.unknowns[:, n_source:],
        reduced_chi_square=results.chi_square,
        optimality=results.optimality,
        status=results.status,
        choice=results.choice,
        choices=Choices(
            *(np.concatenate([getattr(one, each.name) for one in listed]) for each in fields(Choices))
        ),
    )


def groups(values: FloatArray) -> Iterator[tuple[IntArray, IntArray]]:
    """Yield the properties that are there, and the samples that have just these, in their order."""
    n_sample, n_property = values.shape
    there = ~np.isnan(values)
    if there.all():
        if n_sample:
            yield np.arange(n_property), np.arange(n_sample)
        return
    # A pattern is one integer of as few bytes as will do: up to two are sorted in linear time.
    n_byte = next(size for size in (1, 2, 4, 8) if n_property <= 8 * size)
    pattern = np.zeros((n_sample, n_byte), dtype=np.uint8)
    packed = np.packbits(there, axis=1, bitorder="little")
    pattern[:, : packed.shape[1]] = packed
    pattern = pattern.view(f"<u{n_byte}")[:, 0]
    order = np.argsort(pattern, kind="stable")
    for rows in np.split(order, np.flatnonzero(np.diff(pattern[order])) + 1):
        yield np.flatnonzero(there[rows[0]]), rows


def _passes(
    problem: MixingProblem, values: FloatArray, status: NDArray[np.int8], condition_limit: float
) -> Iterator[tuple[IntArray, IntArray]]:
    """Yield properties that have as many equations as unknowns, and the samples to be solved with just these.

    Samples that have all properties come first, and only where these determine the unknowns: as no rows,
    which means all samples that are complete. Sorting by what is missing is for those that are left then.
    """
    whole = np.arange(values.shape[1])
    enough = len(values) and whole.size + 1 >= problem.n_unknown
    solved_first = bool(enough and weighted_system(problem, whole).condition_number <= condition_limit)
    if solved_first:
        yield whole, np.empty(0, dtype=np.int64)
        if not (status == MixingStatus.INCOMPLETE).any():
            return
    for columns, rows in groups(values):
        if solved_first and columns.size == whole.size:
            continue
        if columns.size and columns.size + 1 >= problem.n_unknown:
            yield columns, rows


def _solve_rows(
    problem: MixingProblem,
    system: WeightedSystem,
    values: FloatArray,
    columns: IntArray,
    rows: IntArray,
    first_choice: int,
    results: Results,
) -> Choices:
    """Solve the samples ``rows``, which have the properties ``columns``, into their rows of ``results``.

    Returns what was visited for them.
    """
    from pipeline.mixing import kernel  # noqa: PLC0415 - numba takes longer to import than all else here

    n_unknown = problem.n_unknown
    equations = equations_for(problem, system, columns)
    operators = no_operators(equations, first_choice)
    kernel.solve_rows(
        values,
        rows,
        System(
            columns=columns,
            reference=problem.reference[columns],
            weight=equations.weight,
            uncertainty=problem.uncertainty[columns],
            design=np.ascontiguousarray(problem.design[:, columns].T),
            bit=equations.bit,
            n_summed=equations.n_summed,
            reach=system.reach,
            limit=ABSURD_DEVIATION,
        ),
        operators,
        results,
    )
    n_made = int(operators.n_made[0])
    support = operators.support[:n_made].astype(np.int32)
    matrix = operators.matrix[: n_made * n_unknown].reshape(n_made, n_unknown, columns.size)
    spread = np.sqrt(np.einsum("sij,j->si", matrix**2, problem.uncertainty[columns] ** 2))
    taking_part = inside(equations.bit, support)
    moves = taking_part.copy()
    if equations.n_summed:  # a share without another to exchange with is one
        moves[taking_part[:, : equations.n_summed].sum(axis=1) == 1, : equations.n_summed] = False
    return Choices(
        uncertainty=np.where(moves, spread, np.nan),
        support=support,
        condition_number=np.full(n_made, system.condition_number),
        n_inside=np.maximum(taking_part.sum(axis=1), 1),
    )


def _no_answer(problem: MixingProblem, condition_number: float) -> Choices:
    """Return the choice of samples without an answer."""
    return Choices(
        uncertainty=np.full((1, problem.n_unknown), np.nan),
        support=np.zeros(1, dtype=np.int32),
        condition_number=np.array([condition_number]),
        n_inside=np.zeros(1, dtype=np.int64),
    )
