"""The carbonate system of samples whose pair is known: quantities in situ, uncertainties, and what contradicts them.

Arrays in, arrays out: one element a sample.
"""

from __future__ import annotations

from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from pipeline.tracers.alkalinity import LN10, dissociation
from pipeline.tracers.carbonate_pairs import PAIRS, QUANTITIES, covariance, propagated, solved, state

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from pipeline.tables import FloatArray
    from pipeline.tracers.carbonate_pairs import Conditions, Measured, State

    IntArray = NDArray[np.int64]

# Orr et al. 2018, Marine Chemistry 207:84-107, as PyCO2SYS gives them: standard uncertainties of pK, and of boron
# as a part of it. A fit is wrong everywhere at once, so each is moved in all conditions together.
ORR_2018: Mapping[str, float] = MappingProxyType(
    {"k0": 0.002, "k1": 0.0075, "k2": 0.015, "borate_k": 0.01, "water_k": 0.01, "calcite_k": 0.02, "aragonite_k": 0.02}
)  # fmt: skip
ORR_2018_BORON = 0.02
_STEP = 1e-4  # of ln H, for the one derivative that is not written out


def carbonate_system(
    measured: Measured, pair: IntArray, conditions: Conditions, *, constants_too: bool
) -> tuple[dict[str, FloatArray], dict[str, FloatArray]]:
    """Return the quantities of every sample and their standard uncertainties, by registry name, (n,) each.

    Parameters
    ----------
    measured
        Of n samples.
    pair
        Which of ``PAIRS`` each is solved from, (n,).
    conditions
        Constants.
    constants_too
        Whether the uncertainties hold those of the constants, Orr et al. 2018.

    """
    with np.errstate(all="ignore"):
        dic, alkalinity = solved(measured, pair, conditions)
        in_situ, of_ph, of_gas = _states(dic, alkalinity, conditions)
        spread = covariance(measured, pair, of_ph, of_gas)
        values = {
            **_computed(dic, alkalinity, pair),
            **_quantities(in_situ),
            **_residuals(measured, pair, of_ph, of_gas),
        }
        gradients = _gradients(in_situ, values)
        uncertainty = {name: propagated(gradients[name], spread) for name in gradients}
        uncertainty["dic_computed"], uncertainty["alkalinity_computed"] = (
            np.sqrt(spread[0]),
            np.sqrt(spread[2]),
        )
        uncertainty["ph_residual"] = np.hypot(
            propagated(of_ph.ln_h_gradient / LN10, spread), measured.uncertainty["ph"]
        )
        uncertainty["fco2_residual"] = np.hypot(
            propagated(of_gas.fco2 * of_gas.ln_fco2_gradient, spread), measured.uncertainty["fco2"]
        )
        if constants_too:
            squares = _by_constants(measured, pair, conditions)
            uncertainty = {name: np.sqrt(u**2 + squares[name]) for name, u in uncertainty.items()}
    known = ~np.isnan(values["ph_in_situ"])
    values = {name: np.where(known, v, np.nan) for name, v in values.items()}
    return values, {
        name: np.where(~np.isnan(values[name]) & np.isfinite(u), u, np.nan) for name, u in uncertainty.items()
    }


def _computed(dic: FloatArray, alkalinity: FloatArray, pair: IntArray) -> dict[str, FloatArray]:
    """Return DIC and alkalinity where they are not of the pair themselves, else NaN, (n,)."""
    return {
        f"{QUANTITIES[number]}_computed": np.where(_holds(pair, number), np.nan, values)
        for number, values in enumerate((dic, alkalinity))
    }


def _holds(pair: IntArray, quantity: int) -> NDArray[np.bool_]:
    """Return where a pair has one of the quantities, by its number, (n,)."""
    return np.isin(pair, [number for number, members in enumerate(PAIRS) if quantity in members])


def _quantities(s: State) -> dict[str, FloatArray]:
    """Return what the tables tell of a state in situ."""
    fco2, carbonate = s.fco2, s.dic * s.acids.carbonate
    saturated = 1e-12 * carbonate * s.k.calcium
    return {
        "ph_in_situ": s.ph,
        "fco2_in_situ": fco2,
        "pco2_in_situ": fco2 / s.k.fugacity_factor,
        "aqueous_co2": s.dic * s.acids.aqueous_co2,
        "bicarbonate": s.dic * s.acids.bicarbonate,
        "carbonate": carbonate,
        "aqueous_co2_fraction": s.acids.aqueous_co2,
        "bicarbonate_fraction": s.acids.bicarbonate,
        "carbonate_fraction": s.acids.carbonate,
        "calcite_saturation": saturated / s.k.calcite_k,
        "aragonite_saturation": saturated / s.k.aragonite_k,
        "revelle_factor": _revelle(s.dic, s.acids.charge, s.acids.slope(s.dic)),
    }


