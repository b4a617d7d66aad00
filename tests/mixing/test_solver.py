from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest
from scipy.optimize import LinearConstraint, lsq_linear, minimize, nnls

from pipeline.mixing.problem import weighted_system
from pipeline.mixing.solver import solve
from pipeline.mixing.status import MixingStatus

from .invented import enumerated, kkt_violation, problem, random_problem, random_samples, system

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.problem import MixingProblem, Sign
    from pipeline.mixing.solver import MixingSolution

# Illustrative sources A, B, C, not published: theta, S, O2, PO4, NO3, Si. Shares as scipy.optimize.nnls
# gives them to eight decimals for weights of misfits over the spread of the sources.
SOURCES = np.array(
    [
        [2.5, 34.92, 255.0, 1.35, 20.5, 25.0],
        [-0.5, 34.66, 225.0, 2.25, 32.5, 125.0],
        [4.0, 34.25, 250.0, 2.05, 29.0, 20.0],
    ]
)
WEIGHTS = np.array([10.0, 10.0, 4.0, 3.0, 3.0, 2.0]) / SOURCES.std(axis=0, ddof=1)
RESPIRATION = np.array([[0.0, 0.0, -170.0, 1.0, 16.0, 0.0]])
RESPIRED = (1.9, 34.708, 219.5, 1.91, 28.2, 54.0)
OUTSIDE = (3.1, 34.972, 261.0, 1.17, 18.1, 5.0)
WORKED = [
    ((1.9, 34.708, 245.0, 1.76, 25.8, 54.0), 50.0, False, (0.5, 0.3, 0.2), 0.0),
    (RESPIRED, 50.0, True, (0.5, 0.3, 0.2, 0.15), 0.0),
    (RESPIRED, 50.0, False, (0.34177545, 0.46639652, 0.19182802), 5.72348327),
    ((1.92, 34.711, 246.5, 1.74, 26.1, 53.0), 50.0, False, (0.51267211, 0.28739758, 0.19993031), 0.36780359),
    (OUTSIDE, 50.0, False, (1.01245459, 0.0, 0.0), 3.76471187),
    (OUTSIDE, 10.0, False, (1.14621291, 0.0, 0.01529143), None),
    (OUTSIDE, 1000.0, False, (1.00003264, 0.0, 0.0), None),
]


def _worked(mass_weight: float | None, *, extended: bool) -> MixingProblem:
    return problem(
        SOURCES,
        1 / WEIGHTS,
        processes=RESPIRATION if extended else None,
        signs=("non_negative",) if extended else (),
        mass_weight=mass_weight,
    )


def _unknowns(solution: MixingSolution) -> NDArray[np.float64]:
    return np.hstack([solution.shares, solution.processes])


@pytest.mark.parametrize(("sample", "mass_weight", "extended", "unknowns", "norm"), WORKED)
def test_worked_case_to_the_printed_digits(
    sample: tuple[float, ...],
    mass_weight: float,
    extended: bool,
    unknowns: tuple[float, ...],
    norm: float | None,
) -> None:
    of = _worked(mass_weight, extended=extended)
    solution = solve(of, np.array([sample]))
    np.testing.assert_allclose(_unknowns(solution)[0], unknowns, rtol=0, atol=0.5e-8)
    if norm is not None:
        misfit = np.hypot(
            np.linalg.norm(solution.residuals[0] * of.weight), mass_weight * (solution.shares.sum() - 1)
        )
        assert misfit == pytest.approx(norm, abs=0.5e-8)


def test_condition_numbers_of_the_worked_case() -> None:
    """The whole system's, the row of the sum included; samples are judged without that row."""
    for extended, expected in ((False, 6.580), (True, 7.474)):
        whole = weighted_system(_worked(50.0, extended=extended), np.arange(6)).A
        assert np.linalg.cond(whole) == pytest.approx(expected, abs=5e-4)


