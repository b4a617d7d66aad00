"""What holds for every problem, whatever its numbers."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.mixing.solver import solve
from pipeline.mixing.status import MixingStatus

from .invented import problem, random_problem, random_samples

if TYPE_CHECKING:
    from pipeline.mixing.problem import MixingProblem, Sign
    from pipeline.mixing.solver import MixingSolution

ARRAYS = (
    "shares",
    "processes",
    "share_uncertainty",
    "process_uncertainty",
    "residuals",
    "reduced_chi_square",
    "condition_number",
    "optimality",
    "support",
    "status",
)
SIGNS: tuple[tuple[Sign, ...], ...] = ((), ("non_negative",), ("free",), ("non_negative", "free"))
seeds = st.integers(0, 2**32 - 1)
masses = st.sampled_from([None, 0.5, 20.0])
signs = st.sampled_from(SIGNS)
several = settings(max_examples=25, deadline=None, derandomize=True)


def _same_bits(one: MixingSolution, other: MixingSolution, rows: object = slice(None)) -> None:
    for name in ARRAYS:
        np.testing.assert_array_equal(getattr(one, name)[rows], getattr(other, name), err_msg=name)


def _patchy(random: np.random.Generator, of: MixingProblem, n_sample: int) -> np.ndarray:
    """Return samples of every kind: noisy, exact with zero shares, incomplete, absurd."""
    samples = random_samples(random, of, n_sample)
    shares = random.dirichlet(np.ones(len(of.sources)), n_sample) * (
        random.random((n_sample, len(of.sources))) < 0.5
    )
    shares[:, 0] += 1e-3
    exact = random.random(n_sample) < 0.4
    samples[exact] = ((shares / shares.sum(axis=1, keepdims=True)) @ of.sources)[exact]
    samples[random.random(samples.shape) < 0.02] = np.nan
    samples[random.integers(n_sample, size=3), random.integers(samples.shape[1], size=3)] = [
        np.inf,
        -np.inf,
        1e30,
    ]
    return samples


@several
@given(seeds, masses, signs)
def test_a_mixture_of_the_sources_is_recovered(
    seed: int, mass: float | None, signs: tuple[Sign, ...]
) -> None:
    random = np.random.default_rng(seed)
    of = random_problem(random, n_source=4, n_property=9, signs=signs, mass_weight=mass)
    shares = random.dirichlet(np.ones(4), 20)
    amounts = random.uniform(0, 1, (20, len(signs)))
    solution = solve(of, shares @ of.sources + amounts @ of.processes)
    np.testing.assert_allclose(solution.shares, shares, rtol=0, atol=1e-9)
    np.testing.assert_allclose(solution.processes, amounts, rtol=0, atol=1e-9)
    assert np.nanmax(np.abs(solution.residuals) / of.uncertainty) < 1e-8


@several
@given(seeds, signs, st.floats(0.1, 1000))
def test_a_weighted_sum_misses_one_only_where_a_bound_is_active(
    seed: int, signs: tuple[Sign, ...], mass: float
) -> None:
    random = np.random.default_rng(seed)
    of = random_problem(random, n_source=4, n_property=8, signs=signs, mass_weight=mass)
    solution = solve(of, random_samples(random, of, 200))
    inside = (solution.shares > 0).all(axis=1)
    assert np.abs(solution.shares[inside].sum(axis=1) - 1).max(initial=0) < 1e-9
    exact = solve(replace(of, mass_weight=None), random_samples(np.random.default_rng(seed), of, 1))
    assert abs(exact.shares.sum() - 1) < 1e-15


@several
@given(seeds)
def test_ddof_of_the_spread_cannot_move_shares_inside(seed: int) -> None:
    """A common factor of all rows but the sum's changes nothing where no bound is active."""
    random = np.random.default_rng(seed)
    of = random_problem(random, n_source=3, n_property=6, mass_weight=50.0)
    samples = random_samples(random, of, 100)
    one, other = (solve(replace(of, weight=of.weight * factor), samples) for factor in (1.0, np.sqrt(2 / 3)))
    inside = (one.shares > 0).all(axis=1)
    np.testing.assert_allclose(one.shares[inside], other.shares[inside], rtol=0, atol=1e-9)


@several
@given(seeds, masses)
def test_respiration_biases_shares_unless_it_is_an_unknown(seed: int, mass: float | None) -> None:
    random = np.random.default_rng(seed)
    extended = random_problem(random, n_source=3, n_property=6, signs=("non_negative",), mass_weight=mass)
    classical = replace(extended, processes=np.zeros((0, 6)), signs=())
    shares = np.array([[0.5, 0.3, 0.2]])
    sample = shares @ extended.sources + 0.2 * extended.processes
    solution = solve(extended, sample)
    np.testing.assert_allclose(solution.shares, shares, rtol=0, atol=1e-9)
    assert solution.processes[0, 0] == pytest.approx(0.2, abs=1e-9)
    assert np.abs(solve(classical, sample).shares - shares).max() > 1e-4


