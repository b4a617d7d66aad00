"""How carbon, boron and water are divided among their forms over pH: what explains a value of the carbonate system."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.tracers.alkalinity import LN10, dissociation
from pipeline.tracers.equilibria import equilibria, validity

if TYPE_CHECKING:
    from pipeline.carbonate_settings import CarbonateSettings
    from pipeline.tables import FloatArray

# pH in situ on the total scale of nearly all ocean water: surface about 8.1, old deep water and oxygen minima down
# to about 7.5 (common practice, no source).
OCEAN_PH = (7.5, 8.2)


@dataclass(frozen=True, slots=True)
class Speciation:
    """Forms over pH, (n,) each, and the constants that divide them."""

    ph: FloatArray  # total scale
    aqueous_co2: FloatArray  # parts of DIC
    bicarbonate: FloatArray
    carbonate: FloatArray
    borate: FloatArray  # borate ion as a part of boron
    hydroxide: FloatArray  # umol/kg
    pk1: float
    pk2: float
    pk_borate: float
    pk_water: float


def speciation(
    ph: FloatArray, salinity: float, temperature: float, pressure: float, settings: CarbonateSettings
) -> Speciation:
    """Return how carbon, boron and water are divided at some values of pH.

    Parameters
    ----------
    ph
        On the total scale, (n,).
    salinity, temperature, pressure
        Practical salinity, degC and dbar of the one water, inside the domains of `equilibria`.
    settings
        Which published constants.

    """
    k = equilibria(np.array([salinity]), np.array([temperature]), np.array([pressure]), settings)
    acids = dissociation(-LN10 * ph, k)
    h = 10.0**-ph
    return Speciation(
        ph=ph,
        aqueous_co2=acids.aqueous_co2,
        bicarbonate=acids.bicarbonate,
        carbonate=acids.carbonate,
        borate=k.borate_k / (k.borate_k + h),
        hydroxide=1e6 * k.water_k / h,
        pk1=_pk(k.k1),
        pk2=_pk(k.k2),
        pk_borate=_pk(k.borate_k),
        pk_water=_pk(k.water_k),
    )


def constants(settings: CarbonateSettings) -> dict[str, str]:
    """Return which published constants these are, by what they are of; boron makes alkalinity and no part here."""
    return {
        "carbonic": settings.carbonic,
        "borate": settings.borate,
        "fluoride": settings.fluoride,
        "bisulfate": settings.bisulfate,
    }


def constants_words(settings: CarbonateSettings) -> str:
    """Return the same in words."""
    return ", ".join(f"{name} {citation}" for name, citation in constants(settings).items())


def outside_words(water: tuple[float, float, float], settings: CarbonateSettings) -> list[str]:
    """Return in a sentence each which constants were not measured for a salinity and temperature, degC."""
    return [
        f"The constants of {fit.citation} were measured for a salinity of {fit.salinity.low:g} to"
        f" {fit.salinity.high:g} and {fit.temperature.low:g} to {fit.temperature.high:g} degC; this water lies outside."
        for fit in validity(settings)
        if not (
            fit.salinity.low <= water[0] <= fit.salinity.high
            and fit.temperature.low <= water[1] <= fit.temperature.high
        )
    ]


def _pk(constant: FloatArray) -> float:
    return float(-np.log10(constant[0]))
