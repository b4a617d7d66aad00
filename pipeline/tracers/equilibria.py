"""Equilibrium constants of the acids in sea water, and the totals that follow salinity: PyCO2SYS, every option stated.

PyCO2SYS is loaded when constants are first asked for, so that a cruise without carbon pays nothing for it.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from pipeline.carbonate_settings import COLDEST, WARMEST
from pipeline.seawater import Domain

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from pipeline.carbonate_settings import CarbonateSettings
    from pipeline.tables import FloatArray

# Where constants are evaluated at all: wider than the sea. Whether a published fit reaches that far is another
# matter, and is told by `validity`.
SALINITY = Domain(1.0, 50.0)
TEMPERATURE = Domain(COLDEST, WARMEST)  # degC
PRESSURE = Domain(-10.0, 12_000.0)  # dbar

# What PyCO2SYS calls the published constants (its manual, Table 1).
_CARBONIC = MappingProxyType({"lueker_2000": 10, "sulpis_2020": 16, "roy_1993": 1, "dickson_millero_1987": 4})
_BORATE = MappingProxyType({"uppstrom_1974": 1, "lee_2010": 2})
_FLUORIDE = MappingProxyType({"dickson_riley_1979": 1, "perez_fraga_1987": 2})
_BISULFATE = MappingProxyType({"dickson_1990": 1})
CARBONIC_NAMES = tuple(_CARBONIC)
_TOTAL_SCALE, _GAS_CONSTANT_CODATA_2018, _NO_BUFFERS, _NO_PRESSURE_ON_GAS = 1, 3, 0, 0
_ATMOSPHERE = 1.0  # atm


@dataclass(frozen=True, slots=True)
class Validity:
    """Where the measurements lie that a constant was fitted to."""

    citation: str
    salinity: Domain
    temperature: Domain  # degC
    status: str  # how the limits are known


_READ, _MEMORY = "verified", "from memory"
VALIDITY: Mapping[str, Validity] = MappingProxyType(
    {
        "lueker_2000": Validity("Lueker et al. 2000", Domain(19, 43), Domain(2, 35), _READ),
        "sulpis_2020": Validity("Sulpis et al. 2020", Domain(30.7, 37.6), Domain(-1.7, 31.8), _MEMORY),
        "roy_1993": Validity("Roy et al. 1993", Domain(5, 45), Domain(0, 45), _READ),
        "dickson_millero_1987": Validity("Dickson and Millero 1987", Domain(20, 40), Domain(2, 35), _MEMORY),
        "perez_fraga_1987": Validity("Perez and Fraga 1987", Domain(10, 40), Domain(9, 33), _READ),
        "dickson_1990": Validity("Dickson 1990 (bisulfate)", Domain(5, 45), Domain(0, 45), _READ),
    }
)


@dataclass(frozen=True, slots=True)
class Equilibria:
    """Constants on the total scale, but bisulfate and fluoride on the free scale, mol/kg; totals, umol/kg; all (n,)."""

    k0: FloatArray  # mol/kg/atm
    k1: FloatArray
    k2: FloatArray
    borate_k: FloatArray
    water_k: FloatArray  # (mol/kg)^2
    bisulfate_k: FloatArray
    fluoride_k: FloatArray
    phosphoric_k1: FloatArray
    phosphoric_k2: FloatArray
    phosphoric_k3: FloatArray
    silicic_k: FloatArray
    ammonium_k: FloatArray
    sulfide_k: FloatArray
    calcite_k: FloatArray  # (mol/kg)^2
    aragonite_k: FloatArray
    fugacity_factor: FloatArray  # fCO2 over pCO2
    borate: FloatArray
    sulfate: FloatArray
    fluoride: FloatArray
    calcium: FloatArray
    silicate: FloatArray
    phosphate: FloatArray
    ammonia: FloatArray
    sulfide: FloatArray

    def take(self, rows: NDArray[np.int64]) -> Equilibria:
        """Return those of some rows."""
        return Equilibria(**{f.name: getattr(self, f.name)[rows] for f in fields(self)})

    def scaled(self, factors: Mapping[str, float]) -> Equilibria:
        """Return the same with some of them multiplied."""
        return replace(self, **{name: getattr(self, name) * factor for name, factor in factors.items()})

    @property
    def free_per_total(self) -> FloatArray:
        """Free hydrogen ion over hydrogen ion on the total scale, (n,)."""
        return 1.0 / (1.0 + 1e-6 * self.sulfate / self.bisulfate_k)

    @property
    def total_less_seawater_scale(self) -> FloatArray:
        """PH on the total scale less pH on the seawater scale, (n,)."""
        sulfate = 1e-6 * self.sulfate / self.bisulfate_k
        fluoride = 1e-6 * self.fluoride / self.fluoride_k
        found: FloatArray = np.log10((1.0 + sulfate + fluoride) / (1.0 + sulfate))
        return found


def equilibria(
    salinity: FloatArray,
    temperature: FloatArray,
    pressure: FloatArray,
    settings: CarbonateSettings,
    *,
    silicate: FloatArray | float = 0.0,
    phosphate: FloatArray | float = 0.0,
    ammonia: FloatArray | float = 0.0,
    sulfide: FloatArray | float = 0.0,
) -> Equilibria:
    """Return constants and totals of sea water.

    Parameters
    ----------
    salinity, temperature, pressure
        Practical salinity, temperature (degC) and sea pressure (dbar), each (n,), inside the domains above.
    settings
        Which published constants.
    silicate, phosphate, ammonia, sulfide
        Their totals, umol/kg, (n,) or one for all.

    References
    ----------
    PyCO2SYS: Humphreys et al. 2022, GMD 15:15. CO2 solubility Weiss 1974; boric acid Dickson 1990; water, phosphoric
    and silicic acid Millero 1995 after Yao and Millero 1995; calcite and aragonite Mucci 1983; pressure Millero 1995.
    The hydrostatic pressure is in no gas: the solubility is that at the surface, whatever the pressure on the acids.

    """
    import PyCO2SYS  # noqa: PLC0415 - 70 ms that only a cruise with carbon needs

    shape = np.shape(salinity)
    found = PyCO2SYS.sys(
        salinity=salinity,
        temperature=temperature,
        pressure=pressure,
        total_silicate=0.0,
        total_phosphate=0.0,
        total_ammonia=0.0,
        total_sulfide=0.0,
        opt_k_carbonic=_CARBONIC[settings.carbonic],
        opt_total_borate=_BORATE[settings.borate],
        opt_k_fluoride=_FLUORIDE[settings.fluoride],
        opt_k_bisulfate=_BISULFATE[settings.bisulfate],
        opt_pH_scale=_TOTAL_SCALE,
        opt_gas_constant=_GAS_CONSTANT_CODATA_2018,
        opt_buffers_mode=_NO_BUFFERS,
        opt_pressured_kCO2=_NO_PRESSURE_ON_GAS,
        pressure_atmosphere=_ATMOSPHERE,
    )
    given = {"silicate": silicate, "phosphate": phosphate, "ammonia": ammonia, "sulfide": sulfide}
    return Equilibria(
        **{name: np.asarray(found[theirs], dtype=np.float64) for name, theirs in _THEIR_NAMES.items()},
        **{
            name: np.broadcast_to(np.asarray(total, dtype=np.float64), shape) for name, total in given.items()
        },
    )


_THEIR_NAMES = MappingProxyType(
    {
        "k0": "k_CO2",
        "k1": "k_carbonic_1",
        "k2": "k_carbonic_2",
        "borate_k": "k_borate",
        "water_k": "k_water",
        "bisulfate_k": "k_bisulfate",
        "fluoride_k": "k_fluoride",
        "phosphoric_k1": "k_phosphoric_1",
        "phosphoric_k2": "k_phosphoric_2",
        "phosphoric_k3": "k_phosphoric_3",
        "silicic_k": "k_silicate",
        "ammonium_k": "k_ammonia",
        "sulfide_k": "k_sulfide",
        "calcite_k": "k_calcite",
        "aragonite_k": "k_aragonite",
        "fugacity_factor": "fugacity_factor",
        "borate": "total_borate",
        "sulfate": "total_sulfate",
        "fluoride": "total_fluoride",
        "calcium": "total_calcium",
    }
)


def validity(settings: CarbonateSettings) -> tuple[Validity, ...]:
    """Return where the chosen constants were measured; a fit whose limits are not known is not among them."""
    chosen = (settings.carbonic, settings.fluoride, settings.bisulfate)
    return tuple(VALIDITY[name] for name in chosen if name in VALIDITY)
