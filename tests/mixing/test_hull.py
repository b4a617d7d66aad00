"""Samples outside what their sources can mix to: how far, on which side, and how often noise alone does it."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import chi2

from pipeline.mixing.solver import solve
from pipeline.mixing.status import MixingStatus

from .invented import problem, random_problem, random_samples, system

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.problem import MixingProblem, Sign

    FloatArray = NDArray[np.float64]

RANDOM = np.random.default_rng(77)
SIGNS = st.sampled_from([(), ("non_negative",), ("free",), ("non_negative", "free")])


def _planted(of: MixingProblem, k: int, distance: float, random: np.random.Generator) -> FloatArray:
    """Return a sample beyond the middle of the face without unknown ``k``, a known distance from it.

    The way out is at right angles to the face, in standard uncertainties, and something that no source or
    process explains is added at right angles to all of them.
    """
    rows = of.design / of.uncertainty  # (n_unknown, n_property)
    n_source = len(of.sources)
    others = [i for i in range(of.n_unknown) if i != k]
    shares = [i for i in others if i < n_source]
    face = np.array(
        [rows[i] - rows[shares[0]] for i in shares[1:]] + [rows[i] for i in others if i >= n_source]
    )
    away = -(rows[k] - (rows[shares[0]] if k < n_source else 0.0))
    if len(face):
        away = away - face.T @ np.linalg.lstsq(face.T, away, rcond=None)[0]
    unexplained = random.normal(size=rows.shape[1])
    every = np.vstack([face.reshape(-1, rows.shape[1]), away])
    unexplained -= every.T @ np.linalg.lstsq(every.T, unexplained, rcond=None)[0]
    amounts = np.array(
        [0.0 if i == k else 1 / len(shares) if i < n_source else 0.4 for i in range(of.n_unknown)]
    )
    weighted = amounts @ rows + distance * away / np.linalg.norm(away) + unexplained
    return np.asarray(of.reference + weighted * of.uncertainty)


@pytest.mark.parametrize("distance", [0.01, 1.0, 7.5])
@pytest.mark.parametrize("k", range(5))
def test_a_sample_planted_outside_a_face_is_as_far_as_it_was_put(k: int, distance: float) -> None:
    of = random_problem(RANDOM, n_source=4, n_property=8, signs=("non_negative",))
    solution = solve(of, _planted(of, k, distance, RANDOM)[None])
    assert solution.hull.distance[0] == pytest.approx(distance, rel=1e-8)
    assert solution.hull.active[0] == 1
    assert solution.hull.side[0] == k


def test_a_sample_inside_has_no_distance_whatever_its_misfit() -> None:
    of = random_problem(RANDOM, n_source=4, n_property=8, signs=("non_negative",))
    samples = np.array([_planted(of, k, -0.01, RANDOM) for k in range(5)])
    solution = solve(of, samples)
    assert (solution.reduced_chi_square > 0.1).any()
    assert (solution.hull.distance == 0).all()
    assert (solution.hull.side == -1).all()
    assert not solution.hull.outside(0.5).any()


@given(st.integers(0, 2**32 - 1), SIGNS)
def test_the_bounds_add_its_square_to_the_chi_square(seed: int, signs: tuple[Sign, ...]) -> None:
    random = np.random.default_rng(seed)
    of = random_problem(random, n_source=4, n_property=9, signs=signs)
    samples = random_samples(random, of, 20)
    samples[random.random(samples.shape) < 0.05] = np.nan
    solution = solve(of, samples)
    for row in np.flatnonzero(solution.status == MixingStatus.SOLVED):
        there = ~np.isnan(samples[row])
        A, b = system(of, samples[row][None])
        A, b = A[there], b[0, there]
        anchored = np.column_stack([A[:, 1:4] - A[:, :1], A[:, 4:]])
        rest = b - A[:, 0]
        free = np.linalg.lstsq(anchored, rest, rcond=None)[0]
        without = np.sum((anchored @ free - rest) ** 2)
        with_bounds = np.sum((solution.residuals[row, there] / of.uncertainty[there]) ** 2)
        distance = solution.hull.distance[row]
        assert distance**2 == pytest.approx(with_bounds - without, rel=1e-6, abs=1e-6)


@given(st.integers(0, 2**32 - 1), st.booleans())
def test_permuting_and_scaling_changes_no_distance(seed: int, weighted: bool) -> None:
    random = np.random.default_rng(seed)
    of = random_problem(
        random, n_source=4, n_property=7, signs=("non_negative",), mass_weight=9.0 if weighted else None
    )
    samples = random_samples(random, of, 30)
    hull = solve(of, samples).hull
    sources, properties = random.permutation(4), random.permutation(7)
    unit = 10.0 ** random.uniform(-3, 3, 7)
    other = replace(
        of,
        sources=(of.sources * unit)[sources][:, properties],
        uncertainty=(of.uncertainty * unit)[properties],
        weight=(of.weight / unit)[properties],
        processes=(of.processes * unit)[:, properties],
    )
    changed = solve(other, (samples * unit)[:, properties]).hull
    np.testing.assert_allclose(changed.distance, hull.distance, rtol=1e-6, atol=1e-7)
    clear = hull.distance > 1e-6
    back = np.append(sources, 4)
    np.testing.assert_array_equal(back[changed.side[clear]], hull.side[clear])


def test_a_heavy_weighted_sum_is_as_an_exact_one_and_a_light_one_takes_up_a_part() -> None:
    of = random_problem(RANDOM, n_source=4, n_property=8)
    samples = random_samples(RANDOM, of, 200)
    exact = solve(of, samples).hull.distance
    heavy = solve(replace(of, mass_weight=1e5), samples, condition_limit=np.inf).hull.distance
    light = solve(replace(of, mass_weight=1.0), samples).hull.distance
    np.testing.assert_allclose(heavy, exact, rtol=1e-4, atol=1e-4)
    assert (light <= exact * (1 + 1e-9)).all()
    assert light.sum() < 0.9 * exact.sum()


def test_what_is_not_solved_has_no_distance() -> None:
    of = random_problem(RANDOM, n_source=4, n_property=6)
    samples = random_samples(RANDOM, of, 6)
    samples[0, :4] = np.nan
    samples[1, 2] = np.inf
    hull = solve(of, samples).hull
    np.testing.assert_array_equal(np.isnan(hull.distance), [True, True, False, False, False, False])
    assert not hull.outside(0.5)[:2].any()
    sources = np.vstack([of.sources, of.sources[:1]])
    doubled = problem(sources, of.uncertainty)
    without_limit = solve(doubled, samples[2:], condition_limit=np.inf)
    assert (without_limit.status == MixingStatus.SOLVED).all()
    assert np.isnan(without_limit.hull.distance).all(), "dependent sources have no fit without bounds"
    assert not without_limit.hull.outside(0.5).any()
    assert solve(of, samples[:0]).hull.distance.shape == (0,)


def test_a_sample_is_outside_beyond_the_quantile_of_its_active_bounds() -> None:
    of = random_problem(RANDOM, n_source=3, n_property=6)
    limit = 2.5758293  # two-sided 99 % of a normal distribution: one bound, one degree of freedom
    near, beyond = (solve(of, _planted(of, 1, limit + by, RANDOM)[None]).hull for by in (-1e-4, 1e-4))
    assert not near.outside(0.99)[0]
    assert beyond.outside(0.99)[0]
    assert not beyond.outside(0.999)[0]


@pytest.mark.parametrize(
    "truth", [[0.4, 0.3, 0.3, 0.0], [0.5, 0.5, 0, 0], [1, 0, 0, 0], [0.97, 0.01, 0.01, 0.01]]
)
@pytest.mark.parametrize("respired", [0.0, 0.05])
def test_noise_alone_puts_no_more_samples_outside_than_was_said(truth: list[float], respired: float) -> None:
    """With every count of active bounds by itself, and at a corner about as many as was said."""
    random = np.random.default_rng(8)
    of = random_problem(random, n_source=4, n_property=7, signs=("non_negative",))
    n_sample, probability = 40_000, 0.95
    noise = random.normal(size=(n_sample, 7)) * of.uncertainty
    hull = solve(of, np.array(truth) @ of.sources + respired * of.processes[0] + noise).hull
    outside = hull.outside(probability)
    for active in range(1, 5):
        of_these = hull.active == active
        n = int(of_these.sum())
        spread = np.sqrt(max(n, 1) * probability * (1 - probability))
        assert outside[of_these].sum() <= n * (1 - probability) + 3.5 * spread
    if truth == [1, 0, 0, 0] and not respired:
        at_corner = hull.active == 4
        assert outside[at_corner].mean() == pytest.approx(1 - probability, abs=0.02)
        squared = hull.distance[at_corner] ** 2
        assert np.mean(squared < chi2.median(4)) == pytest.approx(0.5, abs=0.03)


def test_one_batch_equals_many_singles_to_the_last_bit() -> None:
    of = random_problem(RANDOM, n_source=5, n_property=9, signs=("non_negative",))
    samples = random_samples(RANDOM, of, 60)
    samples[RANDOM.random(samples.shape) < 0.1] = np.nan
    hull = solve(of, samples).hull
    singles = [solve(of, one[None]).hull for one in samples]
    for name in ("distance", "active", "side"):
        np.testing.assert_array_equal(
            np.concatenate([getattr(s, name) for s in singles]), getattr(hull, name)
        )
