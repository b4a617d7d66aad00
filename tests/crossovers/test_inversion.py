from __future__ import annotations

import numpy as np
import pytest

from pipeline.crossovers.inversion import Inversion, invert

NOTHING = np.zeros(0)


def solve(
    n_cruise: int, crossovers: dict[tuple[int, int], float], s: float = 0.1, fixed: tuple[int, ...] = ()
) -> Inversion:
    held = np.zeros(n_cruise, dtype=bool)
    held[list(fixed)] = True
    pairs = np.array(list(crossovers), dtype=np.int64).reshape(len(crossovers), 2)
    offset = np.array(list(crossovers.values()))
    return invert(pairs, offset, np.full(len(offset), s), 1.0, held)


def test_adding_the_correction_makes_the_cruises_agree() -> None:
    found = solve(2, {(0, 1): 3.0}, fixed=(1,), s=0.001)
    assert found.correction == pytest.approx([-3.0, 0.0], rel=1e-5)
    assert found.uncertainty == pytest.approx([0.001, 0.0], rel=1e-3)


def test_damped_least_squares_by_the_formula() -> None:
    # Corrections small enough that nothing bends: m = -(G' W G + P)^-1 G' W d.
    crossovers = {(0, 1): 0.5, (1, 2): -0.2, (0, 2): 0.1}
    found = solve(3, crossovers)
    G = np.array([[1.0, -1.0, 0.0], [0.0, 1.0, -1.0], [1.0, 0.0, -1.0]])
    normal = G.T @ G / 0.1**2 + np.eye(3)
    np.testing.assert_allclose(
        found.correction, -np.linalg.solve(normal, G.T @ list(crossovers.values()) / 0.1**2)
    )


def test_two_cruises_share_the_offset_and_the_common_part_stays_what_was_presumed() -> None:
    found = solve(2, {(0, 1): 1.0}, s=1e-4)
    assert found.correction == pytest.approx([-0.5, 0.5], rel=1e-6)
    assert found.uncertainty == pytest.approx([np.sqrt(0.5)] * 2, rel=1e-3)


@pytest.mark.parametrize("off", [3.0, 10.0, 100.0])
def test_one_cruise_that_is_far_off_does_not_spread_over_the_others(off: float) -> None:
    crossovers = {(i, j): (off if i == 0 else 0.0) for i in range(5) for j in range(i + 1, 5)}
    found = solve(5, crossovers)
    assert found.correction[0] == pytest.approx(-off, abs=0.6)
    assert np.abs(found.correction[1:]).max() < 0.6  # with squares alone it would be a fifth of what is off


def test_the_same_amount_on_all_cruises_is_not_seen() -> None:
    truth = np.array([0.3, -0.4, 0.8, 0.0])
    crossovers = {(i, j): truth[i] - truth[j] for i in range(4) for j in range(i + 1, 4)}
    found = solve(4, crossovers, s=1e-4)
    np.testing.assert_allclose(found.correction, -(truth - truth.mean()), atol=1e-5)


def test_a_closed_triangle_fits_and_an_open_one_widens_the_uncertainty() -> None:
    closed = solve(3, {(0, 1): 1.0, (1, 2): 1.0, (0, 2): 2.0}, fixed=(2,))
    assert closed.misfit[0] < 0.1
    left = solve(3, {(0, 1): 1.0, (1, 2): 1.0, (0, 2): 0.0}, fixed=(2,))
    assert left.misfit[0] > 10
    assert left.uncertainty[0] > 3 * closed.uncertainty[0]


def test_groups_that_nothing_connects_are_solved_apart() -> None:
    one = solve(2, {(0, 1): 0.7})
    both = solve(5, {(0, 1): 0.7, (2, 3): -2.0})
    np.testing.assert_allclose(both.correction[:2], one.correction)
    np.testing.assert_allclose(both.uncertainty[:2], one.uncertainty)
    assert len(set(both.group.tolist())) == 3
    assert both.group[0] == both.group[1] != both.group[2] == both.group[3]
    assert (both.correction[4], both.uncertainty[4]) == (0.0, 1.0)  # no crossover: what was presumed


def test_the_order_of_cruises_does_not_matter() -> None:
    crossovers = {(0, 1): 4.0, (1, 2): 0.3, (0, 2): 4.1, (2, 3): -0.2}
    order = [2, 0, 3, 1]
    moved = {(order[i], order[j]): d for (i, j), d in crossovers.items()}
    one, other = solve(4, crossovers), solve(4, moved)
    np.testing.assert_allclose(one.correction, other.correction[order], atol=1e-8)
    np.testing.assert_allclose(one.uncertainty, other.uncertainty[order], atol=1e-8)


def test_corrections_cover_the_truth_as_often_as_they_say() -> None:
    random = np.random.default_rng(20_262)
    pairs = np.array([(i, j) for i in range(6) for j in range(i + 1, 6)])
    ratios = []
    for _ in range(200):
        truth = random.standard_normal(6)
        s = random.uniform(0.1, 0.5, len(pairs))
        d = truth[pairs[:, 0]] - truth[pairs[:, 1]] + s * random.standard_normal(len(pairs))
        found = invert(pairs, d, s, 1.0, np.zeros(6, dtype=bool))
        ratios.append(np.abs(found.correction + truth) / found.uncertainty)
    inside = np.mean(np.array(ratios) <= 1)
    assert 0.62 < inside < 0.78


def test_all_fixed_or_no_crossover_at_all() -> None:
    assert solve(2, {(0, 1): 3.0}, fixed=(0, 1)).correction.tolist() == [0.0, 0.0]
    assert solve(2, {}).correction.tolist() == [0.0, 0.0]
    assert (
        len(invert(np.zeros((0, 2), dtype=np.int64), NOTHING, NOTHING, 1.0, NOTHING.astype(bool)).group) == 0
    )
