"""Units as delivered files spell them, and the conversions to the registry's unit.

Everything inside the pipeline is in the unit of the registry; this is the one edge where units change.
A conversion from an amount per volume to one per mass needs a density, which the caller computes at
the temperature that ``Conversion.density`` names.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from enum import StrEnum
from typing import TYPE_CHECKING

import gsw
import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.variables import Variable

    FloatArray = NDArray[np.float64]

# Saunders 1990, WOCE Newsletter 10: t68 = 1.00024 t90.
T68_PER_T90 = 1.00024

# Umol of oxygen in one ml at STP: Thierry et al., Argo/SCOR practice, doi 10.13155/39795.
OXYGEN_UMOL_PER_ML = 44.6596

# Umol of oxygen in one mg: 1000 / 31.9988, the molar mass (from memory).
OXYGEN_UMOL_PER_MG = 1000.0 / 31.9988

# Nutrients are measured in the laboratory; its temperature where none is given (Lauvset et al. 2024).
LABORATORY_TEMPERATURE = 22.0


class DensityAt(StrEnum):
    """At which temperature the density of a volume is taken."""

    NONE = "none"
    LABORATORY = "laboratory"  # nutrients: Jiang et al. 2022
    POTENTIAL = "potential"  # oxygen, where the draw temperature is unknown: Jiang et al. 2022


@dataclass(frozen=True, slots=True)
class Conversion:
    """How delivered values become the registry's: ``value * factor``, and per volume ``/ density``."""

    words: str
    factor: float = 1.0
    density: DensityAt = DensityAt.NONE

    @property
    def changes(self) -> bool:
        """Whether values are changed at all."""
        return self.factor != 1.0 or self.density is not DensityAt.NONE


SAME = Conversion("")

# A sensor's raw signal: known for what it is, but no quantity of the registry.
RAW_SIGNALS = frozenset({"0-5VDC", "0-5V", "VOLTS", "VOLT", "V", "VDC"})

_OXYGENS = frozenset({"ctd_oxygen", "bottle_oxygen"})
_NITROGEN_PHOSPHORUS_SILICON = frozenset(
    {"silicate", "nitrate", "nitrite", "nitrate_plus_nitrite", "phosphate", "ammonium"}
)

# Spelling (upper case, no blanks) to the unit it means. Common practice, no source: as found in files.
_SPELLINGS = {
    "umol kg-1": ("UMOL/KG", "UMO/KG", "UMOLKG-1", "UMOL.KG-1", "UMOL/KGR", "MICROMOL/KG", "UMOLE/KG", "UMOLES/KG"),
    "nmol kg-1": ("NMOL/KG", "NMOLKG-1", "NANOMOL/KG"),
    "pmol kg-1": ("PMOL/KG", "PMOLKG-1", "PM/KG"),
    "fmol kg-1": ("FMOL/KG", "FMOLKG-1"),
    "umol l-1": ("UMOL/L", "UM/L", "UM", "UMOLL-1", "MICROMOL/L", "UG-AT/L", "UGAT/L", "UMOL/LITER", "UMOL/LITRE"),
    "ml l-1": ("ML/L", "MLL-1", "ML/LITER", "ML/LITRE"),
    "mg l-1": ("MG/L", "MGL-1"),
    "ITS-90": ("ITS-90", "ITS90", "ITS-1990", "DEGC(ITS-90)", "DEGCITS-90", "ITS-90DEGC"),
    "IPTS-68": ("IPTS-68", "IPTS68", "ITPS-68", "DEGC(IPTS-68)"),
    "degree_C": ("DEGC", "DEG_C", "DEGREEC", "DEGREE_C", "DEGREESC", "DEGREE_CELSIUS", "DEGREESCELSIUS", "C", "°C"),
    "dbar": ("DBAR", "DBARS", "DB", "DECIBAR", "DECIBARS"),
    "m": ("METERS", "METRES", "METER", "METRE", "M"),
    "1": ("1", "PSS-78", "PSS78", "PSU", "PSS", "NONE", "N/A", "UNITLESS", "TOTALSCALE", "TOTAL", "SWS"),
    "1e-3": ("/MILLE", "PERMIL", "PERMILLE", "O/OO", "PER_MILLE", "PERMILL", "‰"),
    "percent": ("PERCNT", "PERCENT", "%", "%TRANS"),
    "tritium_unit": ("TU",),
    "uatm": ("UATM", "MICROATM"),
    "ug kg-1": ("UG/KG", "UGKG-1"),
    "mg m-3": ("MG/M^3", "MG/M3", "MGM-3", "UG/L"),
    "degree_north": ("DEG", "DEGREES", "DEGREES_NORTH", "DEGREE_NORTH", "DECDEG", "DECIMALDEGREES"),
    "degree_east": ("DEG", "DEGREES", "DEGREES_EAST", "DEGREE_EAST", "DECDEG", "DECIMALDEGREES"),
}  # fmt: skip


