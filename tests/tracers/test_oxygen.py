from __future__ import annotations

import gsw
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.problems import SettingsProblem
from pipeline.tracers import oxygen
from pipeline.tracers.oxygen import SOLUBILITY_FITS, SolubilityName, oxygen_solubility

quick = settings(deadline=None, derandomize=True, max_examples=60)
ONE = np.ones(1)
FITS = pytest.mark.parametrize("name", list(SolubilityName))


def solubility(s: float, theta: float, name: SolubilityName, sigma0: float = 27.0) -> float:
    found = oxygen_solubility(s * ONE, theta * ONE, sigma0 * ONE, SOLUBILITY_FITS[name])
    return float(found[0])


def test_the_fit_is_on_ipts68_and_the_pipeline_on_its90() -> None:
    """274.610 umol/kg is the published check at 10 degC of IPTS-68; at 10 degC of ITS-90 it is another value."""
    fit = oxygen.BENSON_KRAUSE_UMOL_KG
    kernel = oxygen.oxygen_solubility_garcia_gordon_1992(35 * ONE, 10 * ONE, fit)
    assert kernel[0] == pytest.approx(274.610, abs=5e-4)
    assert solubility(35, 10.0, SolubilityName.BENSON_KRAUSE_UMOL_KG) == pytest.approx(274.595664, abs=5e-7)
    assert solubility(35, 10 / 1.00024, SolubilityName.BENSON_KRAUSE_UMOL_KG) == pytest.approx(
        274.610, abs=5e-4
    )


@quick
@given(st.floats(0, 42), st.floats(-2, 39))
def test_the_default_fit_is_gsws(s: float, theta: float) -> None:
    expected = float(gsw.O2sol_SP_pt(s, theta))
    assert solubility(s, theta, SolubilityName.BENSON_KRAUSE_UMOL_KG) == pytest.approx(expected, rel=1e-12)


@FITS
@quick
@given(s=st.floats(0, 41), theta=st.floats(-2, 38))
def test_warmer_and_saltier_water_holds_less(name: SolubilityName, s: float, theta: float) -> None:
    here = solubility(s, theta, name)
    assert solubility(s, theta + 1, name) < here
    assert solubility(s + 1, theta, name) < here


@pytest.mark.parametrize(
    ("name", "apart"),
    [
        (SolubilityName.BENSON_KRAUSE_ML_L, 2e-4),
        # The combined fits follow other data too, and part from the first most near the freezing point.
        (SolubilityName.COMBINED_UMOL_KG, 3e-3),
        (SolubilityName.COMBINED_ML_L, 3e-3),
    ],
)
@quick
@given(s=st.floats(33, 37), theta=st.floats(-1.5, 30))
def test_all_fits_tell_of_the_same_oxygen(name: SolubilityName, apart: float, s: float, theta: float) -> None:
    salinity = gsw.SR_from_SP(s)
    sigma0 = float(gsw.sigma0(salinity, gsw.CT_from_pt(salinity, theta)))
    default = solubility(s, theta, SolubilityName.BENSON_KRAUSE_UMOL_KG, sigma0)
    assert solubility(s, theta, name, sigma0) == pytest.approx(default, rel=apart)


@pytest.mark.parametrize("s", [-1.0, 43.0, 1e30, np.nan, np.inf])
@FITS
def test_outside_the_fit_in_salinity_is_missing(s: float, name: SolubilityName) -> None:
    assert np.isnan(solubility(s, 10.0, name))


@pytest.mark.parametrize("theta", [-6.0, 41.0, 298.15, -300.0, 1e30, np.nan, -np.inf])
@FITS
def test_outside_the_fit_in_temperature_is_missing(theta: float, name: SolubilityName) -> None:
    assert np.isnan(solubility(35.0, theta, name))


def test_utilization_is_positive_where_oxygen_was_used_up() -> None:
    assert oxygen.apparent_oxygen_utilization(300 * ONE, 180 * ONE)[0] == 120.0
    assert oxygen.oxygen_saturation(300 * ONE, 180 * ONE)[0] == 0.6


def test_an_unknown_fit_is_refused_with_the_names_that_exist() -> None:
    with pytest.raises(SettingsProblem, match="found 'weiss_1970', expected one of benson_krause_umol_kg"):
        oxygen.solubility_fit("weiss_1970")