def _revelle(dic: FloatArray, charge: FloatArray, slope: FloatArray) -> FloatArray:
    """Return the relative change of fCO2 over that of DIC at constant alkalinity, (n,).

    Broecker et al. 1979, Science 206:409-418 (from memory).
    """
    return 1.0 - dic * charge**2 / slope


def _gradients(s: State, values: Mapping[str, FloatArray]) -> dict[str, FloatArray]:
    """Return the derivatives of every quantity in situ by DIC and alkalinity, (2, n) each."""
    ln_h, ln_fco2, charge = s.ln_h_gradient, s.ln_fco2_gradient, s.acids.charge
    by_dic = np.stack((1.0 / s.dic, np.zeros_like(s.dic)))
    # A form of charge i is the part exp(-i ln H) of all: its logarithm changes by (charge - i) per ln H.
    of_fractions = {
        form: (charge - i) * ln_h for i, form in enumerate(("aqueous_co2", "bicarbonate", "carbonate"))
    }
    relative = {
        "fco2_in_situ": ln_fco2,
        "pco2_in_situ": ln_fco2,
        **{form: of_fractions[form] + by_dic for form in of_fractions},
        **{f"{form}_fraction": of_fractions[form] for form in of_fractions},
        "calcite_saturation": of_fractions["carbonate"] + by_dic,
        "aragonite_saturation": of_fractions["carbonate"] + by_dic,
    }
    after, before = dissociation(s.ln_h + _STEP, s.k), dissociation(s.ln_h - _STEP, s.k)
    revelle_by_ln_h = (
        _revelle(s.dic, after.charge, after.slope(s.dic))
        - _revelle(s.dic, before.charge, before.slope(s.dic))
    ) / (2.0 * _STEP)
    revelle = revelle_by_ln_h * ln_h
    revelle[0] -= charge**2 * s.acids.others_slope / s.acids.slope(s.dic) ** 2
    return {
        "ph_in_situ": -ln_h / LN10,
        **{name: values[name] * gradient for name, gradient in relative.items()},
        "revelle_factor": revelle,
    }


def _residuals(measured: Measured, pair: IntArray, of_ph: State, of_gas: State) -> dict[str, FloatArray]:
    """Return measured less computed pH and fCO2 where they were measured beside the pair, else NaN, (n,)."""
    found = {}
    for quantity, of_measured, of_state in ((2, measured.ph, of_ph.ph), (3, measured.fco2, of_gas.fco2)):
        found[("ph_residual", "fco2_residual")[quantity - 2]] = np.where(
            _holds(pair, quantity), np.nan, of_measured - of_state
        )
    return found


def _by_constants(measured: Measured, pair: IntArray, conditions: Conditions) -> dict[str, FloatArray]:
    """Return the variance that uncertain constants add to every quantity, (n,): each moved up and down by itself."""
    moves = [{name: 10.0**size} for name, size in ORR_2018.items()] + [{"borate": 1.0 + ORR_2018_BORON}]
    squares: dict[str, FloatArray] = {}
    for move in moves:
        up, down = (
            _moved(measured, pair, conditions.scaled({name: factor**sign for name, factor in move.items()}))
            for sign in (1.0, -1.0)
        )
        for name, value in up.items():
            squares[name] = squares.get(name, 0.0) + (0.5 * (value - down[name])) ** 2
    return squares


def _moved(measured: Measured, pair: IntArray, conditions: Conditions) -> dict[str, FloatArray]:
    dic, alkalinity = solved(measured, pair, conditions)
    in_situ, of_ph, of_gas = _states(dic, alkalinity, conditions)
    return {
        **_computed(dic, alkalinity, pair),
        **_quantities(in_situ),
        **_residuals(measured, pair, of_ph, of_gas),
    }


def _states(dic: FloatArray, alkalinity: FloatArray, conditions: Conditions) -> tuple[State, State, State]:
    """Return the state in situ, where pH was measured, and where the gas was; what is the same is solved once."""
    in_situ = state(dic, alkalinity, conditions.in_situ)
    of_ph, of_gas = (
        in_situ if k is conditions.in_situ else state(dic, alkalinity, k)
        for k in (conditions.of_ph, conditions.of_gas)
    )
    return in_situ, of_ph, of_gas
