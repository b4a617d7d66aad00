"""The equations of the carbonate system beside PyCO2SYS's own solver and its own propagation of uncertainties."""

from __future__ import annotations

from functools import cache
from typing import TYPE_CHECKING, Any

import numpy as np
import PyCO2SYS
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.carbonate_settings import CarbonateSettings
from pipeline.tracers.alkalinity import HIGHEST_PH, LN10, LOWEST_PH, dissociation, ln_h_of
from pipeline.tracers.carbonate_pairs import PAIRS, QUANTITIES, Conditions, Measured, pairs_of, state
from pipeline.tracers.carbonate_state import ORR_2018, ORR_2018_BORON, carbonate_system
from pipeline.tracers.equilibria import VALIDITY, equilibria, validity

from .carbon_cases import ocean

if TYPE_CHECKING:
    from pipeline.tables import FloatArray

quick = settings(deadline=None, derandomize=True, max_examples=60)
N = 100
OF_PH, OF_GAS = 25.0, 20.0  # degC at which pH and gas are measured
CHOICE = CarbonateSettings()
OPTIONS = {
    "opt_k_carbonic": 10, "opt_k_bisulfate": 1, "opt_k_fluoride": 2, "opt_total_borate": 2, "opt_pH_scale": 1,
    "opt_gas_constant": 3, "opt_pressured_kCO2": 0,
}  # fmt: skip
THEIRS = {
    "ph_in_situ": "pH", "fco2_in_situ": "fCO2", "pco2_in_situ": "pCO2", "aqueous_co2": "aqueous_CO2",
    "bicarbonate": "bicarbonate", "carbonate": "carbonate", "calcite_saturation": "saturation_calcite",
    "aragonite_saturation": "saturation_aragonite", "revelle_factor": "revelle_factor",
}  # fmt: skip
TYPES = (2, 1, 3, 5)  # of QUANTITIES, as PyCO2SYS numbers them
UNCERTAIN = (4.0, 4.0, 0.01, 0.01)  # the last a part of fCO2
EVERY_PAIR = pytest.mark.parametrize(
    "pair", range(len(PAIRS)), ids=lambda i: "+".join(QUANTITIES[j] for j in PAIRS[i])
)


@cache
def water() -> dict[str, FloatArray]:
    return ocean(N)


@cache
def conditions() -> Conditions:
    w = water()
    nutrients = {name: w[name] for name in ("silicate", "phosphate")}

    def at(temperature: FloatArray, pressure: FloatArray) -> Any:
        return equilibria(w["salinity"], temperature, pressure, CHOICE, **nutrients)

    return Conditions(
        at(w["temperature"], w["pressure"]),
        at(np.full(N, OF_PH), np.zeros(N)),
        at(np.full(N, OF_GAS), np.zeros(N)),
    )


def theirs(
    one: int, other: int, of_one: FloatArray, of_other: FloatArray, **more: Any
) -> dict[str, FloatArray]:
    w = water()
    return PyCO2SYS.sys(  # type: ignore[no-any-return]
        of_one, of_other, one, other, salinity=w["salinity"], total_silicate=w["silicate"],
        total_phosphate=w["phosphate"], **OPTIONS, **more,
    )  # fmt: skip


@cache
def measured_values() -> tuple[FloatArray, ...]:
    """What each of QUANTITIES is in the water, pH and gas at their temperatures: by PyCO2SYS."""
    w = water()
    both = {"pressure": 0.0, "opt_buffers_mode": 0}
    ph = theirs(2, 1, w["dic"], w["alkalinity"], temperature=OF_PH, **both)["pH"]
    fco2 = theirs(2, 1, w["dic"], w["alkalinity"], temperature=OF_GAS, **both)["fCO2"]
    return w["dic"], w["alkalinity"], ph, fco2


def measured(pair: int, *, third: bool = False) -> Measured:
    values = measured_values()
    none = np.full(N, np.nan)
    own = [v if third or i in PAIRS[pair] else none for i, v in enumerate(values)]
    sizes = [np.full(N, UNCERTAIN[i]) * (values[3] if i == 3 else 1.0) for i in range(4)]
    return Measured(own[0], own[1], own[2], own[3], dict(zip(QUANTITIES, sizes, strict=True)))


@EVERY_PAIR
def test_every_pair_gives_what_the_library_gives(pair: int) -> None:
    """Self-consistency: the pairs were computed from DIC and alkalinity, and must lead back to them."""
    w = water()
    expected = theirs(
        2,
        1,
        w["dic"],
        w["alkalinity"],
        temperature=w["temperature"],
        pressure=w["pressure"],
        opt_buffers_mode=1,
    )
    values, _ = carbonate_system(measured(pair), np.full(N, pair), conditions(), constants_too=False)
    for name, their_name in THEIRS.items():
        np.testing.assert_allclose(values[name], expected[their_name], rtol=1e-9, err_msg=name)
    parts = sum(values[f"{form}_fraction"] for form in ("aqueous_co2", "bicarbonate", "carbonate"))
    np.testing.assert_allclose(parts, 1.0, rtol=1e-14)
    assert np.isnan(values["ph_residual"]).all()
    assert np.isnan(values["fco2_residual"]).all()