@pytest.mark.parametrize("extended", [False, True])
def test_the_weight_of_the_sum_says_nothing_of_what_the_properties_can_tell(extended: bool) -> None:
    """With centred rows the sum has a direction of its own, so its weight is no matter of the sources."""
    sample = np.array([RESPIRED])
    exact = solve(_worked(None, extended=extended), sample)
    for mass_weight in (1e-3, 1.0, 50.0, 1e6):
        weighted = solve(_worked(mass_weight, extended=extended), sample)
        assert weighted.status[0] == MixingStatus.SOLVED, mass_weight
        assert weighted.condition_number[0] == pytest.approx(exact.condition_number[0], rel=1e-6)
        np.testing.assert_allclose(weighted.shares.sum(), 1.0, atol=1e-9)
    beyond = solve(_worked(1e13, extended=extended), sample)
    assert beyond.status[0] == MixingStatus.UNDETERMINED, "rounding would decide"


CASES: list[tuple[int, int, tuple[Sign, ...], float | None]] = [
    (1, 3, (), None),
    (3, 4, (), None),
    (3, 2, (), None),  # as many equations as unknowns
    (5, 8, ("non_negative",), None),
    (5, 8, ("free",), None),
    (5, 8, ("free", "non_negative"), None),
    (1, 3, (), 5.0),
    (4, 7, (), 20.0),
    (4, 7, ("non_negative",), 0.5),
    (4, 8, ("non_negative", "free"), 5.0),
]


@pytest.mark.parametrize(("n_source", "n_property", "signs", "mass_weight"), CASES)
def test_equals_the_enumeration_of_all_choices(
    n_source: int, n_property: int, signs: tuple[Sign, ...], mass_weight: float | None
) -> None:
    random = np.random.default_rng(n_source * 100 + n_property)
    of = random_problem(
        random, n_source=n_source, n_property=n_property, signs=signs, mass_weight=mass_weight
    )
    samples = random_samples(random, of, 40)
    solution = solve(of, samples)
    assert (solution.status == MixingStatus.SOLVED).all()
    for sample, unknowns in zip(samples, _unknowns(solution), strict=True):
        np.testing.assert_allclose(unknowns, enumerated(of, sample), rtol=1e-9, atol=1e-10)


@pytest.mark.parametrize(("n_source", "n_property", "signs", "mass_weight"), CASES)
def test_every_sample_meets_the_conditions_of_an_optimum(
    n_source: int, n_property: int, signs: tuple[Sign, ...], mass_weight: float | None
) -> None:
    random = np.random.default_rng(n_source * 200 + n_property)
    of = random_problem(
        random, n_source=n_source, n_property=n_property, signs=signs, mass_weight=mass_weight
    )
    samples = random_samples(random, of, 5_000)
    solution = solve(of, samples)
    assert kkt_violation(of, samples, _unknowns(solution)) < 1e-10
    assert (solution.shares >= 0).all()
    assert (solution.optimality > -1e-12).all()
    if mass_weight is None:
        assert np.abs(solution.shares.sum(axis=1) - 1).max() < 1e-15


@pytest.mark.parametrize(("n_source", "n_process"), [(5, 0), (4, 1), (8, 0), (3, 3)])
def test_equals_nnls_sample_by_sample(n_source: int, n_process: int) -> None:
    random = np.random.default_rng(n_source)
    sign: Sign = "non_negative"
    of = random_problem(random, n_source=n_source, n_property=8, signs=(sign,) * n_process, mass_weight=10.0)
    samples = random_samples(random, of, 2_000)
    A, b = system(of, samples)
    reference = np.array([nnls(A, right)[0] for right in b])
    np.testing.assert_allclose(_unknowns(solve(of, samples)), reference, rtol=0, atol=1e-10)
    assert (reference == 0).any(axis=1).mean() > 0.2, "too few active bounds to tell anything"


