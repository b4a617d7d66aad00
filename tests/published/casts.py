"""The official TEOS-10 check casts, which travel inside the gsw package: every level of all three casts."""

from __future__ import annotations

from functools import cache
from importlib import resources
from typing import TYPE_CHECKING

import numpy as np

from pipeline import seawater
from pipeline.tracers import oxygen

from .check import Check, Status

if TYPE_CHECKING:
    from pipeline.tables import FloatArray

SOURCE = "TEOS-10 check casts (gsw_data_v3_0, 3.06.16), gsw_cv_v3_0.npz in the gsw package"
CASTS = 3


@cache
def _file() -> dict[str, FloatArray]:
    with (
        resources.files("gsw").joinpath("tests", "gsw_cv_v3_0.npz").open("rb") as stream,
        np.load(stream) as stored,
    ):
        names = {f"{name}{end}" for name in PRINTED for end in ("", "_ca")}
        casts = {f"{name}_chck_cast" for name in ("SP", "t", "p", "lat", "long")}
        return {name: np.asarray(stored[name], dtype=np.float64) for name in names | casts}


def _inputs(cast: float) -> tuple[FloatArray, FloatArray, FloatArray, float, float]:
    file, column = _file(), int(cast)
    levels = [file[f"{name}_chck_cast"][:, column] for name in ("SP", "t", "p")]
    position = [float(file[f"{name}_chck_cast"][column]) for name in ("long", "lat")]
    return levels[0], levels[1], levels[2], position[0], position[1]


@cache
def ours(cast: float) -> dict[str, FloatArray]:
    """Return our values of one check cast under the names of the file, each (n_level,)."""
    practical, temperature, pressure, longitude, latitude = _inputs(cast)
    salinity = seawater.absolute_salinity(practical, pressure, longitude, latitude)
    heat = seawater.conservative_temperature(salinity, temperature, pressure)
    theta = seawater.potential_temperature(salinity, temperature, pressure)
    sigma = {
        name: seawater.potential_density_anomaly(salinity, heat, reference)
        for name, reference in seawater.REFERENCE_PRESSURES.items()
    }
    stability = seawater.buoyancy_frequency_squared(
        salinity, heat, pressure, np.full(pressure.size, latitude), np.zeros(pressure.size, dtype=np.int64)
    )
    return {
        "SA_from_SP": salinity,
        "Sstar_from_SP": seawater.preformed_salinity(practical, pressure, longitude, latitude),
        "CT_from_t": heat,
        "pt0_from_t": theta,
        **sigma,
        "spiciness0": seawater.spiciness0(salinity, heat),
        "z_from_p": -seawater.depth(pressure, latitude),
        "n2": stability[:-1],
        "O2sol": oxygen.oxygen_solubility(practical, theta, sigma["sigma0"], oxygen.BENSON_KRAUSE_UMOL_KG),
    }


def largest_difference(variable: str, cast: float) -> float:
    """Return how far we are from the file at worst; infinite where only one of the two has a value."""
    mine, theirs = ours(cast)[variable], _file()[variable][:, int(cast)]
    if not np.array_equal(np.isnan(mine), np.isnan(theirs)):
        return float("inf")
    return float(np.nanmax(np.abs(mine - theirs)))


def levels_compared(variable: str) -> float:
    return float(sum(np.isfinite(ours(cast)[variable]).sum() for cast in range(CASTS)))


def at_level(variable: str, level: float) -> float:
    return float(ours(0)[variable][int(level)])


# Tolerances as the file states them (its own variables `..._ca`), and levels 0, 10, 20, 40 of its first cast, at
# 142 E, 11 N: 0, 176, 909 and 5098 dbar.
PRINTED: dict[str, tuple[float, tuple[str, ...]]] = {
    "SA_from_SP": (
        1.30e-10,
        ("34.468236430490606", "34.98687812873595", "34.70523685435276", "34.86377002371946"),
    ),
    "Sstar_from_SP": (1.30e-10, ()),
    "CT_from_t": (
        6.26e-10,
        ("27.996436412058213", "18.143912352561333", "4.8418804148384185", "1.0291291795169686"),
    ),
    "pt0_from_t": (
        6.05e-10,
        ("27.962", "18.147615154162335", "4.842769286438453", "1.0287495492188543"),
    ),
    "sigma0": (
        2.93e-10,
        ("21.886304450544685", "25.1037473219601", "27.330990307290676", "27.803059835972817"),
    ),
    "sigma2": (
        3.05e-10,
        ("30.133150456258818", "33.615907671170135", "36.3880002758558", "37.0618330852908"),
    ),
    "sigma4": (
        3.17e-10,
        ("38.03051875806409", "41.761915103024194", "45.04306983569518", "45.90542243574555"),
    ),
    "spiciness0": (1.89e-10, ()),
    "z_from_p": (2.29e-8, ("0", "-174.92510738523137", "-901.8572642972814", "-5009.436801740654")),
    "n2": (
        1.6e-14,
        ("2.1815643727513e-05", "1.60034640889942e-04", "6.623742369431e-06", "2.398403743587e-07"),
    ),
    "O2sol": (6.2e-9, ("197.8437359073502", "233.58619350710592", "309.5756816571035", "339.6364870791483")),
}
_SHOWN = (0, 10, 20, 40)

ROWS = (
    *(
        Check(f"{variable}, cast {cast}, all levels: largest difference", {"variable": variable, "cast": cast},
              largest_difference, "0", SOURCE, Status.VERIFIED, within=tolerance)
        for variable, (tolerance, _) in PRINTED.items()
        for cast in range(CASTS)
    ),
    # Two casts of 45 levels and one of 8, so that an empty comparison cannot pass for a good one.
    Check("levels compared", {"variable": "CT_from_t"}, levels_compared, "98", SOURCE, Status.VERIFIED),
    *(
        Check(variable, {"variable": variable, "level": level}, at_level, printed, SOURCE, Status.VERIFIED,
              within=tolerance)
        for variable, (tolerance, values) in PRINTED.items()
        for level, printed in zip(_SHOWN, values, strict=False)
    ),
)  # fmt: skip