def _their_uncertainties(pair: int, more: dict[str, float]) -> dict[str, FloatArray]:
    """Return the library's own propagation, for one quantity of a pair at its temperature, all out in situ."""
    one, other = PAIRS[pair]
    values, w = measured_values(), water()
    sizes = [np.full(N, UNCERTAIN[i]) * (values[3] if i == 3 else 1.0) for i in (one, other)]
    temperature = w["temperature"] if pair == 0 else OF_PH if other == 2 else OF_GAS
    suffix = "" if pair == 0 else "_out"
    into = [f"{name}{suffix}" for name in THEIRS.values()]
    at = {"pressure": w["pressure"]} if pair == 0 else {
        "pressure": 0.0, "temperature_out": w["temperature"], "pressure_out": w["pressure"]
    }  # fmt: skip
    found = theirs(
        TYPES[one], TYPES[other], values[one], values[other], temperature=temperature, opt_buffers_mode=1,
        uncertainty_into=into, uncertainty_from={"par1": sizes[0], "par2": sizes[1], **more}, **at,
    )  # fmt: skip
    return {name: found[f"u_{their_name}{suffix}"] for name, their_name in THEIRS.items()}


@pytest.mark.parametrize(
    "pair", range(5)
)  # the library takes no pair measured at two temperatures: see the next test
def test_uncertainties_are_those_of_the_librarys_own_propagation(pair: int) -> None:
    expected = _their_uncertainties(pair, {})
    _, found = carbonate_system(measured(pair), np.full(N, pair), conditions(), constants_too=False)
    for name, uncertainty in expected.items():
        # The library steps pH forward by 1e-4, which is that much off where the Revelle factor hardly changes.
        close = 3e-3 if name == "revelle_factor" else 1e-3
        np.testing.assert_allclose(found[name], uncertainty, rtol=close, err_msg=name)


@EVERY_PAIR
def test_uncertainties_are_those_of_finite_differences(pair: int) -> None:
    """A slow obvious twin: each measured quantity moved by itself. It holds where the library has no answer too."""
    base = measured(pair)
    squares: dict[str, FloatArray] = {}
    for i in PAIRS[pair]:
        name = QUANTITIES[i]
        step = 1e-3 * base.uncertainty[name]
        ends = []
        for sign in (1.0, -1.0):
            values = {q: getattr(base, q) for q in QUANTITIES}
            values[name] = values[name] + sign * step
            moved = Measured(
                values["dic"], values["alkalinity"], values["ph"], values["fco2"], base.uncertainty
            )
            ends.append(carbonate_system(moved, np.full(N, pair), conditions(), constants_too=False)[0])
        for quantity in ends[0]:
            slope = (ends[0][quantity] - ends[1][quantity]) / 2e-3
            squares[quantity] = squares.get(quantity, 0.0) + slope**2
    _, found = carbonate_system(base, np.full(N, pair), conditions(), constants_too=False)
    for quantity, square in squares.items():
        if not quantity.endswith("residual"):
            np.testing.assert_allclose(found[quantity], np.sqrt(square), rtol=1e-3, err_msg=quantity)


@pytest.mark.parametrize("pair", [0, 1])
def test_uncertainties_of_the_constants_are_those_of_the_library(pair: int) -> None:
    """Orr et al. 2018; the library moves a constant at both conditions where it is asked for ``_both``."""
    both = "" if pair == 0 else "_both"
    names = {"k0": "k_CO2", "k1": "k_carbonic_1", "k2": "k_carbonic_2", "borate_k": "k_borate", "water_k": "k_water",
             "calcite_k": "k_calcite", "aragonite_k": "k_aragonite"}  # fmt: skip
    assert {f"p{names[name]}": size for name, size in ORR_2018.items()} == PyCO2SYS.uncertainty.pKs_OEDG18
    more = {f"p{names[name]}{both}": size for name, size in ORR_2018.items()}
    expected = _their_uncertainties(pair, {**more, "total_borate__f": ORR_2018_BORON})
    _, found = carbonate_system(measured(pair), np.full(N, pair), conditions(), constants_too=True)
    for name, uncertainty in expected.items():
        np.testing.assert_allclose(found[name], uncertainty, rtol=2e-3, err_msg=name)


