"""Oxygen: solubility on its own temperature scale, two independent fits beside each other, unit conversions."""

from __future__ import annotations

import math

import gsw
import numpy as np

from pipeline import units
from pipeline.tracers import oxygen
from pipeline.tracers.oxygen import SOLUBILITY_FITS, SolubilityName

from .check import Check, Status

GARCIA_GORDON = "Garcia and Gordon 1992, L&O 37:1307-1312, Table 1 and eq. 8"
BENSON_KRAUSE = "Benson and Krause 1984, L&O 29:620-632"
COMPUTED, VERIFIED, MEMORY = Status.COMPUTED, Status.VERIFIED, Status.FROM_MEMORY


def garcia_gordon(s: float, t68: float, fit: str) -> float:
    coefficients = SOLUBILITY_FITS[SolubilityName(fit)]
    found = oxygen.oxygen_solubility_garcia_gordon_1992(np.array(s), np.array(t68), coefficients)
    return float(found)


def coefficient(fit: str, name: str) -> float:
    """Return one coefficient of our table by its published name, A0 to A5, B0 to B3 or C0."""
    coefficients = SOLUBILITY_FITS[SolubilityName(fit)]
    groups = {
        "A": coefficients.temperature,
        "B": coefficients.salinity,
        "C": (coefficients.salinity_squared,),
    }
    return groups[name[0]][int(name[1])]


def garcia_gordon_umol_l(s: float, t68: float) -> float:
    return garcia_gordon(s, t68, SolubilityName.BENSON_KRAUSE_ML_L) * units.OXYGEN_UMOL_PER_ML


def pipeline_solubility(s: float, theta90: float) -> float:
    fit = oxygen.BENSON_KRAUSE_UMOL_KG
    return float(oxygen.oxygen_solubility(np.array(s), np.array(theta90), np.array(0.0), fit))


def gsw_solubility(s: float, theta90: float) -> float:
    return float(gsw.O2sol_SP_pt(s, theta90))


def cost_of_the_scale(s: float, t: float) -> float:
    """Return what a temperature on one scale, taken for one on the other, does to the solubility."""
    return pipeline_solubility(s, t / units.T68_PER_T90) - pipeline_solubility(s, t)


def cost_of_in_situ_temperature(s: float, t: float, theta: float) -> float:
    return pipeline_solubility(s, theta) - pipeline_solubility(s, t)


def _benson_krause(constants: tuple[float, ...], salting: tuple[float, ...], t68: float, s: float) -> float:
    kelvin = t68 + 273.15
    powers = [kelvin**-n for n in range(5)]
    fresh = sum(c * p for c, p in zip(constants, powers, strict=True))
    return math.exp(fresh - s * sum(c * p for c, p in zip(salting, powers[:3], strict=True)))


def benson_krause_mg_l(s: float, t68: float) -> float:
    return _benson_krause(
        (-139.34411, 1.575701e5, -6.642308e7, 1.243800e10, -8.621949e11), (0.017674, -10.754, 2140.7), t68, s
    )


def benson_krause_umol_l(s: float, t68: float) -> float:
    return _benson_krause(
        (-135.90205, 1.575701e5, -6.642308e7, 1.243800e10, -8.621949e11), (0.017674, -10.754, 2140.7), t68, s
    )


def benson_krause_umol_kg(s: float, t68: float) -> float:
    return _benson_krause(
        (-135.29996, 1.572288e5, -6.637149e7, 1.243678e10, -8.621061e11), (0.020573, -12.142, 2363.1), t68, s
    )


def fits_apart(s: float, t68: float) -> float:
    """Return our fit less the independent equation it was fitted to, umol/kg."""
    return garcia_gordon(s, t68, SolubilityName.BENSON_KRAUSE_UMOL_KG) - benson_krause_umol_kg(s, t68)


def umol_per_ml() -> float:
    return units.OXYGEN_UMOL_PER_ML


def umol_per_ml_of_molar_volume(litres_per_mol: float) -> float:
    return 1000.0 / litres_per_mol


def relative_to_ours(factor: float) -> float:
    return factor / units.OXYGEN_UMOL_PER_ML - 1.0


def umol_per_mg() -> float:
    return units.OXYGEN_UMOL_PER_MG


def mg_per_ml() -> float:
    return units.OXYGEN_UMOL_PER_ML / units.OXYGEN_UMOL_PER_MG


def _umol_kg(sp: float, theta: float, p: float, ml_l: float) -> float:
    salinity = gsw.SR_from_SP(sp)
    density = gsw.rho(salinity, gsw.CT_from_pt(salinity, theta), p)
    return float(ml_l * units.OXYGEN_UMOL_PER_ML / density * 1000.0)


