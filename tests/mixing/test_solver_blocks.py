"""The walk takes samples in blocks and lets some wait for others; none of that may show in an answer."""

from __future__ import annotations

from operator import attrgetter

import numpy as np
import pytest

from pipeline.mixing import kernel
from pipeline.mixing.solver import groups, solve
from pipeline.mixing.status import MixingStatus

from .invented import kkt_violation, problem, random_problem, random_samples

ARRAYS = (
    "shares", "processes", "residuals", "reduced_chi_square", "optimality", "support", "status",
    "share_uncertainty", "process_uncertainty", "condition_number", "hull.distance", "hull.side", "hull.active",
)  # fmt: skip


@pytest.mark.parametrize(
    ("n_source", "n_property", "mass"), [(3, 6, None), (5, 7, 20.0), (11, 13, None), (12, 14, 5.0)]
)
def test_however_a_long_batch_is_cut_and_ordered_the_bits_are_the_same(
    n_source: int, n_property: int, mass: float | None
) -> None:
    random = np.random.default_rng(n_source)
    of = random_problem(
        random, n_source=n_source, n_property=n_property, signs=("non_negative",), mass_weight=mass
    )
    samples = random_samples(random, of, 4_000)
    samples[random.random(samples.shape) < 0.02] = np.nan
    samples[random.integers(4_000, size=5), 0] = np.inf
    together = solve(of, samples)
    assert {MixingStatus.SOLVED, MixingStatus.ABSURD} <= set(together.status)
    order = random.permutation(4_000)
    cuts = np.sort(random.integers(4_000, size=20))
    parts = [solve(of, part) for part in np.split(samples[order], cuts)]
    for name in ARRAYS:
        values = attrgetter(name)
        joined = np.concatenate([values(part) for part in parts])
        np.testing.assert_array_equal(joined, values(together)[order], err_msg=name)


def test_more_samples_than_there_is_room_to_wait_for_one_support() -> None:
    """All of them lie beyond the same two sources, so all wait for the same support."""
    random = np.random.default_rng(4)
    of = problem(random.normal(size=(12, 14)), 0.1)
    n_sample = 4 * kernel._BLOCK
    samples = 0.5 * (of.sources[2] + of.sources[7]) + random.normal(size=(n_sample, 14)) * 0.003
    solution = solve(of, samples)
    assert (solution.status == MixingStatus.SOLVED).all()
    assert kkt_violation(of, samples, solution.shares) < 1e-10
    alone = solve(of, samples[-1:])
    np.testing.assert_array_equal(solution.shares[-1:], alone.shares)


def test_samples_on_a_face_are_answered_like_those_beside_it() -> None:
    """Without a clear margin every sample is answered alone, among neighbours that are not."""
    random = np.random.default_rng(5)
    of = problem(random.normal(size=(5, 8)), 0.1)
    samples = random_samples(random, of, 2_000)
    samples[::3] = 0.25 * of.sources[0] + 0.75 * of.sources[3]
    solution = solve(of, samples)
    assert (solution.support[::3] == 0b01001).all()
    assert (solution.shares[::3] == solution.shares[0]).all()
    np.testing.assert_allclose(solution.shares[0], [0.25, 0, 0, 0.75, 0], atol=1e-13)


@pytest.mark.parametrize("n_property", [3, 8, 9, 20, 40])
def test_groups_are_all_samples_each_once_with_what_they_have(n_property: int) -> None:
    random = np.random.default_rng(n_property)
    values = np.where(random.random((300, n_property)) < 0.1, np.nan, 1.0)
    found = list(groups(values))
    np.testing.assert_array_equal(np.sort(np.concatenate([rows for _, rows in found])), np.arange(300))
    for columns, rows in found:
        assert (np.diff(rows) > 0).all()
        there = np.isin(np.arange(n_property), columns)
        assert (~np.isnan(values[rows]) == there).all()
    assert len(found) == len(np.unique(np.isnan(values), axis=0))


def test_residuals_keep_what_was_observed() -> None:
    random = np.random.default_rng(6)
    of = random_problem(random, n_source=3, n_property=5)
    samples = random_samples(random, of, 10)
    solution = solve(of, np.asfortranarray(samples))
    np.testing.assert_array_equal(solution.observed, samples)
    assert solution.residuals is solution.residuals, "made twice"
