"""Which quantities of the registry can be properties of a mixture, and what else than mixing changes them."""

from __future__ import annotations

from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from pipeline.tracers import nutrients
from pipeline.tracers.anomalies import ALKALINITY_PER_CALCIUM_CARBONATE, alkalinity_per_nitrate
from pipeline.tracers.isotopes import organic_delta
from pipeline.tracers.stoichiometry import stoichiometry
from pipeline.variables import MEASURED, REGISTRY, SEAWATER, TRACERS, Kind

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    from pipeline.settings import TracerSettings
    from pipeline.tables import FloatArray

_AMOUNTS = frozenset(
    {"umol kg-1", "nmol kg-1", "pmol kg-1", "fmol kg-1", "ug kg-1", "g kg-1", "tritium_unit"}
)
# Carried by the water itself, so that shares of water are shares of them.
_BY_WATER = frozenset(
    {
        "conservative_temperature",
        "potential_temperature",
        "practical_salinity",
        "ctd_salinity",
        "bottle_salinity",
        "delta_oxygen_18",
    }
)
# Solubility curves with temperature and salinity, so the solubility of a mixture is not the mean; AOU
# inherits that.
_CURVED = frozenset({"oxygen_solubility", "aou", "preformed_phosphate", "preformed_nitrate"})


def mixes_in_proportion(name: str) -> bool:
    """Return whether ``name`` is a quantity of the registry whose value in a mixture is the mean of its parts.

    Amounts per mass, salinities and Conservative Temperature do (potential temperature nearly).
    Temperature in situ, densities, pH, partial pressures and isotope ratios of a dissolved element do
    not: the latter mix in proportion to the element.
    """
    if name not in {*MEASURED, *SEAWATER, *TRACERS}:
        return False
    variable = REGISTRY[name]
    if variable.kind is not Kind.NUMBER or name.endswith("_error") or name in _CURVED:
        return False
    return variable.unit in _AMOUNTS or name in _BY_WATER


# One quantity under several names, of which a mixture needs only one.
_SAME = (
    frozenset(
        {"practical_salinity", "ctd_salinity", "bottle_salinity", "absolute_salinity", "preformed_salinity"}
    ),
    frozenset({"conservative_temperature", "potential_temperature"}),
    frozenset({"oxygen", "bottle_oxygen", "ctd_oxygen"}),
    frozenset({"nitrate", "nitrate_plus_nitrite"}),
)

# What a set has to list in place of what published tables give: these mix in proportion only nearly, and of the
# samples the conservative ones are always there. A source may give either.
LISTED_AS: Mapping[str, str] = MappingProxyType(
    {"potential_temperature": "conservative_temperature", "practical_salinity": "preformed_salinity"}
)

# Isotope ratios, and the amount in proportion to which each mixes: its row in the equations is the product of both.
AMOUNT_OF: Mapping[str, str] = MappingProxyType({"delta_carbon_13": "dic"})

PROPERTIES: tuple[str, ...] = tuple(
    name for name in REGISTRY if mixes_in_proportion(name) or name in AMOUNT_OF
)


def same_quantity(one: str, other: str) -> bool:
    """Return whether two properties are one quantity, so that the second says nothing new."""
    return one == other or any({one, other} <= names for names in _SAME)


def respiration_ratios(settings: TracerSettings, silicate_per_phosphate: float = 0.0) -> Mapping[str, float]:
    """Return the change of each property per umol/kg of phosphate that respiration releases.

    Properties that are not named do not change. Alkalinity falls as nitrate rises, by as much as the settings'
    form of potential alkalinity puts back, which so is kept (Brewer et al. 1975, 1 per nitrate, from memory). Opal
    dissolves beside respiration and not because of it: its ratio is the catalogue's choice. Of an isotope
    ratio it is the product with its amount that changes: by the carbon of organic matter times its carbon-13.

    Parameters
    ----------
    settings
        Names the stoichiometry, the forms of N* and of potential alkalinity, and the carbon-13 of organic matter.
    silicate_per_phosphate
        umol/kg of silicic acid per umol/kg of phosphate.

    """
    chosen = stoichiometry(settings.stoichiometry)
    oxygen, nitrate, phosphate = -chosen.oxygen.value, chosen.nitrogen.value, 1.0
    return MappingProxyType(
        {
            "oxygen": oxygen,
            "bottle_oxygen": oxygen,
            "ctd_oxygen": oxygen,
            "phosphate": phosphate,
            "nitrate": nitrate,
            "nitrate_plus_nitrite": nitrate,
            "dic": chosen.carbon.value,
            "alkalinity": -nitrate * alkalinity_per_nitrate(settings.potential_alkalinity),
            "delta_carbon_13": chosen.carbon.value * organic_delta(settings),
            "silicate": silicate_per_phosphate,
            "broecker_no": _change(nutrients.no_broecker_1974, oxygen, nitrate),
            "broecker_po": _change(nutrients.po_broecker_1974, oxygen, phosphate),
            "po4_star": _change(nutrients.po4_star_broecker_1991, oxygen, phosphate),
            "n_star": _change(nutrients.N_STAR[nutrients.NStarForm(settings.n_star)], nitrate, phosphate),
            "si_star": _change(nutrients.si_star_sarmiento_2004, silicate_per_phosphate, nitrate),
        }
    )


# In how many umol/kg each further unknown is counted in the equations: about as much as waters differ by, so that the
# condition number, which depends on it, weighs it like a share (our choice, no source).
PROCESS_UNITS: Mapping[str, float] = MappingProxyType({"respiration": 1.0, "calcium_carbonate": 100.0})


def calcium_carbonate_ratios(settings: TracerSettings) -> Mapping[str, float]:
    """Return the change of each property per umol/kg of calcium carbonate that dissolves.

    Carbon and charge are exact. Calcium carbonate has the carbon-13 of the mean ocean's DIC, without
    significant fractionation (Humphreys et al. 2016); that is what the product of DIC and carbon-13 changes by.
    """
    return MappingProxyType(
        {
            "dic": 1.0,
            "alkalinity": ALKALINITY_PER_CALCIUM_CARBONATE,
            "delta_carbon_13": settings.mean_delta_carbon_13,
        }
    )


def _change(tracer: Callable[[FloatArray, FloatArray], FloatArray], first: float, second: float) -> float:
    """Return how much a tracer changes, whose parts change by ``first`` and ``second``."""
    after, before = tracer(np.array([first, 0.0]), np.array([second, 0.0]))
    return float(after - before)


def ratios_of(properties: Sequence[str], ratios: Mapping[str, float]) -> list[float]:
    """Return the ratios of ``properties`` in their order, zero for those that do not change."""
    return [ratios.get(name, 0.0) for name in properties]
