"""Extremes of a station's profile: the oxygen minimum, the phosphate maximum, the minimum of carbon-13."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.tracers.profiles import crossing, per_station, profiles
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from pipeline.carbonate_settings import ProfileSettings
    from pipeline.tables import FloatArray
    from pipeline.tracers.profiles import Profile

    IntArray = NDArray[np.int64]

_FEWEST = 3  # levels: one above, one below
_ABSURD = 1e6  # of anything, in its unit


@dataclass(frozen=True, slots=True)
class Extreme:
    """A minimum that a profile brackets: the level where it is, and its value there."""

    level: int
    depth: float  # m
    value: float


def minimum(profile: Profile, uncertainties: float) -> Extreme | None:
    """Return the minimum of a profile, the upper of equal ones; None where the profile does not bracket it.

    It is bracketed where values both above and below exceed it by more than ``uncertainties`` standard
    uncertainties: a profile that only falls, or one that is level as far as can be measured, has none.
    """
    i = int(np.argmin(profile.value))
    if i in {0, len(profile.value) - 1}:
        return None
    least = float(profile.value[i])
    rise = min(float(profile.value[:i].max()), float(profile.value[i + 1 :].max())) - least
    if not rise > uncertainties * float(profile.uncertainty[i]):
        return None
    return Extreme(i, float(profile.depth[i]), least)


def thickness(profile: Profile, at: Extreme, limit: float) -> float:
    """Return how thick the layer around a minimum is in which values are below a limit, m.

    0 where the minimum is not below it, NaN where the layer is open above or below. Linear in depth.
    """
    if at.value >= limit:
        return 0.0
    edges = []
    for step in (-1, 1):
        i = at.level
        while 0 <= i < len(profile.value) and profile.value[i] < limit:
            i += step
        if not 0 <= i < len(profile.value):
            return float("nan")
        inner, outer = i - step, i
        ends = [(float(profile.depth[j]), float(profile.value[j])) for j in (inner, outer)]
        edges.append(crossing(ends[0], ends[1], limit))
    return edges[1] - edges[0]


def extremes(
    station: IntArray,
    depth: FloatArray,
    usable: Callable[[str], FloatArray],
    settings: ProfileSettings,
) -> dict[str, FloatArray]:
    """Return the extremes of every station, by registry name, (n_row,) each, repeated in the rows of a station.

    Parameters
    ----------
    station, depth
        Of every row, (n_row,).
    usable
        From a registry name to the values that may be used, (n_row,). Asked for ``oxygen``, ``phosphate`` and
        ``delta_carbon_13``.
    settings
        What counts as an extreme.

    """
    columns = {}
    for name, column, sign in (
        ("oxygen", "oxygen_minimum", 1.0),
        ("phosphate", "phosphate_maximum", -1.0),
        ("delta_carbon_13", "delta_carbon_13_minimum", 1.0),
    ):
        found = _of_stations(station, depth, sign * usable(name), name, settings)
        columns[column] = per_station(station, {n: sign * one.value for n, (_, one) in found.items()})
        columns[f"{column}_depth"] = per_station(station, {n: one.depth for n, (_, one) in found.items()})
        if name == "oxygen":
            layers = {
                n: thickness(profile, one, settings.oxygen_minimum) for n, (profile, one) in found.items()
            }
            columns[f"{column}_thickness"] = per_station(station, layers)
    return columns


def _of_stations(
    station: IntArray, depth: FloatArray, values: FloatArray, name: str, settings: ProfileSettings
) -> dict[int, tuple[Profile, Extreme]]:
    """Return profile and minimum of every station that has one."""
    values = np.where(np.abs(values) < _ABSURD, values, np.nan)
    usual = REGISTRY[name].uncertainty
    absolute, relative = (usual.absolute, usual.relative) if usual else (0.0, 0.0)
    uncertainty = np.hypot(absolute, relative * values)
    found = {}
    for number, profile in profiles(
        station, depth, values, uncertainty, same_depth=settings.same_depth, fewest=_FEWEST
    ):
        one = minimum(profile, settings.extreme_uncertainties)
        if one is not None:
            found[number] = (profile, one)
    return found
