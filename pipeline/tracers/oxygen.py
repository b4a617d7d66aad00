"""Oxygen at equilibrium with the air, and what the water lacks of it. Arrays in, arrays out."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from pipeline.seawater import Domain
from pipeline.tracers.choices import chosen
from pipeline.units import OXYGEN_UMOL_PER_ML, T68_PER_T90

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pipeline.tables import FloatArray


class SolubilityName(StrEnum):
    """The four fits of Garcia and Gordon 1992, Table 1: to whose data, and in which unit."""

    BENSON_KRAUSE_UMOL_KG = "benson_krause_umol_kg"
    COMBINED_UMOL_KG = "combined_umol_kg"
    BENSON_KRAUSE_ML_L = "benson_krause_ml_l"
    COMBINED_ML_L = "combined_ml_l"


@dataclass(frozen=True, slots=True)
class SolubilityFit:
    """Coefficients of Garcia and Gordon 1992, eq. 8, for the natural logarithm of the solubility."""

    temperature: tuple[float, float, float, float, float, float]  # A0 to A5
    salinity: tuple[float, float, float, float]  # B0 to B3
    salinity_squared: float  # C0
    per_kilogram: bool  # umol/kg, else ml/l


# Garcia and Gordon 1992, L&O 37:1307-1312, Table 1 (verified). The first is the one recommended there;
# in sea water the combined fits lie up to 0.3 percent above it near freezing and 0.14 below at 27 degC (computed).
BENSON_KRAUSE_UMOL_KG = SolubilityFit(
    (5.80871, 3.20291, 4.17887, 5.10006, -9.86643e-2, 3.80369),
    (-7.01577e-3, -7.70028e-3, -1.13864e-2, -9.51519e-3),
    -2.75915e-7,
    per_kilogram=True,
)
COMBINED_UMOL_KG = SolubilityFit(
    (5.80818, 3.20684, 4.11890, 4.93845, 1.01567, 1.41575),
    (-7.01211e-3, -7.25958e-3, -7.93334e-3, -5.54491e-3),
    -1.32412e-7,
    per_kilogram=True,
)
BENSON_KRAUSE_ML_L = SolubilityFit(
    (2.00907, 3.22014, 4.05010, 4.94457, -2.56847e-1, 3.88767),
    (-6.24523e-3, -7.37614e-3, -1.03410e-2, -8.17083e-3),
    -4.88682e-7,
    per_kilogram=False,
)
COMBINED_ML_L = SolubilityFit(
    (2.00856, 3.22400, 3.99063, 4.80299, 9.78188e-1, 1.71069),
    (-6.24097e-3, -6.93498e-3, -6.90358e-3, -4.29155e-3),
    -3.11680e-7,
    per_kilogram=False,
)

SOLUBILITY_FITS: Mapping[SolubilityName, SolubilityFit] = MappingProxyType(
    {
        SolubilityName.BENSON_KRAUSE_UMOL_KG: BENSON_KRAUSE_UMOL_KG,
        SolubilityName.COMBINED_UMOL_KG: COMBINED_UMOL_KG,
        SolubilityName.BENSON_KRAUSE_ML_L: BENSON_KRAUSE_ML_L,
        SolubilityName.COMBINED_ML_L: COMBINED_ML_L,
    }
)

# Where the fit is evaluated. The data reach from the freezing point to 40 degC and to a salinity of 42 (from
# memory); the lower bound leaves room for water that an ice shelf cooled below its surface freezing point.
FIT_TEMPERATURE = Domain(-4.0, 40.0)  # degC
FIT_SALINITY = Domain(0.0, 42.0)
SURFACE_DENSITY_ANOMALY = Domain(-20.0, 60.0)  # kg/m3: wider than any water inside the fit has


def oxygen_solubility_garcia_gordon_1992(
    practical_salinity: FloatArray, potential_temperature_68: FloatArray, fit: SolubilityFit
) -> FloatArray:
    """Return oxygen in equilibrium with air of 1 atm that holds its full water vapour, in the fit's unit.

    Inputs broadcast: practical salinity (PSS-78), and potential temperature on **IPTS-68** (degC), the scale
    of the fit: its published check, 274.610 umol/kg at 10 degC and 35, holds on no other. NaN outside the
    fit. Garcia and Gordon 1992, eq. 8, less its misprinted extra term A3 Ts^2 (erratum 1993, L&O 38:656; that
    it is this term is from memory).
    """
    salinity, temperature = np.broadcast_arrays(
        np.asarray(practical_salinity, dtype=np.float64), np.asarray(potential_temperature_68, np.float64)
    )
    known = FIT_SALINITY.holds(salinity) & FIT_TEMPERATURE.holds(temperature)
    s = np.where(known, salinity, np.nan)
    t = np.where(known, temperature, np.nan)
    scaled = np.log((298.15 - t) / (273.15 + t))
    a, b = np.polynomial.Polynomial(fit.temperature), np.polynomial.Polynomial(fit.salinity)
    found: FloatArray = np.exp(a(scaled) + s * b(scaled) + fit.salinity_squared * s * s)
    return found


def oxygen_solubility(
    practical_salinity: FloatArray, potential_temperature: FloatArray, sigma0: FloatArray, fit: SolubilityFit
) -> FloatArray:
    """Return oxygen in equilibrium with the air, umol/kg, by the chosen fit.

    Inputs broadcast: practical salinity (PSS-78), potential temperature on **ITS-90** (degC), potential
    density anomaly referred to the surface (kg/m3), which only a fit per litre needs.
    """
    with np.errstate(over="ignore"):  # a temperature near the largest number is infinite on the other scale
        theta68 = potential_temperature * T68_PER_T90
    fitted = oxygen_solubility_garcia_gordon_1992(practical_salinity, theta68, fit)
    if fit.per_kilogram:
        return fitted
    anomaly = np.where(SURFACE_DENSITY_ANOMALY.holds(np.asarray(sigma0)), sigma0, np.nan)
    density = (1000.0 + anomaly) / 1000.0  # kg/l, at the surface: the sample equilibrated there
    return fitted * OXYGEN_UMOL_PER_ML / density


def apparent_oxygen_utilization(solubility: FloatArray, oxygen: FloatArray) -> FloatArray:
    """Return what the water lacks of its solubility, umol/kg: positive where oxygen was used up.

    Broecker and Peng 1982 (sign from memory).
    """
    return solubility - oxygen


def solubility_fit(name: str) -> SolubilityFit:
    """Return the fit called ``name``.

    Raises
    ------
    SettingsProblem
        With the names that exist.

    """
    return chosen(SOLUBILITY_FITS, "tracers.oxygen_solubility", name)


def oxygen_saturation(solubility: FloatArray, oxygen: FloatArray) -> FloatArray:
    """Return oxygen as a fraction of its solubility."""
    return oxygen / solubility