def umol_kg_with_potential_density(sp: float, theta: float, ml_l: float) -> float:
    """Return what the pipeline's own conversion gives for a delivered ml/l."""
    how = units.Conversion("", units.OXYGEN_UMOL_PER_ML, units.DensityAt.POTENTIAL)
    density = units.density(units.DensityAt.POTENTIAL, np.array([sp]), np.array([theta]), np.array([0.0]))
    return float(units.scaled(np.array([ml_l]), how, density)[0])


def percent_of_another_density(sp: float, theta: float, t: float, p: float, ml_l: float) -> float:
    right = umol_kg_with_potential_density(sp, theta, ml_l)
    return 100.0 * (_umol_kg(sp, t, p, ml_l) / right - 1.0)


# T68, then Benson and Krause umol/kg at S=0 and at S=35, our fit at 35, umol/l at 35, mg/l at 0 and at 35.
_SOLUBILITIES = (
    (0.0, "456.98", "347.88", "347.903", "357.69", "14.621", "11.446"),
    (5.0, "399.12", "307.36", "307.358", "315.90", "12.771", "10.108"),
    (10.0, "352.86", "274.59", "274.610", "282.02", "11.288", "9.024"),
    (15.0, "315.41", "247.77", "247.796", "254.24", "10.084", "8.135"),
    (20.0, "284.65", "225.53", "225.537", "231.14", "9.092", "7.396"),
    (25.0, "259.00", "206.79", "206.788", "211.64", "8.263", "6.772"),
    (30.0, "237.25", "190.74", "190.740", "194.90", "7.559", "6.237"),
)
# Table 1 as printed: umol/kg fitted to Benson and Krause, umol/kg to the combined data, the same two in ml/l.
_NAMES = ("A0", "A1", "A2", "A3", "A4", "A5", "B0", "B1", "B2", "B3", "C0")
_COEFFICIENTS = {
    SolubilityName.BENSON_KRAUSE_UMOL_KG: (
        "5.80871", "3.20291", "4.17887", "5.10006", "-9.86643e-2", "3.80369",
        "-7.01577e-3", "-7.70028e-3", "-1.13864e-2", "-9.51519e-3", "-2.75915e-7"),
    SolubilityName.COMBINED_UMOL_KG: (
        "5.80818", "3.20684", "4.11890", "4.93845", "1.01567", "1.41575",
        "-7.01211e-3", "-7.25958e-3", "-7.93334e-3", "-5.54491e-3", "-1.32412e-7"),
    SolubilityName.BENSON_KRAUSE_ML_L: (
        "2.00907", "3.22014", "4.05010", "4.94457", "-2.56847e-1", "3.88767",
        "-6.24523e-3", "-7.37614e-3", "-1.03410e-2", "-8.17083e-3", "-4.88682e-7"),
    SolubilityName.COMBINED_ML_L: (
        "2.00856", "3.22400", "3.99063", "4.80299", "9.78188e-1", "1.71069",
        "-6.24097e-3", "-6.93498e-3", "-6.90358e-3", "-4.29155e-3", "-3.11680e-7"),
}  # fmt: skip
_UMOL_KG = f"{BENSON_KRAUSE}, coefficients from memory, computed here"
_MG_L = f"{BENSON_KRAUSE}, coefficients verified, computed here"
_WRONG = "gsw 3.6.23; the sample's position is not given, so that its salinity anomaly is left out"
_SAMPLE = {"sp": 34.9, "theta": 1.96, "ml_l": 5.6}
_CHECK = {"s": 35.0, "t68": 10.0}
_OURS = {"fit": SolubilityName.BENSON_KRAUSE_UMOL_KG.value}

