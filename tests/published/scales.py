"""Temperature scales: ITS-90 against IPTS-68, and what taking one for the other costs."""

from __future__ import annotations

import gsw
import numpy as np

from pipeline import seawater, units
from pipeline.variables import REGISTRY

from .check import Check, Status

SAUNDERS = "Saunders 1990, WOCE Newsletter 10"


def t90_by_our_reader(t68: float) -> float:
    """Return what the pipeline makes of a temperature delivered in the unit IPTS-68."""
    how = units.conversion(REGISTRY["temperature"], "IPTS-68")
    assert how is not None
    return float(units.scaled(np.array([t68]), how)[0])


def t68_per_t90() -> float:
    return units.T68_PER_T90


def forms_apart() -> float:
    """Return the relative difference of the two published forms, t90 = 0.99976 t68 and t68 = 1.00024 t90."""
    return 0.99976 * units.T68_PER_T90 - 1.0


def scales_apart(t68: float) -> float:
    return t68 - t90_by_our_reader(t68)


def cost_in_sigma0(sp: float, theta: float) -> float:
    salinity = gsw.SR_from_SP(sp)
    right, wrong = (gsw.CT_from_pt(salinity, t) for t in (t90_by_our_reader(theta), theta))
    anomalies = seawater.potential_density_anomaly(salinity, np.array([right, wrong]), 0.0)
    return float(anomalies[0] - anomalies[1])


ROWS = (
    Check("T68 per T90", {}, t68_per_t90, "1.00024", SAUNDERS, Status.VERIFIED),
    Check("relative difference of the two published forms", {}, forms_apart, "0",
          f"{SAUNDERS}; CF definition of sea_water_temperature", Status.VERIFIED, within=5.8e-8),
    *(
        Check("ITS-90 of IPTS-68, degC", {"t68": t68}, t90_by_our_reader, printed,
              "gsw 3.6.23, t90_from_t68", Status.COMPUTED)
        for t68, printed in ((10.0, "9.99760057586"), (20.0, "19.99520115172"), (30.0, "29.99280172759"),
                             (40.0, "39.99040230345"))
    ),
    *(
        Check("IPTS-68 less ITS-90, degC", {"t68": t68}, scales_apart, printed, SAUNDERS, Status.COMPUTED)
        for t68, printed in ((2.0, "0.00048"), (10.0, "0.0024"), (25.0, "0.006"))
    ),
    Check("cost of the wrong scale at 25 degC in sigma0, kg/m3", {"sp": 35.0, "theta": 25.0}, cost_in_sigma0,
          "0.00183", "gsw 3.6.23, sigma0", Status.COMPUTED),
)  # fmt: skip