def _folded(spelling: str) -> str:
    """Return a spelling without blanks, quotes and case; both micro signs read as u."""
    return re.sub(r"[\s\"']", "", spelling.replace("\u00b5", "u").replace("\u03bc", "u")).upper()


def conversion(variable: Variable, spelling: str) -> Conversion | None:
    """Return how values of ``variable`` delivered in the unit ``spelling`` become the registry's.

    None where the unit cannot be read, or is not one of this quantity. An empty spelling means
    the registry's unit.
    """
    folded = _folded(spelling)
    if not folded or folded in _folded_spellings(variable.unit) or folded == _folded(variable.exchange_unit):
        return SAME
    if variable.unit == "degree_C":
        return _temperature_conversion(folded)
    if variable.unit == "umol kg-1":
        return _amount_conversion(variable.name, folded)
    return None


def is_raw_signal(spelling: str) -> bool:
    """Return whether a unit is that of a sensor's raw signal."""
    return _folded(spelling) in RAW_SIGNALS


def _folded_spellings(unit: str) -> tuple[str, ...]:
    return _SPELLINGS.get(unit, ())


def _temperature_conversion(folded: str) -> Conversion | None:
    if folded in _SPELLINGS["ITS-90"]:
        return SAME
    if folded in _SPELLINGS["IPTS-68"]:
        return Conversion("IPTS-68 to ITS-90, divided by 1.00024 (Saunders 1990)", 1.0 / T68_PER_T90)
    return None


def _amount_conversion(name: str, folded: str) -> Conversion | None:
    if folded in _SPELLINGS["nmol kg-1"]:
        return Conversion("nmol/kg to umol/kg", 1e-3)
    if name in _OXYGENS:
        at, where = DensityAt.POTENTIAL, "potential density at 0 dbar"
    elif name in _NITROGEN_PHOSPHORUS_SILICON:
        at, where = DensityAt.LABORATORY, f"density at {LABORATORY_TEMPERATURE:g} degC in the laboratory"
    else:
        return None
    if folded in _SPELLINGS["umol l-1"]:
        return Conversion(f"umol/l to umol/kg with {where}", 1.0, at)
    if name in _OXYGENS and folded in _SPELLINGS["ml l-1"]:
        return Conversion(
            f"ml/l to umol/kg, {OXYGEN_UMOL_PER_ML} umol/ml and {where}", OXYGEN_UMOL_PER_ML, at
        )
    if name in _OXYGENS and folded in _SPELLINGS["mg l-1"]:
        return Conversion(
            f"mg/l to umol/kg, {OXYGEN_UMOL_PER_MG:.4f} umol/mg and {where}", OXYGEN_UMOL_PER_MG, at
        )
    return None


def density(at: DensityAt, salinity: FloatArray, temperature: FloatArray, pressure: FloatArray) -> FloatArray:
    """Return the density (kg/l) of the volumes in which an amount was measured, shape (n,).

    Reference-composition salinity is close enough here: the atlas anomaly changes density by 2e-5.

    Parameters
    ----------
    at
        Which temperature counts.
    salinity, temperature, pressure
        Practical salinity, in-situ ITS-90 temperature (degC) and sea pressure (dbar), shape (n,).

    """
    reference = gsw.SR_from_SP(np.where((salinity >= 0) & (salinity <= 42), salinity, np.nan))
    if at is DensityAt.LABORATORY:
        kg_m3 = gsw.rho_t_exact(reference, LABORATORY_TEMPERATURE, 0.0)
    else:
        warmth = np.where(np.abs(temperature) < 50.0, temperature, np.nan)
        level = np.where(np.abs(pressure) < 12_000.0, pressure, np.nan)
        kg_m3 = gsw.pot_rho_t_exact(reference, warmth, level, 0.0)
    return np.asarray(kg_m3 / 1000.0, dtype=np.float64)


def scaled(values: FloatArray, how: Conversion, kg_per_litre: FloatArray | None = None) -> FloatArray:
    """Return ``values`` in the registry's unit, shape (n,)."""
    converted = values * how.factor
    if how.density is not DensityAt.NONE:
        if kg_per_litre is None:
            raise ValueError("a conversion from volume to mass needs a density")
        converted = converted / kg_per_litre
    return converted
