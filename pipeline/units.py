"""Units as delivered files spell them, and the conversions to the registry's unit.

Everything inside the pipeline is in the unit of the registry; this is the one edge where units change.
A conversion from an amount per volume to one per mass needs a density, which the caller computes at
the temperature that ``Conversion.density`` names.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from enum import StrEnum
from functools import lru_cache
from typing import TYPE_CHECKING

import gsw
import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.variables import Variable

    FloatArray = NDArray[np.float64]

# Saunders 1990, WOCE Newsletter 10: t68 = 1.00024 t90.
T68_PER_T90 = 1.00024

# The same: t68 = t48 - 4.4e-6 t48 (100 - t48).
T68_OF_T48 = 4.4e-6

ZERO_CELSIUS = 273.15  # K, by definition

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
    DRAW = (
        "draw"  # oxygen: when the sample was drawn, where that is known, else potential (Jiang et al. 2022)
    )
    POTENTIAL = "potential"  # oxygen of a sensor: Thierry et al., doi 10.13155/39795


class Scale(StrEnum):
    """The temperature scale that values are on."""

    ITS_90 = "ITS-90"
    IPTS_68 = "IPTS-68"
    IPTS_48 = "IPTS-48"


class Measure(StrEnum):
    """What kind of thing a unit measures; units of one measure differ by a factor."""

    AMOUNT_PER_MASS = "amount per mass"
    AMOUNT_PER_VOLUME = "amount per volume"
    GAS_PER_VOLUME = "volume of gas per volume"
    MASS_PER_VOLUME = "mass per volume"
    MASS_PER_MASS = "mass per mass"
    PRESSURE = "pressure"
    TEMPERATURE = "temperature"
    LENGTH = "length"
    NUMBER = "number"
    PART = "part"
    TRITIUM = "tritium"
    NORTH = "degrees of latitude"
    EAST = "degrees of longitude"


@dataclass(frozen=True, slots=True)
class Unit:
    """One unit: ``value * factor + offset`` is the value in the base unit of its measure."""

    name: str  # as the registry and UDUNITS write it
    measure: Measure
    factor: float
    spellings: tuple[str, ...]  # folded, beside the name itself
    offset: float = 0.0
    scale: Scale | None = None


# Base units: umol kg-1, umol l-1, ml l-1, mg l-1, ug kg-1, dbar, degree_C, m, 1 and 1e-3.
# Spellings are folded as ``folded`` does. Common practice, no source: as found in files.
# fmt: off
UNITS: tuple[Unit, ...] = (
    Unit("umol kg-1", Measure.AMOUNT_PER_MASS, 1.0, ("UMO/KG", "UMOL/KGR", "UM/KG")),
    Unit("mol kg-1", Measure.AMOUNT_PER_MASS, 1e6, ()),
    Unit("mmol kg-1", Measure.AMOUNT_PER_MASS, 1e3, ("UMOL/G",)),
    Unit("nmol kg-1", Measure.AMOUNT_PER_MASS, 1e-3, ("NM/KG",)),
    Unit("pmol kg-1", Measure.AMOUNT_PER_MASS, 1e-6, ("PM/KG",)),
    Unit("fmol kg-1", Measure.AMOUNT_PER_MASS, 1e-9, ("FM/KG",)),
    Unit("umol l-1", Measure.AMOUNT_PER_VOLUME, 1.0, ("UM/L", "UM", "UG-AT/L", "UGAT/L", "UG-ATOM/L", "UGATOM/L",
                                                      "MG-AT/M3", "MGAT/M3")),
    Unit("mmol m-3", Measure.AMOUNT_PER_VOLUME, 1.0, ("MM/M3",)),
    Unit("mol m-3", Measure.AMOUNT_PER_VOLUME, 1e3, ("MMOL/L",)),
    Unit("umol m-3", Measure.AMOUNT_PER_VOLUME, 1e-3, ("NMOL/L",)),
    Unit("mol l-1", Measure.AMOUNT_PER_VOLUME, 1e6, ()),
    Unit("ml l-1", Measure.GAS_PER_VOLUME, 1.0, ("CM3/L", "CC/L")),
    Unit("mg l-1", Measure.MASS_PER_VOLUME, 1.0, ("G/M3",)),
    Unit("mg m-3", Measure.MASS_PER_VOLUME, 1e-3, ("UG/L",)),
    Unit("kg m-3", Measure.MASS_PER_VOLUME, 1e3, ("G/L",)),
    Unit("ug kg-1", Measure.MASS_PER_MASS, 1.0, ()),
    Unit("mg kg-1", Measure.MASS_PER_MASS, 1e3, ()),
    Unit("g kg-1", Measure.MASS_PER_MASS, 1e6, ()),
    Unit("degree_C", Measure.TEMPERATURE, 1.0, ("DEGC", "DEGREEC", "DEGREESC", "DEGREECELSIUS", "DEGREESCELSIUS",
                                                "DEGCELSIUS", "CELSIUS", "C", "°C", "ºC", "CEL")),
    Unit("K", Measure.TEMPERATURE, 1.0, ("KELVIN", "DEGK", "DEGREEK", "DEGREEKELVIN"), -ZERO_CELSIUS),
    Unit("ITS-90", Measure.TEMPERATURE, 1.0, ("ITS90", "ITS-1990", "DEGCITS-90", "ITS-90DEGC", "DEGCITS90",
                                              "T90"), scale=Scale.ITS_90),
    Unit("IPTS-68", Measure.TEMPERATURE, 1.0, ("IPTS68", "ITPS-68", "DEGCIPTS-68", "IPTS-68DEGC",
                                               "IPTS-1968", "T68"), scale=Scale.IPTS_68),
    Unit("IPTS-48", Measure.TEMPERATURE, 1.0, ("IPTS48", "DEGCIPTS-48", "IPTS-1948", "ITS-48", "T48"),
         scale=Scale.IPTS_48),
    Unit("dbar", Measure.PRESSURE, 1.0, ("DBARS", "DB", "DECIBAR", "DECIBARS")),
    Unit("Pa", Measure.PRESSURE, 1e-4, ("PASCAL", "PASCALS")),
    Unit("hPa", Measure.PRESSURE, 1e-2, ("MBAR", "MILLIBAR", "HECTOPASCAL")),
    Unit("kPa", Measure.PRESSURE, 0.1, ("KILOPASCAL", "CBAR")),
    Unit("MPa", Measure.PRESSURE, 1e2, ("MEGAPASCAL",)),
    Unit("bar", Measure.PRESSURE, 10.0, ("BARS",)),
    Unit("psi", Measure.PRESSURE, 0.6894757293168361, ("PSIA", "LBF/IN2")),
    Unit("uatm", Measure.PRESSURE, 1.01325e-5, ("MICROATM", "MICROATMOSPHERE")),
    Unit("m", Measure.LENGTH, 1.0, ("METERS", "METRES", "METER", "METRE")),
    Unit("km", Measure.LENGTH, 1e3, ()),
    Unit("1", Measure.NUMBER, 1.0, ("PSS-78", "PSS78", "PSU", "PSS", "NONE", "N/A", "UNITLESS", "TOTALSCALE", "TOTAL",
                                    "SWS", "DIMENSIONLESS")),
    Unit("1e-3", Measure.PART, 1.0, ("/MILLE", "PERMIL", "PERMILLE", "O/OO", "PERMILL", "‰", "0.001", "PPT")),
    Unit("percent", Measure.PART, 10.0, ("PERCNT", "%", "%TRANS")),
    Unit("tritium_unit", Measure.TRITIUM, 1.0, ("TU",)),
    Unit("degree_north", Measure.NORTH, 1.0, ("DEG", "DEGREE", "DEGREES", "DEGREESNORTH", "DEGREESN", "DEGREEN",
                                              "DECDEG", "DECIMALDEGREES", "DEGREEEAST", "DEGREESEAST")),
    Unit("degree_east", Measure.EAST, 1.0, ("DEG", "DEGREE", "DEGREES", "DEGREESEAST", "DEGREESE", "DEGREEE",
                                            "DECDEG", "DECIMALDEGREES")),
)
# fmt: on

_REWRITTEN = (
    (r"[µμ]", "u"),
    (r"⁻", "-"),
    (r"¹", "1"),
    (r"³", "3"),
    (r"[\s\"'_()·*^,]", ""),
    (r"(?<!\d)\.|\.(?!\d)", ""),  # a product, and no decimal point
    (r"(?i)micro[-]?(?=mol|gram)", "u"),
    (r"(?i)nano(?=mol)", "n"),
    (r"(?i)milli(?=mol|gram|lit)", "m"),
    (r"(?i)moles?", "mol"),
    (r"(?i)kilogram(me)?s?", "kg"),
    (r"(?i)gram(me)?s?", "g"),
    (r"(?i)lit(er|re)s?|dm3", "l"),
    (r"(?i)per(?=(kg|l|m3)$)", "/"),
    (r"(?i)(kg|l|g)-1$", r"/\1"),
    (r"(?i)dm-3$", "/l"),
    (r"(?i)(m|cm)-3$", r"/\g<1>3"),
)


@lru_cache(maxsize=4096)
def folded(spelling: str) -> str:
    """Return a spelling in the one form in which spellings are compared: ``µmol kg⁻¹`` as ``UMOL/KG``."""
    text = spelling
    for pattern, instead in _REWRITTEN:
        text = re.sub(pattern, instead, text)
    return text.upper()


_BY_NAME = {unit.name: unit for unit in UNITS}
_BY_SPELLING: dict[str, list[Unit]] = {}
for _unit in UNITS:
    for _spelling in (folded(_unit.name), *_unit.spellings):
        _BY_SPELLING.setdefault(_spelling, []).append(_unit)


def unit_of(spelling: str, like: Unit | None = None) -> Unit | None:
    """Return the unit that a file spells so, None where none does; ``like`` chooses among units of one spelling."""
    meant = _BY_SPELLING.get(folded(spelling), [])
    same = [unit for unit in meant if like is not None and unit.measure is like.measure]
    return next(iter(same or meant), None)


@dataclass(frozen=True, slots=True)
class Conversion:
    """How delivered values become the registry's: ``value * factor + offset``, per volume ``/ density``.

    Temperatures of an older scale are brought to ITS-90 last.
    """

    words: str
    factor: float = 1.0
    density: DensityAt = DensityAt.NONE
    offset: float = 0.0
    scale: Scale | None = None

    @property
    def changes(self) -> bool:
        """Whether values are changed at all."""
        scaled_up = self.factor != 1.0 or self.offset != 0.0 or self.density is not DensityAt.NONE
        return scaled_up or self.scale in {Scale.IPTS_68, Scale.IPTS_48}


SAME = Conversion("")

# A sensor's raw signal: known for what it is, but no quantity of the registry.
RAW_SIGNALS = frozenset({"0-5VDC", "0-5V", "VOLTS", "VOLT", "V", "VDC"})

_TO_ITS_90 = {
    Scale.IPTS_68: "IPTS-68 to ITS-90, divided by 1.00024 (Saunders 1990)",
    Scale.IPTS_48: "IPTS-48 to IPTS-68, less 4.4e-6 t (100 - t), then to ITS-90, divided by 1.00024 (Saunders 1990)",
}
_DENSITIES = {
    "ctd_oxygen": DensityAt.POTENTIAL,
    "bottle_oxygen": DensityAt.DRAW,
    **dict.fromkeys(
        ("silicate", "nitrate", "nitrite", "nitrate_plus_nitrite", "phosphate", "ammonium"),
        DensityAt.LABORATORY,
    ),
}
DENSITY_WORDS = {
    DensityAt.POTENTIAL: "potential density at 0 dbar",
    DensityAt.DRAW: "density at the draw temperature where delivered, else potential density at 0 dbar",
    DensityAt.LABORATORY: "density at the temperature of the laboratory",
}
# Umol of oxygen per base unit of a measure.
_OXYGEN = {
    Measure.AMOUNT_PER_VOLUME: (1.0, ""),
    Measure.GAS_PER_VOLUME: (OXYGEN_UMOL_PER_ML, f"{OXYGEN_UMOL_PER_ML} umol/ml and "),
    Measure.MASS_PER_VOLUME: (OXYGEN_UMOL_PER_MG, f"{OXYGEN_UMOL_PER_MG:.4f} umol/mg and "),
}


def conversion(variable: Variable, spelling: str) -> Conversion | None:
    """Return how values of ``variable`` delivered in the unit ``spelling`` become the registry's.

    None where the unit cannot be read, or is not one of this quantity. An empty spelling means
    the registry's unit.
    """
    wanted = _BY_NAME.get(variable.unit)
    if not spelling.strip() or folded(spelling) == folded(variable.exchange_unit or variable.unit):
        return SAME
    given = unit_of(spelling, wanted)
    if wanted is None or given is None:
        return None
    if variable.unit == "1" and given.name in {"1", "1e-3"} and "salinity" in variable.name:
        return SAME  # practical salinity is a number near 35 under either
    if given.measure is not wanted.measure:
        return _per_volume(variable.name, given) if wanted.name == "umol kg-1" else None
    words = f"{given.name} to {wanted.name}"
    if wanted.measure is Measure.TEMPERATURE:
        parts = [words] if given.offset else []
        if given.scale in _TO_ITS_90:
            parts.append(_TO_ITS_90[given.scale])
        return Conversion("; ".join(parts), offset=given.offset, scale=given.scale)
    if given.factor == wanted.factor:
        return SAME
    return Conversion(words, given.factor / wanted.factor)


def _per_volume(name: str, given: Unit) -> Conversion | None:
    """Return how an amount per volume becomes one per mass, None where the quantity has no such convention."""
    at = _DENSITIES.get(name)
    factor, by = _OXYGEN.get(given.measure, (0.0, "")) if name.endswith("_oxygen") else (1.0, "")
    if at is None or not factor or (not by and given.measure is not Measure.AMOUNT_PER_VOLUME):
        return None
    link = f", {by}" if by else " with "
    return Conversion(f"{given.name} to umol kg-1{link}{DENSITY_WORDS[at]}", given.factor * factor, at)


def is_raw_signal(spelling: str) -> bool:
    """Return whether a unit is that of a sensor's raw signal."""
    return folded(spelling) in RAW_SIGNALS


