"""Isotope ratios as rows of the equations: there and back, and how uncertain the rows are."""

from __future__ import annotations

import numpy as np
import pytest

from pipeline.mixing.members import keys_of, measurement_noise
from pipeline.mixing.products import (
    covariance_in_rows,
    listed_of,
    listed_residuals,
    parts_in_rows,
    rows_of,
    uncertainty_in_rows,
    usable_together,
)
from pipeline.mixing.weights import measured_in_rows
from pipeline.problems import BrokenPromise

from .test_carbon_properties import DELTA, NAMES, VALUES


def test_uncertainties_of_products_are_those_of_draws() -> None:
    """Of 200000 draws: their standard deviation is known to 0.16 %."""
    random = np.random.default_rng(3)
    names, values, spread = ("dic", "delta_carbon_13"), np.array([2200.0, 1.5]), np.array([40.0, 0.05])
    draws = rows_of(names, values + spread * random.normal(size=(200_000, 2)))
    np.testing.assert_allclose(uncertainty_in_rows(names, values, spread), draws.std(axis=0), rtol=0.01)
    together = covariance_in_rows(names, values, np.diag(spread**2))
    np.testing.assert_allclose(together, np.cov(draws.T), rtol=0.02)


def test_noise_of_the_members_is_the_uncertainty_of_measurements() -> None:
    noise = measurement_noise(keys_of(["one"]), NAMES, {})
    rows = rows_of(NAMES, VALUES[0])
    absolute, relative = parts_in_rows(NAMES, noise.absolute, noise.relative, rows)
    np.testing.assert_allclose(np.hypot(absolute, relative * rows), measured_in_rows(NAMES, rows), rtol=1e-12)
    with_given = measured_in_rows(NAMES, rows, {"delta_carbon_13": 0.1, "dic": 2.0})
    assert with_given[DELTA] == pytest.approx(np.hypot(2150.0 * 0.1, 1.2 * 2.0), rel=1e-12)


def test_rows_and_listed_values_are_two_ways_to_write_one_thing() -> None:
    np.testing.assert_allclose(listed_of(NAMES, rows_of(NAMES, VALUES)), VALUES, rtol=1e-15)
    np.testing.assert_array_equal(rows_of(NAMES[:-1], VALUES[:, :-1]), VALUES[:, :-1])
    assert usable_together(("oxygen", "delta_carbon_13")) == ("oxygen",)
    with pytest.raises(BrokenPromise, match="delta_carbon_13 is mixed without dic"):
        rows_of(("oxygen", "delta_carbon_13"), np.ones((1, 2)))


def test_residuals_of_products_are_told_of_the_ratio() -> None:
    names = ("delta_carbon_13", "dic")
    observed = rows_of(names, np.array([[1.0, 2000.0]]))
    fitted = rows_of(names, np.array([[0.7, 2100.0]]))
    np.testing.assert_allclose(listed_residuals(names, observed, fitted - observed), [[-0.3, 100.0]])
