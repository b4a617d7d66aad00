from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest

from pipeline.checking.covariance import Shape, conditional_residuals, medians, robust_shape

if TYPE_CHECKING:
    from numpy.typing import NDArray

COVARIANCE = np.array([[1.0, 0.8, -0.5], [0.8, 2.0, 0.3], [-0.5, 0.3, 1.5]])


def samples(n: int = 400, seed: int = 1) -> NDArray[np.float64]:
    return np.random.default_rng(seed).multivariate_normal([10.0, 0.0, -5.0], COVARIANCE, n)


def test_a_fifth_of_wild_values_does_not_count() -> None:
    values = samples()
    values[:80, 1] += 50.0
    wild = robust_shape(values)
    assert np.abs(wild.centre - [10.0, 0.0, -5.0]).max() < 0.25
    assert np.abs(wild.covariance - COVARIANCE).max() < 0.25
    assert np.cov(values.T)[1, 1] > 100.0


def test_residuals_are_those_of_a_regression_on_the_other_values() -> None:
    values = samples()
    shape = Shape(values.mean(axis=0), np.cov(values.T))
    residual, normal = conditional_residuals(values, shape)
    for k in range(3):
        others = np.delete(values, k, axis=1)
        design = np.column_stack([np.ones(len(values)), others])
        fitted = design @ np.linalg.lstsq(design, values[:, k], rcond=None)[0]
        np.testing.assert_allclose(residual[:, k], values[:, k] - fitted, atol=1e-9)
        assert normal[:, k].std() == pytest.approx(1.0, rel=0.02)


@pytest.mark.parametrize("k", range(3))
def test_the_wrong_value_is_the_one_furthest_away(k: int) -> None:
    values = samples()
    shape = Shape(values.mean(axis=0), np.cov(values.T))
    values = np.tile(shape.centre, (2, 1))
    values[:, k] += [9.0, -9.0]
    residual, normal = conditional_residuals(values, shape)
    assert np.abs(normal).argmax(axis=1).tolist() == [k, k]
    np.testing.assert_allclose(residual[:, k], [9.0, -9.0])


def test_units_do_not_matter() -> None:
    values = samples()
    scale = np.array([1e-3, 1.0, 1e4])
    _, normal = conditional_residuals(values, robust_shape(values))
    _, scaled = conditional_residuals(values * scale, robust_shape(values * scale))
    np.testing.assert_allclose(normal, scaled, rtol=1e-6, atol=1e-9)


def test_a_missing_value_implies_nothing() -> None:
    values = samples()
    shape = robust_shape(values)
    gap = values[:3].copy()
    gap[0, 2], gap[1, :2] = np.nan, np.nan
    residual, _ = conditional_residuals(gap, shape)
    two, _ = conditional_residuals(values[:1, :2], Shape(shape.centre[:2], shape.covariance[:2, :2]))
    np.testing.assert_allclose(residual[0, :2], two[0])
    assert np.isnan(residual[0, 2])
    assert np.isnan(residual[1]).all()  # one value alone has nothing beside it


def test_values_that_are_all_equal_break_nothing() -> None:
    values = samples()
    values[:, 1] = 4.0
    residual, _ = conditional_residuals(values, robust_shape(values))
    assert np.isfinite(residual).all()


@pytest.mark.parametrize("n", [1, 2, 7, 400])
def test_medians_are_numpy_s_to_the_last_bit(n: int) -> None:
    values = np.random.default_rng(n).normal(size=(n, 5)).round(2)
    assert medians(values).tolist() == np.median(values, axis=0).tolist()
