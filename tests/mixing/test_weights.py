from __future__ import annotations

import numpy as np
import pytest

from pipeline.mixing.properties import PROPERTIES, mixes_in_proportion, respiration_ratios
from pipeline.mixing.weights import (
    joined_uncertainty,
    measurement_uncertainty,
    mixing_problem,
    variance_weights_tomczak_large_1989,
)
from pipeline.settings import TracerSettings
from pipeline.variables import REGISTRY

from .catalogues import catalogue
from .test_solver import SOURCES

RATIOS = respiration_ratios(TracerSettings())
RESPIRATION = 'respiration = "non_negative"'


def test_published_weights_to_the_printed_digits() -> None:
    """Computed from the published formula (from memory) for illustrative sources."""
    uncertainties = np.tile([0.5, 0.05, 6.0, 0.05, 0.6, 3.0], (3, 1))
    uncertainties[1:] *= 0.5  # the largest counts
    printed = ("21.0", "45.64", "7.1759", "89.333", "105.787", "389.815")
    for found, digits in zip(
        variance_weights_tomczak_large_1989(SOURCES, uncertainties), printed, strict=True
    ):
        assert f"{found:.{len(digits.partition('.')[2])}f}" == digits


def test_published_weights_do_not_depend_on_the_unit() -> None:
    uncertainties = np.full(SOURCES.shape, 0.1)
    np.testing.assert_allclose(
        variance_weights_tomczak_large_1989(SOURCES * 1000, uncertainties * 1000),
        variance_weights_tomczak_large_1989(SOURCES, uncertainties),
    )


def test_measurement_and_source_are_joined() -> None:
    values = np.array([[2.0, 290.0], [-0.5, 250.0]])
    uncertainties = np.array([[0.1, 3.0], [0.2, 4.0]])
    joined = joined_uncertainty(["conservative_temperature", "oxygen"], values, uncertainties)
    # 0.002 degC; 1 % of the mean, 270 umol/kg
    expected = [np.sqrt(0.002**2 + (0.1**2 + 0.2**2) / 2), np.sqrt(2.7**2 + (3.0**2 + 4.0**2) / 2)]
    np.testing.assert_allclose(joined, expected, rtol=1e-12)


def test_a_property_without_a_usual_uncertainty_counts_by_its_source_alone() -> None:
    assert REGISTRY["po4_star"].uncertainty is None
    assert measurement_uncertainty(["po4_star"], np.array([1.3]))[0] == 0.0
    assert joined_uncertainty(["po4_star"], np.array([[1.3]]), np.array([[0.05]]))[0] == 0.05


def test_default_weights_are_one_over_the_uncertainty_and_mass_is_exact() -> None:
    read = catalogue()
    problem = mixing_problem(read, read.set[0], RATIOS)
    np.testing.assert_array_equal(problem.weight, 1 / problem.uncertainty)
    assert problem.mass_weight is None
    np.testing.assert_array_equal(problem.processes, [[0.0, 0.0, -170.0, 1.0, 16.0]])
    assert problem.signs == ("non_negative",)
    np.testing.assert_array_equal(problem.sources[1], [-0.5, 34.7, 250.0, 2.2, 32.0])


