from __future__ import annotations

import os
import subprocess
import sys

import numpy as np
import pytest

from pipeline.mixing.operators import singular_values, support_operators

RANDOM = np.random.default_rng(31)
A = RANDOM.normal(size=(6, 4))
B = RANDOM.normal(size=6)
SHARES = np.array([True, True, True, False])
ALL = np.ones(4, dtype=bool)
NONE = np.zeros(4, dtype=bool)


def test_an_operator_without_a_sum_is_least_squares_on_its_columns() -> None:
    operators = support_operators(A, ALL, NONE)
    values = B @ operators.matrix[0b1011] + operators.constant[0b1011]
    part = [0, 1, 3]
    expected, *_ = np.linalg.lstsq(A[:, part], B, rcond=None)
    np.testing.assert_allclose(values[part], expected, rtol=1e-12)
    residual = A[:, part] @ expected - B
    assert values[2] == pytest.approx(A[:, 2] @ residual / (A[:, 2] @ A[:, 2]), rel=1e-12)


def test_an_operator_with_a_sum_holds_it_and_levels_the_gradients() -> None:
    operators = support_operators(A, ALL, SHARES)
    values = B @ operators.matrix[0b1101] + operators.constant[0b1101]
    part = [0, 2, 3]
    x = values[part]
    assert x[0] + x[1] == pytest.approx(1, abs=1e-14)
    gradient = A.T @ (A[:, part] @ x - B)
    assert gradient[0] == pytest.approx(gradient[2], abs=1e-12)
    assert gradient[3] == pytest.approx(0, abs=1e-12)
    assert values[1] == pytest.approx((gradient[1] - gradient[0]) / (A[:, 1] @ A[:, 1]), abs=1e-12)


def test_the_empty_choice() -> None:
    free = support_operators(A, ALL, NONE)
    np.testing.assert_allclose(B @ free.matrix[0], -(A.T @ B) / (A**2).sum(axis=0), rtol=1e-12)
    assert free.usable[0]
    held = support_operators(A, ALL, SHARES)
    assert not held.usable[0], "nothing adds up to one"
    assert not held.usable[0b1000], "a process is no share"
    assert held.usable.sum() == 14


def test_a_free_unknown_always_takes_part() -> None:
    operators = support_operators(A, SHARES, NONE)
    assert operators.inside.shape == (8, 4)
    assert operators.inside[:, 3].all()


def test_dependent_columns_make_a_choice_unusable() -> None:
    doubled = np.column_stack([A[:, :3], A[:, 0]])
    operators = support_operators(doubled, ALL, NONE)
    together = (np.arange(16) & 0b1001) == 0b1001
    np.testing.assert_array_equal(operators.usable, ~together)
    assert np.isfinite(operators.matrix).all()


def test_more_unknowns_than_equations_are_unusable() -> None:
    operators = support_operators(A[:2], ALL, NONE)
    np.testing.assert_array_equal(operators.usable, operators.inside.sum(axis=1) <= 2)


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
        support_operators(np.eye(15), many, ~many)


def _python(code: str, **environment: str) -> str:
    finished = subprocess.run(
        [sys.executable, "-c", code],
        capture_output=True,
        text=True,
        check=True,
        env={**os.environ, **environment},
    )
    return finished.stdout.strip()


def test_importing_the_room_neither_loads_numba_nor_compiles() -> None:
    code = (
        "import sys, pipeline.mixing; print('numba' in sys.modules, 'pipeline.mixing.kernel' in sys.modules)"
    )
    assert _python(code) == "False False"


def test_where_machine_code_cannot_be_kept_it_is_compiled_each_time() -> None:
    code = (
        "from pipeline.mixing import kernel; import numpy as np; v = np.zeros(2); "
        "print(kernel._judge(np.array([1, 2]), 0.0, np.array([-1.0, 3.0])))"
    )
    assert _python(code, NUMBA_CACHE_LOCATOR_CLASSES="IPythonCacheLocator") == "(1, -1.0)"
