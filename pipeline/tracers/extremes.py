"""Extremes of a station's profile: the oxygen minimum, the phosphate maximum, the minimum of carbon-13."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.figures import unit_of
from pipeline.tracers.profiles import crossing, per_station, profiles

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from pipeline.carbonate_settings import ProfileSettings
    from pipeline.tables import FloatArray
    from pipeline.tracers.profiles import Profile

    IntArray = NDArray[np.int64]

_FEWEST = 3  # levels: one above, one below
_ABSURD = 1e6  # of anything, in its unit
# Of which quantity, the column, and the sign with which it is a minimum.
_EXTREMES = (
    ("oxygen", "oxygen_minimum", 1.0),
    ("phosphate", "phosphate_maximum", -1.0),
    ("delta_carbon_13", "delta_carbon_13_minimum", 1.0),
)


@dataclass(frozen=True, slots=True)
class Extreme:
    """A minimum that a profile brackets: the level where it is, and its value there."""

    level: int
    depth: float  # m
    value: float


def minimum(profile: Profile, rise: float) -> Extreme | None:
    """Return the minimum of a profile, the upper of equal ones; None where the profile does not bracket it.

    It is bracketed where values both above and below exceed it by more than ``rise``, as two neighbouring levels see
    it: a profile that only falls, or one that is level but for the noise of single bottles, has none. What all bottles
    of a station have in common, such as an error of the standard, makes no minimum and hides none.
    """
    i = int(np.argmin(profile.value))
    if i in {0, len(profile.value) - 1}:
        return None
    least = float(profile.value[i])
    if not min(_seen_by_two(profile.value[:i]), _seen_by_two(profile.value[i + 1 :])) - least > rise:
        return None
    return Extreme(i, float(profile.depth[i]), least)


def _seen_by_two(values: FloatArray) -> float:
    """Return the most that two neighbouring levels both have; of one level alone what it has."""
    return float(values[0] if len(values) == 1 else np.minimum(values[:-1], values[1:]).max())


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
    for name, column, sign in _EXTREMES:
        found = _of_stations(station, depth, sign * usable(name), name, settings)
        columns[column] = per_station(station, {n: sign * one.value for n, (_, one) in found.items()})
        columns[f"{column}_depth"] = per_station(station, {n: one.depth for n, (_, one) in found.items()})
        if name == "oxygen":
            layers = {
                n: thickness(profile, one, settings.oxygen_minimum) for n, (profile, one) in found.items()
            }
            columns[f"{column}_thickness"] = per_station(station, layers)
    return columns


def extreme_forms(settings: ProfileSettings) -> dict[str, dict[str, str]]:
    """Return, by column, by how much a profile has to rise or fall beside its extreme: metadata of the columns."""
    told: dict[str, dict[str, str]] = {}
    for name, column, _ in _EXTREMES:
        repeats = float(getattr(settings.repeatability, name))
        words = (
            f"more than {settings.extreme_rise:g} times {repeats:g} {unit_of(name)}, what one bottle repeats to against"
            " the next, as two neighbouring levels of the side see it"
        )
        told |= {column: {"form": words}, f"{column}_depth": {"form": words}}
    told["oxygen_minimum_thickness"] = {"form": f"limit {settings.oxygen_minimum:g} umol/kg"}
    return told


def _of_stations(
    station: IntArray, depth: FloatArray, values: FloatArray, name: str, settings: ProfileSettings
) -> dict[int, tuple[Profile, Extreme]]:
    """Return profile and minimum of every station that has one."""
    values = np.where(np.abs(values) < _ABSURD, values, np.nan)
    rise = settings.extreme_rise * float(getattr(settings.repeatability, name))
    found = {}
    for number, profile in profiles(
        station, depth, values, np.zeros(len(values)), same_depth=settings.same_depth, fewest=_FEWEST
    ):
        one = minimum(profile, rise)
        if one is not None:
            found[number] = (profile, one)
    return found