@pytest.mark.parametrize(
    ("lines", "scaled", "mass"),
    [
        (
            'weights = "variance"\nmass = "weighted"',
            [3.125 / 0.04, 0.045 / 1e-4, 800 / 9, 0.72 / 0.0016, 162 / 0.25],
            648.0,
        ),
        ('weights = "variance"\nmass = "weighted"\nmass_weight = 7.0', None, 7.0),
        (
            'weights = "given"\nmass = "weighted"\ngiven_weights = { conservative_temperature = 10, '
            "preformed_salinity = 9, oxygen = 4, phosphate = 3, nitrate = 2, mass = 24 }",
            [10, 9, 4, 3, 2],
            24.0,
        ),
        (
            'weights = "given"\nmass = "weighted"\ngiven_weights = { conservative_temperature = 10, '
            "preformed_salinity = 9, oxygen = 4, phosphate = 3, nitrate = 2 }",
            [10, 9, 4, 3, 2],
            10.0,
        ),
    ],
)
def test_published_practice_scales_rows_with_the_spread_of_the_sources(
    lines: str, scaled: list[float] | None, mass: float
) -> None:
    read = catalogue((RESPIRATION, lines))
    problem = mixing_problem(read, read.set[0], RATIOS)
    if scaled is not None:
        np.testing.assert_allclose(problem.weight * problem.sources.std(axis=0, ddof=1), scaled, rtol=1e-9)
    assert problem.mass_weight == pytest.approx(mass)
    default = catalogue((RESPIRATION, ""))
    np.testing.assert_array_equal(
        problem.uncertainty, mixing_problem(default, default.set[0], RATIOS).uncertainty
    )


def test_a_weighted_sum_weighs_as_much_as_the_largest_property_by_default() -> None:
    read = catalogue((RESPIRATION, 'mass = "weighted"'))
    problem = mixing_problem(read, read.set[0], RATIOS)
    spread = problem.sources.std(axis=0, ddof=1)
    assert problem.mass_weight == pytest.approx((spread / problem.uncertainty).max())


def test_silicate_dissolves_as_the_set_says() -> None:
    read = catalogue(
        ("nitrate = {", "silicate = {"), ("nitrate = {", "silicate = {"), ('"nitrate"', '"silicate"'),
        (RESPIRATION, 'respiration = "free"\nsilicate_per_phosphate = 15.0'),
    )  # fmt: skip
    chosen = read.set[0]
    ratios = respiration_ratios(TracerSettings(), chosen.silicate_per_phosphate)
    problem = mixing_problem(read, chosen, ratios)
    assert problem.processes[0, 4] == 15.0
    assert problem.signs == ("free",)


def test_ratios_of_respiration() -> None:
    """Anderson and Sarmiento 1994: 117, 16 and 170 per phosphate verified."""
    assert RATIOS["oxygen"] == -170
    assert RATIOS["nitrate"] == 16
    assert RATIOS["phosphate"] == 1
    assert RATIOS["dic"] == 117
    assert RATIOS["alkalinity"] + RATIOS["nitrate"] == 0
    assert RATIOS["silicate"] == 0
    assert RATIOS["n_star"] == pytest.approx(0, abs=1e-12)
    assert RATIOS["broecker_no"] == pytest.approx(-170 + 9 * 16)
    assert RATIOS["po4_star"] == pytest.approx(1 - 170 / 175)
    assert RATIOS["si_star"] == -16
    assert set(RATIOS) <= set(PROPERTIES)
    other = respiration_ratios(TracerSettings(stoichiometry="redfield_1963"))
    assert (other["oxygen"], other["dic"]) == (-138, 106)


@pytest.mark.parametrize(
    "name", ["oxygen", "preformed_salinity", "conservative_temperature", "dic", "cfc12", "po4_star"]
)
def test_what_mixes_in_proportion(name: str) -> None:
    assert mixes_in_proportion(name)


@pytest.mark.parametrize(
    "name",
    ["pressure", "latitude", "temperature", "sigma0", "ph_total", "pco2", "delta_carbon_13", "oxygen_saturation", "aou",
     "oxygen_solubility", "helium_error", "station", "bottle_flag", "oxygen_source", "share", "no_such_name"],
)  # fmt: skip
def test_what_does_not(name: str) -> None:
    assert not mixes_in_proportion(name)


@pytest.mark.parametrize("size", [1e-300, 1e6])
def test_an_absurd_uncertainty_of_a_measurement_breaks_nothing(size: float) -> None:
    read = catalogue()
    problem = mixing_problem(read, read.set[0], RATIOS, {"nitrate": size})
    assert np.isfinite(problem.weight).all()