def test_equals_bounded_least_squares_where_a_process_is_free() -> None:
    random = np.random.default_rng(7)
    of = random_problem(random, n_source=4, n_property=8, signs=("free", "non_negative"), mass_weight=10.0)
    samples = random_samples(random, of, 100)
    A, b = system(of, samples)
    bounds = ([0.0] * 4 + [-np.inf, 0.0], np.inf)
    reference = [lsq_linear(A, right, bounds, method="bvls", tol=1e-14).x for right in b]
    solution = solve(of, samples)
    np.testing.assert_allclose(_unknowns(solution), reference, rtol=1e-8, atol=1e-8)
    assert (solution.processes[:, 0] < 0).any(), "no process was negative"


def test_agrees_with_a_general_optimiser_on_the_exact_sum() -> None:
    random = np.random.default_rng(11)
    of = random_problem(random, n_source=4, n_property=6)
    samples = random_samples(random, of, 15)
    A, b = system(of, samples)
    A, b = A / np.linalg.norm(A), b / np.linalg.norm(A)
    for right, shares in zip(b, solve(of, samples).shares, strict=True):

        def misfit(x: NDArray[np.float64], right: NDArray[np.float64] = right) -> float:
            return float(np.sum((A @ x - right) ** 2))

        found = minimize(
            misfit,
            np.full(4, 0.25),
            bounds=[(0.0, 1.0)] * 4,
            constraints=[LinearConstraint(np.ones((1, 4)), 1.0, 1.0)],
            method="SLSQP",
            options={"ftol": 1e-15, "maxiter": 500},
        )
        np.testing.assert_allclose(shares, found.x, rtol=0, atol=1e-6)


def test_many_sources_with_respiration() -> None:
    random = np.random.default_rng(12)
    of = random_problem(random, n_source=12, n_property=14, signs=("non_negative",))
    samples = random_samples(random, of, 3_000)
    solution = solve(of, samples)
    assert (solution.status == MixingStatus.SOLVED).all()
    assert kkt_violation(of, samples, _unknowns(solution)) < 1e-9


def test_nearly_collinear_sources_are_solved_exactly() -> None:
    random = np.random.default_rng(13)
    sources = random.normal(size=(6, 1)) @ random.normal(size=(1, 7)) + 0.02 * random.normal(size=(6, 7))
    of = problem(sources, 0.05, mass_weight=20.0)
    samples = random_samples(random, of, 1_000)
    solution = solve(of, samples)
    assert solution.condition_number[0] > 100
    A, b = system(of, samples)
    reference = np.array([nnls(A, right)[0] for right in b])
    np.testing.assert_allclose(solution.shares, reference, rtol=0, atol=1e-10)


def test_uncertainty_is_the_scatter_of_repeated_samples_inside() -> None:
    random = np.random.default_rng(14)
    of = random_problem(random, n_source=3, n_property=6, signs=("free",))
    truth = np.array([0.4, 0.35, 0.25]) @ of.sources + 0.5 * of.processes[0]
    part = 0.2  # small enough that no bound is active, where the propagation is exact
    samples = truth + random.normal(size=(20_000, 6)) * of.uncertainty * part
    solution = solve(of, samples)
    assert (solution.shares > 0).all()
    for found, said in (
        (solution.shares, solution.share_uncertainty),
        (solution.processes, solution.process_uncertainty),
    ):
        np.testing.assert_allclose(found.std(axis=0), said[0] * part, rtol=0.03)
        assert (said == said[0]).all()


def test_uncertainty_counts_standard_uncertainties_whatever_the_weights() -> None:
    random = np.random.default_rng(15)
    weights = random.uniform(0.1, 10, 6)
    of = problem(random.normal(size=(3, 6)), 0.02, weight=weights)
    samples = np.full(3, 1 / 3) @ of.sources + random.normal(size=(20_000, 6)) * of.uncertainty
    solution = solve(of, samples)
    assert (solution.shares > 0).all()
    np.testing.assert_allclose(solution.shares.std(axis=0), solution.share_uncertainty[0], rtol=0.03)


