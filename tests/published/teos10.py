"""TEOS-10 as our seawater room gives it: the worked example of the GSW documentation, and single points."""

from __future__ import annotations

from typing import TYPE_CHECKING

import gsw
import numpy as np

from pipeline import seawater
from pipeline.tracers import oxygen

from .check import Check, Status

if TYPE_CHECKING:
    from collections.abc import Callable

    from pipeline.tables import FloatArray

DOCUMENTATION = "example of the GSW documentation, gsw 3.6.23"
COMPUTED, VERIFIED = Status.COMPUTED, Status.VERIFIED
# Another compiler may order the terms of a polynomial differently.
ROUNDING = 2e-11

LONGITUDE, LATITUDE = 188.0, 4.0
PRACTICAL = np.array([34.5487, 34.7275, 34.8605, 34.6810, 34.5680, 34.5600])
TEMPERATURE = np.array([28.7856, 28.4329, 22.8103, 10.2600, 6.8863, 4.4036])
PRESSURE = np.array([10.0, 50.0, 125.0, 250.0, 600.0, 1000.0])
ABSOLUTE = np.array([34.7118, 34.8915, 35.0256, 34.8472, 34.7366, 34.7324])
CONSERVATIVE = np.array([28.8099, 28.4392, 22.7862, 10.2262, 6.8272, 4.3236])


def _example(level: float, values: FloatArray) -> float:
    return float(values[int(level)])


def absolute_salinity(level: float) -> float:
    return _example(level, seawater.absolute_salinity(PRACTICAL, PRESSURE, LONGITUDE, LATITUDE))


def conservative_temperature(level: float) -> float:
    return _example(level, seawater.conservative_temperature(ABSOLUTE, TEMPERATURE, PRESSURE))


def potential_temperature(level: float) -> float:
    return _example(level, seawater.potential_temperature(ABSOLUTE, TEMPERATURE, PRESSURE))


def sigma0(level: float) -> float:
    return _example(level, seawater.potential_density_anomaly(ABSOLUTE, CONSERVATIVE, 0.0))


def sigma2(level: float) -> float:
    return _example(level, seawater.potential_density_anomaly(ABSOLUTE, CONSERVATIVE, 2000.0))


def sigma4(level: float) -> float:
    return _example(level, seawater.potential_density_anomaly(ABSOLUTE, CONSERVATIVE, 4000.0))


def depth(level: float) -> float:
    return _example(level, seawater.depth(PRESSURE, LATITUDE))


def spiciness0(level: float) -> float:
    return _example(level, seawater.spiciness0(ABSOLUTE, CONSERVATIVE))


def buoyancy_frequency_squared(level: float) -> float:
    cast = np.zeros(PRESSURE.size, dtype=np.int64)
    latitude = np.full(PRESSURE.size, LATITUDE)
    squared = seawater.buoyancy_frequency_squared(ABSOLUTE, CONSERVATIVE, PRESSURE, latitude, cast)
    return _example(level, 1e3 * squared)


def oxygen_solubility(level: float) -> float:
    """Absolute Salinity and Conservative Temperature stand in for the inputs, as on the page itself."""
    fit = oxygen.BENSON_KRAUSE_UMOL_KG
    return _example(level, oxygen.oxygen_solubility(ABSOLUTE, CONSERVATIVE, np.zeros(PRESSURE.size), fit))


def salinity_at(sp: float, p: float, longitude: float, latitude: float) -> float:
    return float(seawater.absolute_salinity(sp, p, longitude, latitude))


def anomaly_at(sp: float, p: float, longitude: float, latitude: float) -> float:
    return salinity_at(sp, p, longitude, latitude) - float(gsw.SR_from_SP(sp))


def salinity_turned_round(sp: float, p: float, west: float, east: float, latitude: float) -> float:
    return salinity_at(sp, p, west, latitude) - salinity_at(sp, p, east, latitude)


def surface_density(sa: float, ct: float) -> float:
    return 1000.0 + float(seawater.potential_density_anomaly(sa, ct, 0.0))


def heat_of_potential_temperature(sa: float, theta: float) -> float:
    return float(seawater.conservative_temperature(sa, theta, 0.0))