def test_a_third_quantity_that_agrees_leaves_no_residual() -> None:
    values, uncertainty = carbonate_system(
        measured(0, third=True), np.zeros(N, dtype=np.int64), conditions(), constants_too=False
    )
    assert np.abs(values["ph_residual"]).max() < 1e-9
    assert np.abs(values["fco2_residual"] / measured_values()[3]).max() < 1e-9
    expected = theirs(
        2, 1, *measured_values()[:2], temperature=OF_PH, pressure=0.0, opt_buffers_mode=0, uncertainty_into=["pH"],
        uncertainty_from={"par1": UNCERTAIN[0], "par2": UNCERTAIN[1]},
    )["u_pH"]  # fmt: skip
    np.testing.assert_allclose(uncertainty["ph_residual"], np.hypot(expected, UNCERTAIN[2]), rtol=1e-3)


def test_the_first_pair_that_was_measured_is_taken() -> None:
    there = np.array([[bool(i >> q & 1) for i in range(16)] for q in range(4)])
    values = [np.where(t, 1.0, np.nan) for t in there]
    pair = pairs_of(*values)
    for i, number in enumerate(pair):
        has = [q for q in range(4) if there[q, i]]
        assert (number == -1) == (len(has) < 2)
        if number >= 0:
            assert set(PAIRS[number]) <= set(has)
            if {0, 1} <= set(has):
                assert number == 0
    assert pairs_of(*(np.array([v]) for v in (np.nan, 1.0, 1.0, 1.0)))[0] == PAIRS.index((1, 2))


def test_constants_are_those_of_the_publications() -> None:
    """Lueker et al. 2000 and Perez and Fraga 1987 by their formulas (verified), at no pressure."""
    w = water()
    s, t = w["salinity"], w["temperature"] + 273.15
    k = equilibria(s, w["temperature"], np.zeros(N), CHOICE)
    pk1 = 3633.86 / t - 61.2172 + 9.6777 * np.log(t) - 0.011555 * s + 0.0001152 * s**2
    pk2 = 471.78 / t + 25.929 - 3.16967 * np.log(t) - 0.01781 * s + 0.0001122 * s**2
    np.testing.assert_allclose(-np.log10(k.k1), pk1, rtol=1e-12)
    np.testing.assert_allclose(-np.log10(k.k2), pk2, rtol=1e-12)
    np.testing.assert_allclose(np.log(k.fluoride_k), 874.0 / t - 9.68 + 0.111 * np.sqrt(s), rtol=1e-12)
    np.testing.assert_allclose(k.borate, 432.6 * s / 35.0, rtol=1e-12)


@pytest.mark.parametrize("carbonic", ["lueker_2000", "sulpis_2020", "roy_1993", "dickson_millero_1987"])
def test_every_choice_of_constants_is_another_and_none_far_off(carbonic: str) -> None:
    chosen = CarbonateSettings.model_validate({"carbonic": carbonic})
    w = water()
    k = equilibria(w["salinity"], w["temperature"], w["pressure"], chosen)
    ph, default = (state(w["dic"], w["alkalinity"], one).ph for one in (k, equilibria(
        w["salinity"], w["temperature"], w["pressure"], CHOICE)))  # fmt: skip
    assert np.abs(ph - default).max() < 0.08
    assert (np.abs(ph - default).max() > 1e-3) == (carbonic != "lueker_2000")
    assert carbonic in VALIDITY
    assert VALIDITY[carbonic] in validity(chosen)


@quick
@given(
    dic=st.floats(100, 5000), alkalinity=st.floats(100, 5000), salinity=st.floats(1, 50),
    temperature=st.floats(-4, 45), pressure=st.floats(-10, 12000),
)  # fmt: skip
def test_a_state_is_found_or_missing_for_whatever_water(
    dic: float, alkalinity: float, salinity: float, temperature: float, pressure: float
) -> None:
    k = equilibria(np.array([salinity]), np.array([temperature]), np.array([pressure]), CHOICE)
    ln_h = ln_h_of(np.array([dic]), np.array([alkalinity]), k)
    ends = [
        dissociation(np.array([-LN10 * ph]), k).alkalinity(np.array([dic]))[0]
        for ph in (LOWEST_PH, HIGHEST_PH)
    ]
    assert np.isfinite(ln_h[0]) == (ends[0] < alkalinity < ends[1])
    if np.isfinite(ln_h[0]):
        assert dissociation(ln_h, k).alkalinity(np.array([dic]))[0] == pytest.approx(alkalinity, abs=1e-8)


def test_alkalinity_rises_with_ph_as_its_slope_says() -> None:
    k = conditions().in_situ
    ln_h, dic = np.full(N, -LN10 * 7.9), water()["dic"]
    steps = [dissociation(ln_h + sign * 1e-5, k).alkalinity(dic) for sign in (1, -1)]
    np.testing.assert_allclose(dissociation(ln_h, k).slope(dic), (steps[0] - steps[1]) / 2e-5, rtol=1e-6)
    assert (dissociation(ln_h, k).slope(dic) < 0).all()