def density(at: DensityAt, salinity: FloatArray, temperature: FloatArray, pressure: FloatArray) -> FloatArray:
    """Return the density at 0 dbar (kg/l) of the volumes in which an amount was measured, shape (n,).

    Reference-composition salinity is close enough here: the atlas anomaly changes density by 2e-5.

    Parameters
    ----------
    at
        Potential density, or the density at the temperature that the water had on deck or in the laboratory.
    salinity
        Practical salinity, (n,).
    temperature, pressure
        ITS-90 temperature (degC) and the sea pressure (dbar) where the water had it, (n,); on deck and in the
        laboratory there is none.

    """
    reference = gsw.SR_from_SP(np.where((salinity >= 0) & (salinity <= 42), salinity, np.nan))
    warmth = np.where(np.abs(temperature) < 50.0, temperature, np.nan)
    below = pressure if at is DensityAt.POTENTIAL else np.zeros(np.shape(pressure))
    level = np.where(np.abs(below) < 12_000.0, below, np.nan)
    kg_m3 = gsw.pot_rho_t_exact(reference, warmth, level, 0.0)
    return np.asarray(kg_m3 / 1000.0, dtype=np.float64)


def scaled(values: FloatArray, how: Conversion, kg_per_litre: FloatArray | None = None) -> FloatArray:
    """Return ``values`` in the registry's unit, shape (n,)."""
    converted = values * how.factor + how.offset if how.offset else values * how.factor
    if how.scale is Scale.IPTS_48:
        converted = converted - T68_OF_T48 * converted * (100.0 - converted)
    if how.scale in {Scale.IPTS_48, Scale.IPTS_68}:
        converted = converted / T68_PER_T90
    if how.density is not DensityAt.NONE:
        if kg_per_litre is None:
            raise ValueError("a conversion from volume to mass needs a density")
        converted = converted / kg_per_litre
    return converted
