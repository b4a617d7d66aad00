"""The equality-constrained form against a general convex solver, and two- and three-source cases by hand."""

from __future__ import annotations

import cvxpy
import numpy as np
import pytest

from pipeline.mixing.problem import MixingProblem
from pipeline.mixing.solver import solve
from pipeline.mixing.status import MixingStatus

# Broecker et al. 1998 (from memory): northern and southern end members of PO4*, umol/kg.
NORTHERN, SOUTHERN = 0.73, 1.95


@pytest.mark.parametrize("seed", range(12))
def test_exact_sums_agree_with_a_convex_solver(seed: int) -> None:
    random = np.random.default_rng(seed)
    n_source, n_property = random.integers(2, 6), 6
    sources = random.normal(size=(n_source, n_property))
    respiration = random.normal(size=(1, n_property))
    observed = random.normal(size=n_property)
    uncertainty = random.uniform(0.5, 2.0, n_property)
    found = solve(
        MixingProblem(sources, uncertainty, 1 / uncertainty, respiration, ("non_negative",)), observed[None]
    )

    shares, amount = cvxpy.Variable(n_source, nonneg=True), cvxpy.Variable(nonneg=True)
    misfit = cvxpy.multiply(1 / uncertainty, sources.T @ shares + respiration[0] * amount - observed)
    program = cvxpy.Problem(cvxpy.Minimize(cvxpy.sum_squares(misfit)), [cvxpy.sum(shares) == 1])
    program.solve(solver=cvxpy.CLARABEL, tol_gap_abs=1e-12, tol_gap_rel=1e-12, tol_feas=1e-12)
    assert shares.value is not None
    np.testing.assert_allclose(found.shares[0], shares.value, atol=2e-6)
    np.testing.assert_allclose(found.processes[0], amount.value, atol=2e-6)


@pytest.mark.parametrize(("po4_star", "southern"), [(1.35, 0.508), (1.39, 0.541), (1.40, 0.549)])
def test_the_deep_pacific_and_indian_are_about_half_southern(po4_star: float, southern: float) -> None:
    problem = MixingProblem(
        np.array([[NORTHERN], [SOUTHERN]]), np.array([0.05]), np.array([20.0]), np.zeros((0, 1))
    )
    solution = solve(problem, np.array([[po4_star]]))
    assert solution.status[0] == MixingStatus.SOLVED
    assert solution.shares[0, 1] == pytest.approx(southern, abs=5e-4)
    assert solution.shares[0].sum() == pytest.approx(1.0, abs=1e-15)


def test_three_sources_by_hand() -> None:
    # corners of a right triangle: the shares are the coordinates themselves
    sources = np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]])
    problem = MixingProblem(sources, np.ones(2), np.ones(2), np.zeros((0, 2)))
    inside, beyond, corner = solve(problem, np.array([[0.25, 0.5], [1.0, 1.0], [-1.0, -2.0]])).shares
    np.testing.assert_allclose(inside, [0.25, 0.25, 0.5], atol=1e-15)
    np.testing.assert_allclose(beyond, [0.0, 0.5, 0.5], atol=1e-15)
    np.testing.assert_allclose(corner, [1.0, 0.0, 0.0], atol=1e-15)