ROWS = (
    Check("solubility at the paper's check point, umol/kg", {**_CHECK, **_OURS}, garcia_gordon, "274.610",
          f"{GARCIA_GORDON}: its check value", VERIFIED),
    Check("solubility, umol/kg", {**_CHECK, **_OURS}, garcia_gordon, "274.609832", GARCIA_GORDON, COMPUTED),
    Check("solubility, umol/kg", {**_CHECK, "fit": "combined_umol_kg"}, garcia_gordon, "274.645895",
          GARCIA_GORDON, COMPUTED),
    Check("solubility, ml/l", {**_CHECK, "fit": "benson_krause_ml_l"}, garcia_gordon, "6.314767",
          GARCIA_GORDON, COMPUTED),
    Check("solubility, ml/l", {**_CHECK, "fit": "benson_krause_ml_l"}, garcia_gordon, "6.315",
          f"{GARCIA_GORDON}: its check value", MEMORY),
    Check("solubility, ml/l", {**_CHECK, "fit": "combined_ml_l"}, garcia_gordon, "6.316109", GARCIA_GORDON,
          COMPUTED),
    Check("solubility, umol/l", _CHECK, garcia_gordon_umol_l, "282.015", f"{GARCIA_GORDON}: its check value",
          MEMORY),
    # The trap: the published check holds for 10 degC on IPTS-68, which is 9.9976 degC on ITS-90.
    Check("solubility at 10 degC of ITS-90, umol/kg", {"s": 35.0, "theta90": 10.0}, pipeline_solubility,
          "274.595664", "gsw 3.6.23, O2sol_SP_pt", COMPUTED),
    Check("solubility at 10 degC of IPTS-68, umol/kg", {"s": 35.0, "theta90": 10.0 / 1.00024},
          pipeline_solubility, "274.609832", "gsw 3.6.23, O2sol_SP_pt", COMPUTED),
    Check("solubility at 10 degC of IPTS-68, umol/kg", {"s": 35.0, "theta90": 10.0 / 1.00024},
          gsw_solubility, "274.610", f"{GARCIA_GORDON}: its check value", VERIFIED),
    Check("cost of the wrong scale at 25 degC, umol/kg", {"s": 35.0, "t": 25.0}, cost_of_the_scale, "0.021",
          "gsw 3.6.23, O2sol_SP_pt", COMPUTED),
    Check("cost of in-situ temperature at 4598 dbar, umol/kg", {"s": 34.7443, "t": 0.9865, "theta": 0.615358},
          cost_of_in_situ_temperature, "3", "estimate for sample 4 of the A16S rows", COMPUTED, within=0.5),
    *(
        check
        for t68, kg_0, kg_35, fitted_35, l_35, mg_0, mg_35 in _SOLUBILITIES
        for check in (
            Check("solubility, umol/kg", {"s": 0.0, "t68": t68}, benson_krause_umol_kg, kg_0, _UMOL_KG, MEMORY),
            Check("solubility, umol/kg", {"s": 35.0, "t68": t68}, benson_krause_umol_kg, kg_35, _UMOL_KG,
                  MEMORY),
            Check("solubility, umol/kg", {"s": 35.0, "t68": t68, **_OURS}, garcia_gordon, fitted_35,
                  GARCIA_GORDON, COMPUTED),
            Check("solubility, umol/l", {"s": 35.0, "t68": t68}, benson_krause_umol_l, l_35, _UMOL_KG, MEMORY),
            Check("solubility, mg/l", {"s": 0.0, "t68": t68}, benson_krause_mg_l, mg_0, _MG_L, COMPUTED),
            Check("solubility, mg/l", {"s": 35.0, "t68": t68}, benson_krause_mg_l, mg_35, _MG_L, COMPUTED),
            Check("our fit less the equation it was fitted to, umol/kg", {"s": 35.0, "t68": t68}, fits_apart,
                  "0", f"{_UMOL_KG}; they agree to 0.03", COMPUTED, within=0.03),
        )
    ),
    *(
        Check("coefficient", {"fit": fit.value, "name": name}, coefficient, printed, GARCIA_GORDON, VERIFIED)
        for fit, values in _COEFFICIENTS.items()
        for name, printed in zip(_NAMES, values, strict=True)
    ),
    Check("oxygen, umol per ml", {}, umol_per_ml, "44.6596",
          "Thierry et al., Argo/SCOR practice, doi 10.13155/39795", VERIFIED),
    Check("oxygen, umol per ml, from its molar volume", {"litres_per_mol": 22.3916},
          umol_per_ml_of_molar_volume, "44.6596", "Thierry et al., doi 10.13155/39795", VERIFIED),
    Check("44.66 against ours, relative", {"factor": 44.66}, relative_to_ours, "0",
          "GLODAPv2.2023, Lauvset et al. 2024, ESSD 16:2047", VERIFIED, within=3.2e-5),
    Check("44.661 against ours, relative", {"factor": 44.661}, relative_to_ours, "0", "UNESCO and WOCE-era texts",
          MEMORY, within=3.2e-5),
    Check("oxygen, umol per mg", {}, umol_per_mg, "31.2512", "1000 / 31.9988, the molar mass", MEMORY),
    # Older tables took 22.391 litres per mol; the two customs part in the fifth digit.
    Check("oxygen, mg per ml", {}, mg_per_ml, "1.42903", "trade constant", MEMORY, within=5e-5),
    Check("5.6 ml/l by potential density, umol/kg", _SAMPLE, umol_kg_with_potential_density, "243.305", _WRONG,
          COMPUTED, within=0.01),
    Check("in-situ density instead, percent", {**_SAMPLE, "t": 1.96, "p": 4000.0}, percent_of_another_density,
          "-1.7", _WRONG, COMPUTED),
    Check("density in a laboratory at 25 degC instead, percent", {**_SAMPLE, "t": 25.0, "p": 0.0},
          percent_of_another_density, "0.45", _WRONG, COMPUTED, within=0.01),
    Check("density at a draw temperature of 4 degC instead, percent", {**_SAMPLE, "t": 4.0, "p": 0.0},
          percent_of_another_density, "0.018", _WRONG, COMPUTED, within=0.001),
)  # fmt: skip
