from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest

from pipeline.mixing.making import UNUSABLE, slot_of
from pipeline.mixing.operators import (
    equations_of,
    everything,
    inside,
    no_operators,
    operator_of,
    singular_values,
)

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.blocks import Equations

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]

RANDOM = np.random.default_rng(31)
A = RANDOM.normal(size=(6, 4))
B = RANDOM.normal(size=6)
SHARES = np.array([True, True, True, False])
ALL = np.ones(4, dtype=bool)
NONE = np.zeros(4, dtype=bool)


def _equations(columns: FloatArray, constrained: BoolArray, summed: BoolArray) -> Equations:
    return equations_of(columns, constrained, summed, np.ones(len(columns)))


def _values(equations: Equations, support: int) -> FloatArray:
    operator = operator_of(equations, support)
    assert operator is not None
    return np.asarray(operator.matrix @ B[: equations.weight.size] + operator.constant)


def _usable(equations: Equations) -> list[bool]:
    return [operator_of(equations, support) is not None for support in range(everything(equations) + 1)]


def test_an_operator_without_a_sum_is_least_squares_on_its_columns() -> None:
    values = _values(_equations(A, ALL, NONE), 0b1011)
    part = [0, 1, 3]
    expected, *_ = np.linalg.lstsq(A[:, part], B, rcond=None)
    np.testing.assert_allclose(values[part], expected, rtol=1e-12)
    residual = A[:, part] @ expected - B
    assert values[2] == pytest.approx(A[:, 2] @ residual / (A[:, 2] @ A[:, 2]), rel=1e-12)


def test_an_operator_with_a_sum_holds_it_and_levels_the_gradients() -> None:
    values = _values(_equations(A, ALL, SHARES), 0b1101)
    part = [0, 2, 3]
    x = values[part]
    assert x[0] + x[1] == pytest.approx(1, abs=1e-14)
    gradient = A.T @ (A[:, part] @ x - B)
    assert gradient[0] == pytest.approx(gradient[2], abs=1e-12)
    assert gradient[3] == pytest.approx(0, abs=1e-12)
    assert values[1] == pytest.approx((gradient[1] - gradient[0]) / (A[:, 1] @ A[:, 1]), abs=1e-12)


def test_weights_and_the_row_of_a_weighted_sum_are_taken_in() -> None:
    weight, mass = np.array([2.0, 1.0, 0.5, 3.0, 1.0]), 7.0
    weighted = np.vstack([A[:5] * weight[:, None], mass * SHARES])
    values = _values(equations_of(weighted, ALL, NONE, weight, mass), 0b1111)
    expected, *_ = np.linalg.lstsq(weighted, np.r_[weight * B[:5], mass], rcond=None)
    np.testing.assert_allclose(values, expected, rtol=1e-11)


def test_the_empty_choice() -> None:
    free = _equations(A, ALL, NONE)
    np.testing.assert_allclose(_values(free, 0), -(A.T @ B) / (A**2).sum(axis=0), rtol=1e-12)
    held = _usable(_equations(A, ALL, SHARES))
    assert not held[0], "nothing adds up to one"
    assert not held[0b1000], "a process is no share"
    assert sum(held) == 14


def test_a_free_unknown_always_takes_part() -> None:
    equations = _equations(A, SHARES, NONE)
    assert everything(equations) == 0b111
    for support in range(8):
        operator = operator_of(equations, support)
        assert operator is not None
        assert operator.inside[3]


def test_dependent_columns_make_a_choice_unusable() -> None:
    doubled = np.column_stack([A[:, :3], A[:, 0]])
    together = (np.arange(16) & 0b1001) == 0b1001
    np.testing.assert_array_equal(_usable(_equations(doubled, ALL, NONE)), ~together)


def test_more_unknowns_than_equations_are_unusable() -> None:
    equations = _equations(A[:2], ALL, NONE)
    counts = inside(equations.bit, np.arange(16)).sum(axis=1)
    np.testing.assert_array_equal(_usable(equations), counts <= 2)


def test_an_operator_is_the_same_whatever_was_made_before_it() -> None:
    equations = _equations(A, ALL, SHARES)
    for order in (range(16), reversed(range(16)), RANDOM.permutation(16)):
        operators = no_operators(equations, 0)
        for support in order:
            slot = slot_of(operators, int(support))
            alone = operator_of(equations, int(support))
            assert slot_of(operators, int(support)) == slot
            if alone is None:
                assert slot == UNUSABLE
                continue
            np.testing.assert_array_equal(operators.matrix[4 * slot : 4 * slot + 4], alone.matrix)
            np.testing.assert_array_equal(operators.constant[4 * slot : 4 * slot + 4], alone.constant)
            assert operators.support[slot] == support
        assert operators.n_made[0] == 14


def test_singular_values_on_the_plane_of_the_sum() -> None:
    """Adding a constant to all shares leaves the plane, so it cannot change them."""
    shifted = A + np.where(SHARES, 7.0, 0.0) * RANDOM.normal(size=(6, 1))
    np.testing.assert_allclose(singular_values(shifted, SHARES), singular_values(A, SHARES), rtol=1e-12)
    assert singular_values(A, SHARES).size == 3
    assert singular_values(A, NONE).size == 4
    np.testing.assert_array_equal(singular_values(A[:2], NONE)[2:], [0, 0])


def test_too_many_unknowns_are_refused() -> None:
    many = np.ones(15, dtype=bool)
    with pytest.raises(ValueError, match="15 constrained unknowns; at most 14 can be solved"):
        _equations(np.eye(15), many, ~many)