_LEVELS: tuple[tuple[str, Callable[..., float], tuple[str, ...]], ...] = (
    ("Absolute Salinity, g/kg", absolute_salinity,
     ("34.711793738508", "34.891554234269", "35.025619373601", "34.847176981639", "34.736656360712",
      "34.732349392120")),
    ("Conservative Temperature, degC", conservative_temperature,
     ("28.809919826700", "28.439227816091", "22.786176893078", "10.226189266621", "6.827213633480",
      "4.323575748610")),
    ("potential temperature, degC", potential_temperature,
     ("28.783196819671", "28.420983342399", "22.784930399117", "10.230523661096", "6.829230224410",
      "4.324510571846")),
    ("sigma0, kg/m3", sigma0,
     ("21.797900819338", "22.052215404397", "23.892985307894", "26.667608665972", "27.107380455120",
      "27.409748977091")),
    ("sigma2, kg/m3", sigma2,
     ("30.023152223799", "30.283783336283", "32.265556840290", "35.474550881051", "36.067289438048",
      "36.492606494880")),
    ("sigma4, kg/m3", sigma4,
     ("37.900374609835", "38.166979617032", "40.280876075283", "43.896091033422", "44.631677245328",
      "45.171817312020")),
    ("depth, m", depth,
     ("9.944583446945", "49.718089701255", "124.272621940998", "248.470057654859", "595.825348035621",
      "992.091906071999")),
    ("spiciness0, kg/m3", spiciness0,
     ("5.728998558543", "5.749940496782", "4.163547112671", "1.069362556642", "0.426428274444",
      "0.089725188494")),
    ("N2, 1e-3 s-2", buoyancy_frequency_squared,
     ("0.060843209693", "0.235723066151", "0.216599928330", "0.012941204313", "0.008434782795")),
)  # fmt: skip

_SOLUBILITIES = ("194.682543169", "195.613506281", "214.655936023", "273.565283270", "295.158076142",
                 "312.959871663")  # fmt: skip

ROWS = (
    *(
        Check(quantity, {"level": level}, by, printed, DOCUMENTATION, COMPUTED, within=ROUNDING)
        for quantity, by, values in _LEVELS
        for level, printed in enumerate(values)
    ),
    *(
        Check("oxygen solubility, umol/kg", {"level": level}, oxygen_solubility, printed,
              "TEOS-10 page of gsw_O2sol_SP_pt" if level in {0, 5} else DOCUMENTATION,
              VERIFIED if level in {0, 5} else COMPUTED)
        for level, printed in enumerate(_SOLUBILITIES)
    ),
    # The atlas behind it changed since that page was printed; nothing printed binds it tighter than this.
    Check("Absolute Salinity as printed with version 3.04, g/kg", {"level": 0}, absolute_salinity,
          "34.711778344814114", "TEOS-10 page of gsw_SA_from_SP, version 3.04", VERIFIED, within=2e-5),
    Check("density of standard sea water, kg/m3", {"sa": 35.16504, "ct": 0.0}, surface_density,
          "1028.1070215427524", "gsw 3.6.23, rho", COMPUTED, within=1e-9),
    Check("Conservative Temperature of theta, degC", {"sa": 35.16504, "theta": 10.0},
          heat_of_potential_temperature, "9.989811727177", "gsw 3.6.23, CT_from_pt", COMPUTED, within=ROUNDING),
    Check("Absolute Salinity at 172 W less that at 188 E, g/kg",
          {"sp": 35.0, "p": 1000.0, "west": -172.0, "east": 188.0, "latitude": 4.0}, salinity_turned_round,
          "0", "both write one meridian", Status.EXACT, within=0.0),
    # Where longitude and latitude were exchanged, a position is often on land, and nothing complains.
    Check("Absolute Salinity far inland: no NaN, no anomaly, g/kg",
          {"sp": 35.0, "p": 10.0, "longitude": 100.0, "latitude": 50.0}, salinity_at,
          "35.16504", "gsw 3.6.23, SA_from_SP", COMPUTED),
    Check("Absolute less Reference Salinity in the deep North Pacific, g/kg",
          {"sp": 34.7, "p": 4000.0, "longitude": 180.0, "latitude": 45.0}, anomaly_at,
          "0.02305", "gsw 3.6.23, SA_from_SP", COMPUTED, within=5e-5),
)  # fmt: skip
