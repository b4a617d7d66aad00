"""Properties of sea water by TEOS-10 through gsw: salinities, temperatures, densities, depth, stability.

Nothing here judges whether a value is plausible. What cannot be computed is NaN, and never an exception.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import gsw
import numpy as np
import numpy.typing as npt

from pipeline.tables import cast_groups

if TYPE_CHECKING:
    from collections.abc import Callable

    import pyarrow as pa

    from pipeline.tables import FloatArray


@dataclass(frozen=True, slots=True)
class Domain:
    """Closed interval of an input inside which a function is evaluated."""

    low: float
    high: float

    def holds(self, values: FloatArray) -> npt.NDArray[np.bool_]:
        """Return where ``values`` lie inside, any shape; NaN does not."""
        return (values >= self.low) & (values <= self.high)


# Wider than the ocean and than the oceanographic range of TEOS-10 (0 to 42 g/kg, -6 to 40 degC; IOC, SCOR
# and IAPSO 2010), and narrow enough that gsw's iterations still invert to 1e-12 degC everywhere inside. A
# value between the two ranges is computed and is for the checks to judge. Outside, gsw extrapolates
# polynomials without saying so.
PRACTICAL_SALINITY = Domain(0.0, 60.0)
ABSOLUTE_SALINITY = Domain(0.0, 61.0)  # g/kg
TEMPERATURE = Domain(-6.0, 50.0)  # degC, in situ or Conservative
PRESSURE = Domain(-10.0, 12_000.0)  # dbar; a sensor in air reads a little below 0, and -10.13 is a vacuum
LATITUDE = Domain(-90.0, 90.0)
# Both customs of writing a longitude. The bound also keeps the process alive: gsw reads outside its atlas
# for an infinite longitude and crashes (gsw 3.6.23).
LONGITUDE = Domain(-180.0, 360.0)

REFERENCE_PRESSURES = {"sigma0": 0.0, "sigma2": 2000.0, "sigma4": 4000.0}  # dbar


def columns(table: pa.Table, usable: Callable[[str], FloatArray]) -> dict[str, FloatArray]:
    """Return the TEOS-10 columns of a table of samples or of CTD levels.

    Parameters
    ----------
    table
        n_row rows; its columns ``expocode``, ``station`` and ``cast`` say which rows are one cast.
    usable
        From a registry name to the values that may be used, (n_row,), NaN for the others. Asked for
        ``practical_salinity``, ``temperature`` (ITS-90), ``pressure``, ``latitude`` and ``longitude``.

    Returns
    -------
    dict
        From registry name to values, each (n_row,), NaN where something that is needed is missing.

    """
    names = ("practical_salinity", "temperature", "pressure", "latitude", "longitude")
    practical, temperature, pressure, latitude, longitude = (usable(name) for name in names)
    salinity = absolute_salinity(practical, pressure, longitude, latitude)
    heat = conservative_temperature(salinity, temperature, pressure)
    return {
        "absolute_salinity": salinity,
        "preformed_salinity": preformed_salinity(practical, pressure, longitude, latitude),
        "conservative_temperature": heat,
        "potential_temperature": potential_temperature(salinity, temperature, pressure),
        "depth": depth(pressure, latitude),
        **{
            name: potential_density_anomaly(salinity, heat, reference)
            for name, reference in REFERENCE_PRESSURES.items()
        },
        "spiciness0": spiciness0(salinity, heat),
        "buoyancy_frequency_squared": buoyancy_frequency_squared(
            salinity, heat, pressure, latitude, cast_groups(table)
        ),
    }


def absolute_salinity(
    practical_salinity: npt.ArrayLike,
    pressure: npt.ArrayLike,
    longitude: npt.ArrayLike,
    latitude: npt.ArrayLike,
) -> FloatArray:
    """Return Absolute Salinity, g/kg.

    Inputs broadcast: practical salinity (PSS-78), sea pressure (dbar), longitude (degrees east, -180 to 360),
    latitude (degrees north). IOC, SCOR and IAPSO 2010, section A.5; McDougall et al. 2012.
    """
    return _evaluate(
        gsw.SA_from_SP,
        (practical_salinity, PRACTICAL_SALINITY),
        (pressure, PRESSURE),
        (longitude, LONGITUDE),
        (latitude, LATITUDE),
    )


def preformed_salinity(
    practical_salinity: npt.ArrayLike,
    pressure: npt.ArrayLike,
    longitude: npt.ArrayLike,
    latitude: npt.ArrayLike,
) -> FloatArray:
    """Return Preformed Salinity, g/kg: what is conserved when waters mix and nutrients are respired.

    Inputs as for `absolute_salinity`. IOC, SCOR and IAPSO 2010, section A.4.
    """
    return _evaluate(
        gsw.Sstar_from_SP,
        (practical_salinity, PRACTICAL_SALINITY),
        (pressure, PRESSURE),
        (longitude, LONGITUDE),
        (latitude, LATITUDE),
    )


def conservative_temperature(
    absolute_salinity: npt.ArrayLike, temperature: npt.ArrayLike, pressure: npt.ArrayLike
) -> FloatArray:
    """Return Conservative Temperature, degC.

    Inputs broadcast: Absolute Salinity (g/kg), in-situ temperature (ITS-90, degC), sea pressure (dbar).
    IOC, SCOR and IAPSO 2010, section 3.3.
    """
    return _evaluate(
        gsw.CT_from_t,
        (absolute_salinity, ABSOLUTE_SALINITY),
        (temperature, TEMPERATURE),
        (pressure, PRESSURE),
    )


def potential_temperature(
    absolute_salinity: npt.ArrayLike, temperature: npt.ArrayLike, pressure: npt.ArrayLike
) -> FloatArray:
    """Return potential temperature referred to the surface, ITS-90, degC.

    Inputs as for `conservative_temperature`. IOC, SCOR and IAPSO 2010, section 3.1.
    """
    return _evaluate(
        gsw.pt0_from_t,
        (absolute_salinity, ABSOLUTE_SALINITY),
        (temperature, TEMPERATURE),
        (pressure, PRESSURE),
    )


def potential_density_anomaly(
    absolute_salinity: npt.ArrayLike, conservative_temperature: npt.ArrayLike, reference: float
) -> FloatArray:
    """Return potential density less 1000, kg/m3, referred to ``reference`` (dbar).

    Inputs broadcast: Absolute Salinity (g/kg), Conservative Temperature (degC). 75-term equation of state,
    Roquet et al. 2015.
    """
    density = _evaluate(
        gsw.rho,
        (absolute_salinity, ABSOLUTE_SALINITY),
        (conservative_temperature, TEMPERATURE),
        (reference, PRESSURE),
    )
    return density - 1000.0


def spiciness0(absolute_salinity: npt.ArrayLike, conservative_temperature: npt.ArrayLike) -> FloatArray:
    """Return spiciness referred to the surface, kg/m3.

    Inputs broadcast: Absolute Salinity (g/kg), Conservative Temperature (degC). McDougall and Krzysik 2015.
    """
    return _evaluate(
        gsw.spiciness0, (absolute_salinity, ABSOLUTE_SALINITY), (conservative_temperature, TEMPERATURE)
    )


def depth(pressure: npt.ArrayLike, latitude: npt.ArrayLike) -> FloatArray:
    """Return depth below the surface of a standard ocean, m, positive down.

    Inputs broadcast: sea pressure (dbar), latitude (degrees north). IOC, SCOR and IAPSO 2010, section 3.32,
    without the dynamic height of the column.
    """
    return 0.0 - _evaluate(gsw.z_from_p, (pressure, PRESSURE), (latitude, LATITUDE))


def buoyancy_frequency_squared(
    absolute_salinity: FloatArray,
    conservative_temperature: FloatArray,
    pressure: FloatArray,
    latitude: FloatArray,
    cast: npt.NDArray[np.integer],
) -> FloatArray:
    """Return N2 from each level to the next deeper one of its cast, s-2, in the order given.

    All inputs are (n,): Absolute Salinity (g/kg), Conservative Temperature (degC), sea pressure (dbar),
    latitude (degrees north), and a number that is the same for all rows of a cast. Rows may come in any
    order. NaN at the deepest level and between equal pressures. A row that lacks an input is no level: the
    interval runs past it. IOC, SCOR and IAPSO 2010, section 3.10, at mid-pressure.
    """
    columns = (absolute_salinity, conservative_temperature, pressure, latitude)
    domains = (ABSOLUTE_SALINITY, TEMPERATURE, PRESSURE, LATITUDE)
    known = np.logical_and.reduce([d.holds(c) for c, d in zip(columns, domains, strict=True)])
    levels = np.flatnonzero(known)
    # Levels that share a pressure are put in order by salinity and temperature, so that the order in which
    # they were delivered cannot change the answer.
    salinity, heat, p, lat = (c[levels] for c in columns)
    order = levels[np.lexsort((lat, heat, salinity, p, cast[levels]))]
    upper, lower = order[:-1], order[1:]
    paired = (cast[upper] == cast[lower]) & (pressure[lower] > pressure[upper])
    pairs = np.stack((upper[paired], lower[paired]))  # (2, n_interval)
    found = np.full(pressure.shape, np.nan)
    if pairs.size:
        salinity, heat, p, lat = (c[pairs] for c in columns)
        # Two pressures can differ by so little that the quotient overflows.
        with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
            squared, _ = gsw.Nsquared(salinity, heat, p, lat=lat, axis=0)  # (1, n_interval)
        found[pairs[0]] = np.where(np.isfinite(squared[0]), squared[0], np.nan)
    return found


def _evaluate(function: Callable[..., FloatArray], *inputs: tuple[npt.ArrayLike, Domain]) -> FloatArray:
    """Apply ``function`` where every input lies in its domain; NaN elsewhere. Inputs broadcast."""
    values = np.broadcast_arrays(*(np.asarray(value, dtype=np.float64) for value, _ in inputs))
    known = np.logical_and.reduce([d.holds(v) for v, (_, d) in zip(values, inputs, strict=True)])
    found = np.full(known.shape, np.nan)
    if known.any():
        found[known] = function(*(v[known] for v in values))
    return found
