"""Saturation horizons: the depth of a station below which calcite or aragonite dissolves."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.findings import Finding, Severity
from pipeline.tracers.profiles import crossing, per_station, profiles

if TYPE_CHECKING:
    from collections.abc import Iterable

    from numpy.typing import NDArray

    from pipeline.carbonate_settings import ProfileSettings
    from pipeline.tables import FloatArray
    from pipeline.tracers.profiles import Profile
    from pipeline.usable import Rows

    IntArray = NDArray[np.int64]

MINERALS = ("calcite", "aragonite")
SATURATED = 1.0
_TOLD = 8  # stations named in a sentence


@dataclass(frozen=True, slots=True)
class Horizon:
    """Where the saturation state of one profile crosses one from above, the deepest time it does."""

    depth: float  # m; NaN where it does not, or between bottles too far apart
    uncertainty: float
    crossings: int  # from above
    gap: float  # m between the two bottles


def horizon(profile: Profile, widest_gap: float) -> Horizon | None:
    """Return the horizon of a profile, None where saturation never crosses one from above.

    Linear in depth between the two levels; a level that is at one exactly is the horizon. Where there are several,
    the deepest counts: below it the water stays undersaturated as far as was sampled, or is told by `crossings`.
    The uncertainty is that of saturation at the horizon over its gradient.
    """
    above, below = profile.value[:-1], profile.value[1:]
    down = np.flatnonzero((above >= SATURATED) & (below < SATURATED))
    if not len(down):
        return None
    i = int(down[-1])
    gap = float(profile.depth[i + 1] - profile.depth[i])
    if gap > widest_gap:
        return Horizon(np.nan, np.nan, len(down), gap)
    ends = tuple((float(profile.depth[j]), float(profile.value[j])) for j in (i, i + 1))
    depth = crossing(ends[0], ends[1], SATURATED)
    part = (depth - ends[0][0]) / gap
    uncertainty = (1.0 - part) * profile.uncertainty[i] + part * profile.uncertainty[i + 1]
    gradient = (ends[0][1] - ends[1][1]) / gap
    return Horizon(depth, float(uncertainty / gradient), len(down), gap)


@dataclass(frozen=True, slots=True)
class Horizons:
    """The horizon of one mineral in all stations of a table."""

    depth: FloatArray  # (n_row,), repeated in the rows of a station
    uncertainty: FloatArray  # (n_row,)
    of_station: dict[int, Horizon]


def horizons(
    station: IntArray,
    depth: FloatArray,
    saturation: FloatArray,
    uncertainty: FloatArray,
    settings: ProfileSettings,
) -> Horizons:
    """Return the saturation horizon of every station, from columns (n_row,) each."""
    found = {
        number: one
        for number, profile in profiles(
            station, depth, saturation, uncertainty, same_depth=settings.same_depth
        )
        if (one := horizon(profile, settings.gap)) is not None
    }
    return Horizons(
        per_station(station, {number: one.depth for number, one in found.items()}),
        per_station(station, {number: one.uncertainty for number, one in found.items()}),
        found,
    )


def horizon_findings(
    data: Rows, station: IntArray, mineral: str, found: Horizons, settings: ProfileSettings
) -> tuple[Finding, ...]:
    """Return a note of stations whose horizon lies in too wide a gap, and of those that have several."""
    in_gap = [n for n, one in found.of_station.items() if np.isnan(one.depth)]
    several = [n for n, one in found.of_station.items() if one.crossings > 1]
    findings = []
    if in_gap:
        widest = max(found.of_station[n].gap for n in in_gap)
        findings.append(
            Finding(
                "saturation-horizon", Severity.NOTE,
                f"the {mineral} saturation horizon of {_named(data, station, in_gap)} lies between two bottles up to"
                f" {widest:.0f} m apart; expected at most {settings.gap:g} m (profiles.gap of the settings); its depth"
                " was left out.",
                variable=f"{mineral}_saturation_depth", value=f"{widest:.0f}", limit=f"{settings.gap:g}",
                count=len(in_gap),
            )
        )  # fmt: skip
    if several:
        findings.append(
            Finding(
                "saturation-horizon", Severity.NOTE,
                f"saturation of {mineral} falls below one more than once in {_named(data, station, several)}; expected"
                " one horizon; the deepest is told, and what lies above it is in the samples.",
                variable=f"{mineral}_saturation_depth", count=len(several),
            )
        )  # fmt: skip
    return tuple(findings)


def _named(data: Rows, station: IntArray, numbers: Iterable[int]) -> str:
    """Return stations in words: 'stations 4, 7 and 3 more'."""
    wanted = sorted(numbers)
    rows = [int(np.flatnonzero(station == number)[0]) for number in wanted[:_TOLD]]
    names = [str(data.table.column("station")[row].as_py()) for row in rows]
    more = len(wanted) - len(names)
    listed = ", ".join(names) + (f" and {more} more" if more else "")
    return f"station{'s' if len(wanted) > 1 else ''} {listed}"