@pytest.mark.parametrize("kept", [[0, 1, 2], [0, 1], [0]])
def test_reduced_chi_square_is_one_on_average(kept: list[int]) -> None:
    """Also on the boundary, where sources that take no part give their degrees of freedom back."""
    random = np.random.default_rng(16)
    of = random_problem(random, n_source=3, n_property=7)
    shares = np.zeros(3)
    shares[kept] = 1 / len(kept)
    samples = shares @ of.sources + random.normal(size=(20_000, 7)) * of.uncertainty
    solution = solve(of, samples)
    freedom = 7 - np.count_nonzero(solution.shares, axis=1) + 1
    assert (solution.reduced_chi_square * freedom).mean() == pytest.approx(freedom.mean(), rel=0.03)


def test_no_degrees_of_freedom_means_no_chi_square() -> None:
    of = random_problem(np.random.default_rng(17), n_source=3, n_property=2)
    solution = solve(of, np.array([0.5, 0.3, 0.2]) @ of.sources[None])
    assert solution.status[0] == MixingStatus.SOLVED
    assert solution.degrees_of_freedom[0] == 0
    assert np.isnan(solution.reduced_chi_square[0])


def test_degrees_of_freedom_are_equations_less_unknowns_that_take_part() -> None:
    random = np.random.default_rng(19)
    of = random_problem(random, n_source=4, n_property=7, signs=("non_negative", "free"))
    samples = random_samples(random, of, 300)
    samples[::3, 2] = np.nan
    samples[1::3, :5] = np.nan
    solution = solve(of, samples)
    solved = solution.status == MixingStatus.SOLVED
    assert 0 < solved.sum() < 300
    part = np.count_nonzero(_unknowns(solution), axis=1)
    expected = (~np.isnan(samples)).sum(axis=1) + 1 - part
    np.testing.assert_array_equal(solution.degrees_of_freedom[solved], expected[solved])
    assert np.isnan(solution.degrees_of_freedom[~solved]).all()
    misfit = ((solution.residuals / of.uncertainty) ** 2)[solved]
    np.testing.assert_allclose(
        np.nansum(misfit, axis=1),
        (solution.reduced_chi_square * solution.degrees_of_freedom)[solved],
        rtol=1e-9,
    )


@pytest.mark.parametrize("mass_weight", [None, 20.0])
def test_a_share_is_zero_just_where_its_bound_holds_it_and_has_no_first_order_uncertainty(
    mass_weight: float | None,
) -> None:
    random = np.random.default_rng(20)
    of = random_problem(random, n_source=4, n_property=7, signs=("non_negative",), mass_weight=mass_weight)
    solution = solve(of, random_samples(random, of, 2_000))
    inside = (solution.support[:, None] >> np.arange(5)) & 1 == 1
    unknowns = _unknowns(solution)
    np.testing.assert_array_equal(unknowns > 0, inside)
    known = ~np.isnan(np.hstack([solution.share_uncertainty, solution.process_uncertainty]))
    held = ~inside
    if mass_weight is None:
        alone = inside[:, :4] & (inside[:, :4].sum(axis=1) == 1)[:, None]
        assert (solution.shares[alone] == 1.0).all()
        held[:, :4] |= alone
    assert 0 < held.sum() < held.size
    np.testing.assert_array_equal(known, ~held)
    assert (np.hstack([solution.share_uncertainty, solution.process_uncertainty])[known] > 0).all()


def test_residuals_are_fitted_less_observed() -> None:
    random = np.random.default_rng(18)
    of = random_problem(random, n_source=3, n_property=6, signs=("non_negative",))
    samples = random_samples(random, of, 50)
    solution = solve(of, samples)
    fitted = solution.shares @ of.sources + solution.processes @ of.processes
    np.testing.assert_allclose(solution.residuals, fitted - samples, rtol=0, atol=1e-9)