@several
@given(seeds, masses, signs)
def test_a_missing_property_is_a_removed_row(seed: int, mass: float | None, signs: tuple[Sign, ...]) -> None:
    random = np.random.default_rng(seed)
    of = random_problem(random, n_source=3, n_property=7, signs=signs, mass_weight=mass)
    samples = random_samples(random, of, 30)
    gone = int(random.integers(7))
    kept = [j for j in range(7) if j != gone]
    samples[:, gone] = np.nan
    smaller = replace(
        of,
        sources=of.sources[:, kept],
        uncertainty=of.uncertainty[kept],
        weight=of.weight[kept],
        processes=of.processes[:, kept],
    )
    patchy, reduced = solve(of, samples), solve(smaller, samples[:, kept])
    for name in ("shares", "processes", "share_uncertainty", "reduced_chi_square", "status"):
        np.testing.assert_array_equal(getattr(patchy, name), getattr(reduced, name), err_msg=name)
    np.testing.assert_array_equal(patchy.residuals[:, kept], reduced.residuals)
    assert np.isnan(patchy.residuals[:, gone]).all()


@several
@given(seeds, masses, signs)
def test_scaling_a_property_with_its_uncertainty_changes_nothing(
    seed: int, mass: float | None, signs: tuple[Sign, ...]
) -> None:
    random = np.random.default_rng(seed)
    of = random_problem(random, n_source=4, n_property=8, signs=signs, mass_weight=mass)
    samples = random_samples(random, of, 50)
    unit = 10 ** random.uniform(-3, 3, 8)
    scaled = replace(
        of,
        sources=of.sources * unit,
        uncertainty=of.uncertainty * unit,
        weight=of.weight / unit,
        processes=of.processes * unit,
    )
    one, other = solve(of, samples), solve(scaled, samples * unit)
    np.testing.assert_allclose(other.shares, one.shares, rtol=0, atol=1e-8)
    np.testing.assert_allclose(other.processes, one.processes, rtol=0, atol=1e-8)
    np.testing.assert_allclose(other.share_uncertainty, one.share_uncertainty, rtol=1e-8)
    np.testing.assert_allclose(other.reduced_chi_square, one.reduced_chi_square, rtol=1e-8)


@several
@given(seeds, masses, signs)
def test_permuting_sources_and_properties_permutes_the_answer(
    seed: int, mass: float | None, signs: tuple[Sign, ...]
) -> None:
    random = np.random.default_rng(seed)
    of = random_problem(random, n_source=5, n_property=8, signs=signs, mass_weight=mass)
    samples = random_samples(random, of, 50)
    order, rows = random.permutation(5), random.permutation(8)
    other = replace(
        of,
        sources=of.sources[order][:, rows],
        uncertainty=of.uncertainty[rows],
        weight=of.weight[rows],
        processes=of.processes[:, rows],
    )
    one, two = solve(of, samples), solve(other, samples[:, rows])
    np.testing.assert_allclose(two.shares, one.shares[:, order], rtol=0, atol=1e-9)
    np.testing.assert_allclose(two.share_uncertainty, one.share_uncertainty[:, order], rtol=1e-8, atol=1e-12)
    np.testing.assert_allclose(two.residuals, one.residuals[:, rows], rtol=1e-6, atol=1e-8)


@several
@given(seeds, masses, signs)
def test_permuting_samples_permutes_the_answer_to_the_last_bit(
    seed: int, mass: float | None, signs: tuple[Sign, ...]
) -> None:
    random = np.random.default_rng(seed)
    of = random_problem(random, n_source=5, n_property=9, signs=signs, mass_weight=mass)
    samples = _patchy(random, of, 400)
    order = random.permutation(400)
    _same_bits(solve(of, samples), solve(of, samples[order]), order)


@settings(max_examples=10, deadline=None, derandomize=True)
@given(seeds, masses, signs)
def test_one_batch_equals_many_singles_to_the_last_bit(
    seed: int, mass: float | None, signs: tuple[Sign, ...]
) -> None:
    random = np.random.default_rng(seed)
    of = random_problem(random, n_source=4, n_property=8, signs=signs, mass_weight=mass)
    samples = _patchy(random, of, 40)
    together = solve(of, samples)
    assert set(together.status) >= {MixingStatus.SOLVED, MixingStatus.ABSURD}
    for row in range(len(samples)):
        _same_bits(together, solve(of, samples[row : row + 1]), slice(row, row + 1))


def test_ties_go_to_the_smallest_choice_of_sources() -> None:
    """An exact mixture of two of five sources has shares of exactly zero of the others."""
    random = np.random.default_rng(3)
    of = problem(random.normal(size=(5, 8)), 0.1)
    shares = np.zeros((500, 5))
    shares[:, 1] = random.uniform(0.05, 0.95, 500)
    shares[:, 3] = 1 - shares[:, 1]
    solution = solve(of, shares @ of.sources)
    np.testing.assert_allclose(solution.shares, shares, rtol=0, atol=1e-13)
    assert (solution.shares[:, [0, 2, 4]] == 0).all()
    assert (solution.support == 0b01010).all()
