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
    uncertainty: float  # m; NaN where saturation, off by its own, crosses one nowhere
    crossings: int  # from above
    gap: float  # m between the two bottles


def horizon(profile: Profile, widest_gap: float) -> Horizon | None:
    """Return the horizon of a profile, None where saturation never crosses one from above.

    Linear in depth between the two levels; a level that is at one exactly is the horizon. Where there are several,
    the deepest counts: below it the water stays undersaturated as far as was sampled, or is told by `crossings`.
    What makes saturation uncertain, standards and constants, is much the same in all bottles of a station. The
    uncertainty is therefore half the distance between the horizons of the whole profile moved down and up by its own.
    """
    down = _falls(profile.value)
    if not len(down):
        return None
    i = int(down[-1])
    gap = float(profile.depth[i + 1] - profile.depth[i])
    if gap > widest_gap:
        return Horizon(np.nan, np.nan, len(down), gap)
    upper, lower = (_deepest(profile, profile.value + sign * profile.uncertainty) for sign in (-1.0, 1.0))
    return Horizon(_deepest(profile, profile.value), 0.5 * abs(lower - upper), len(down), gap)


def _falls(saturation: FloatArray) -> IntArray:
    """Return the levels below which saturation falls below one, (n_crossing,)."""
    return np.flatnonzero((saturation[:-1] >= SATURATED) & (saturation[1:] < SATURATED))


def _deepest(profile: Profile, saturation: FloatArray) -> float:
    """Return the depth, m, at which saturation falls below one the deepest time; NaN where it does not."""
    down = _falls(saturation)
    if not len(down):
        return float("nan")
    i = int(down[-1])
    upper, lower = ((float(profile.depth[j]), float(saturation[j])) for j in (i, i + 1))
    return crossing(upper, lower, SATURATED)


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
    """Return a note of stations whose horizon lies in too wide a gap, is hardly known, or is one of several."""
    in_gap = [n for n, one in found.of_station.items() if np.isnan(one.depth)]
    vague = [
        n
        for n, one in found.of_station.items()
        if not np.isnan(one.depth) and not one.uncertainty <= settings.horizon_uncertainty
    ]
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
    if vague:
        findings.append(
            Finding(
                "saturation-horizon", Severity.NOTE,
                f"the {mineral} saturation horizon of {_named(data, station, vague)} is hardly known: saturation is so"
                " near one over so much of the water that its own uncertainty moves the horizon by more than"
                f" {settings.horizon_uncertainty:g} m, or beyond the bottles; expected less"
                " (profiles.horizon_uncertainty of the settings); its depth is told all the same, its uncertainty"
                " where there is one.",
                variable=f"{mineral}_saturation_depth", limit=f"{settings.horizon_uncertainty:g}", count=len(vague),
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
