"""PSS-78 and EOS-80: the check values of UNESCO 44 through an independent library, and gsw beside it.

They guard the libraries and the temperature scale more than our code: these tables are on IPTS-68, and the
libraries take ITS-90.
"""

from __future__ import annotations

import warnings

import gsw

from pipeline import seawater as rooms
from pipeline.units import T68_PER_T90

from .check import Check, Status

with warnings.catch_warnings():
    # The library announces at import that gsw replaces it; here it is wanted for being another one.
    warnings.simplefilter("ignore", UserWarning)
    import seawater as eos80

UNESCO = "Fofonoff and Millard 1983, UNESCO Technical Papers in Marine Science 44"
MEMORY, VERIFIED, COMPUTED = Status.FROM_MEMORY, Status.VERIFIED, Status.COMPUTED
C_35_15_0 = 42.914  # conductivity of standard sea water, mS/cm


def salinity_eos80(ratio: float, t68: float, p: float) -> float:
    return float(eos80.salt(ratio, t68 / T68_PER_T90, p))


def salinity_gsw(ratio: float, t68: float, p: float) -> float:
    return float(gsw.SP_from_C(ratio * C_35_15_0, t68 / T68_PER_T90, p))


def conductivity_gsw(s: float, t68: float, p: float) -> float:
    return float(gsw.C_from_SP(s, t68 / T68_PER_T90, p))


def density_eos80(s: float, t68: float, p: float) -> float:
    return float(eos80.dens(s, t68 / T68_PER_T90, p))


def density_anomaly_eos80(s: float, t68: float, p: float) -> float:
    return density_eos80(s, t68, p) - 1000.0


def volume_anomaly_eos80(s: float, t68: float, p: float) -> float:
    return 1.0 / density_eos80(s, t68, p) - 1.0 / density_eos80(35.0, 0.0, p)


def potential_temperature_eos80(s: float, t68: float, p: float) -> float:
    return float(eos80.ptmp(s, t68 / T68_PER_T90, p, 0.0)) * T68_PER_T90


def lapse_rate_eos80(s: float, t68: float, p: float) -> float:
    return float(eos80.adtg(s, t68 / T68_PER_T90, p))


def heat_capacity_eos80(s: float, t68: float, p: float) -> float:
    return float(eos80.cp(s, t68 / T68_PER_T90, p))


def sound_speed_eos80(s: float, t68: float, p: float) -> float:
    return float(eos80.svel(s, t68 / T68_PER_T90, p))


def freezing_point_eos80(s: float, p: float) -> float:
    return float(eos80.fp(s, p)) * T68_PER_T90


def depth_eos80(p: float, latitude: float) -> float:
    return float(eos80.dpth(p, latitude))


def depth_teos10(p: float, latitude: float) -> float:
    return float(rooms.depth(p, latitude))


_DEEP = {"s": 40.0, "t68": 40.0, "p": 10000.0}
# SAL78: the inputs of the last three rows are verified, their printed digits are from memory.
_SALINITIES = (
    (1.888091, 40.0, 10000.0, "40.00000"),
    (1.0, 15.0, 0.0, "35.000000"),
    (1.2, 20.0, 2000.0, "37.245628"),
    (0.65, 5.0, 1500.0, "27.995347"),
)
# The rows at 0 and 30 degC are verified, the others are the library's own output.
_DENSITIES = (
    (0.0, 0.0, 0.0, "999.842594"), (0.0, 0.0, 10000.0, "1045.33710972"),
    (0.0, 5.0, 0.0, "999.96675"), (0.0, 5.0, 10000.0, "1044.12802"),
    (0.0, 25.0, 0.0, "997.04796"), (0.0, 25.0, 10000.0, "1037.90204"),
    (0.0, 30.0, 0.0, "995.65113374"), (0.0, 30.0, 10000.0, "1036.03148891"),
    (35.0, 0.0, 0.0, "1028.10633141"), (35.0, 0.0, 10000.0, "1070.95838408"),
    (35.0, 5.0, 0.0, "1027.67547"), (35.0, 5.0, 10000.0, "1069.48914"),
    (35.0, 25.0, 0.0, "1023.34306"), (35.0, 25.0, 10000.0, "1062.53817"),
    (35.0, 30.0, 0.0, "1021.72863949"), (35.0, 30.0, 10000.0, "1060.55058771"),
)  # fmt: skip

ROWS = (
    *(
        Check("practical salinity (SAL78)", {"ratio": r, "t68": t, "p": p}, by, printed,
              f"{UNESCO}, p. 9", MEMORY)
        for r, t, p, printed in _SALINITIES
        for by in (salinity_eos80, salinity_gsw)
    ),
    Check("conductivity of standard sea water, mS/cm", {"s": 35.0, "t68": 15.0, "p": 0.0}, conductivity_gsw,
          "42.914", "constant of PSS-78, as in the seawater library", VERIFIED),
    # The algorithm sums the anomaly from its own rounded coefficients; here it is a difference of two volumes.
    Check("specific volume anomaly (SVAN), m3/kg", _DEEP, volume_anomaly_eos80, "9.8130210e-6",
          f"{UNESCO}, p. 22", VERIFIED, within=5e-12),
    # The published digits are cut, not rounded: 59.820377.
    Check("density anomaly gamma, kg/m3", _DEEP, density_anomaly_eos80, "59.82037",
          f"{UNESCO}, p. 22", MEMORY, within=1e-5),
    Check("potential temperature (THETA), degC IPTS-68", _DEEP, potential_temperature_eos80, "36.89073",
          f"{UNESCO}, p. 44", VERIFIED),
    Check("adiabatic lapse rate (ATG), degC/dbar", _DEEP, lapse_rate_eos80, "3.255976e-4",
          f"{UNESCO}, p. 36", VERIFIED),
    Check("heat capacity (CPSW), J/(kg degC)", _DEEP, heat_capacity_eos80, "3849.500", UNESCO, VERIFIED),
    Check("sound speed (SVEL), m/s", _DEEP, sound_speed_eos80, "1731.995", f"{UNESCO}, p. 49", VERIFIED),
    # The seventh decimal is a 5, so that a bit decides how it rounds.
    Check("freezing point (TF), degC IPTS-68", {"s": 40.0, "p": 500.0}, freezing_point_eos80, "-2.588567",
          f"{UNESCO}, p. 30", VERIFIED, within=1e-6),
    Check("depth (DEPTH), m", {"p": 10000.0, "latitude": 30.0}, depth_eos80, "9712.653",
          f"{UNESCO}, p. 28 or 30", VERIFIED),
    Check("depth by TEOS-10 for the same pressure, m", {"p": 10000.0, "latitude": 30.0}, depth_teos10,
          "9713.7352", "gsw 3.6.23, z_from_p", COMPUTED),
    *(
        Check("density, kg/m3", {"s": s, "t68": t, "p": p}, density_eos80, printed,
              f"{UNESCO}, p. 22" if t in {0.0, 30.0} else "seawater 3.3.5, dens",
              VERIFIED if t in {0.0, 30.0} else COMPUTED)
        for s, t, p, printed in _DENSITIES
    ),
)  # fmt: skip
