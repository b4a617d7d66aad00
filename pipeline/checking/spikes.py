"""Single values that stand out of their cast."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.figures import plain, unit_of
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import plausible
from pipeline.checking.profiles import LIMITED, departure, ladder, limit_at
from pipeline.findings import Severity
from pipeline.variables import REGISTRY, FlagScheme

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.checking.profiles import Ladder
    from pipeline.limits import DepthLimit
    from pipeline.settings import CheckSettings, Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

# Spikes taken out before what is left is looked at again: a spike makes its neighbours look odd.
_ROUNDS = 8
# A spike of a CTD may be some levels wide, where levels are close.
_WIDEST = 3
_CLOSE = 5.0  # dbar between levels
# A CTD spike stands this many times out of what its surroundings do from level to level (our choice, no source).
_TIMES_NOISE = 6.0
_SURROUNDINGS = 10  # levels on each side
# A feature that the other instrument shows at a third of its size or more is one of the water (our choice).
_SHARE_SEEN = 1.0 / 3.0
# dbar, and part of the pressure, between the levels above and below within which they say what is between them.
_NEAR, _NEAR_PART = 300.0, 0.4
_CAST = 1e5  # a cast's place on an axis of pressures: further apart than any pressure of the ocean
_OTHER = {
    "bottle_salinity": "ctd_salinity", "ctd_salinity": "bottle_salinity",
    "bottle_oxygen": "ctd_oxygen", "ctd_oxygen": "bottle_oxygen",
}  # fmt: skip


def spike(data: Rows, settings: Settings) -> list[Mark]:
    """Single values outside what the levels above and below them allow.

    The three-point test, widened where the slopes of the levels around lead to an extremum. A value that the
    other instrument (bottle, CTD) confirms is left alone, and so is a CTD level where the whole water varies
    as much from level to level.
    """
    limits = settings.checks.spike_bottle if data.is_bottle else settings.checks.spike_ctd
    marks = []
    for name, key in LIMITED.items():
        limit: DepthLimit | None = getattr(limits, key, None)
        if limit is None or name not in data.names:
            continue
        levels = ladder(data, plausible(data, name))
        found = np.zeros(len(data), dtype=bool)
        for width in range(1, 2 if data.is_bottle else _WIDEST + 1):
            found[spikes(levels, limit, settings.checks, width, quiet=not data.is_bottle)] = True
        rows = np.flatnonzero(found)
        if data.is_bottle and len(rows):
            rows = rows[~_confirmed(data, name, rows, settings.checks)]
        if len(rows):
            marks.append(_mark(name, rows, levels, limit, settings.checks))
    return marks


def spikes(
    levels: Ladder, limit: DepthLimit, checks: CheckSettings, width: int = 1, *, quiet: bool = False
) -> IntArray:
    """Return the rows that are spikes, (n_found,): of those that stand near each other, the largest first.

    Parameters
    ----------
    levels
        One quantity of a table.
    limit
        How far a value may lie outside what its neighbours allow.
    checks
        Between which pressures the limit changes.
    width
        How many levels a spike may take: neighbours are taken from that far away.
    quiet
        Whether a spike has to stand out of a quiet surrounding as well.

    """
    found: list[IntArray] = []
    for _ in range(_ROUNDS):
        most = limit_at(limit, levels.pressure, checks)
        if not (
            np.abs(departure(levels.cast, levels.pressure, levels.values, width, slopes=False)) > most
        ).any():
            break
        out = np.abs(departure(levels.cast, levels.pressure, levels.values, width))
        suspect = np.flatnonzero((out > most) & _near(levels.pressure, width))
        if quiet and len(suspect):
            suspect = suspect[out[suspect] > _TIMES_NOISE * _noise(levels, width, suspect)]
        if not len(suspect):
            break
        score = np.zeros(len(out))
        score[suspect] = out[suspect] / most[suspect]
        worst = score > 0
        for step in (width, 2 * width):
            worst[step:] &= score[step:] >= score[:-step]
            worst[:-step] &= score[:-step] >= score[step:]
        found.append(levels.rows[worst])
        # A cast without a spike has none in the next round either; how quiet it is there is asked of all.
        again = ~worst if quiet else ~worst & np.isin(levels.cast, levels.cast[worst])
        levels = levels.kept(again)
    return np.concatenate(found) if found else np.empty(0, dtype=np.int64)


def _near(pressure: FloatArray, width: int) -> BoolArray:
    """Return where the neighbours of a level are near enough to say what it should be, (n_level,)."""
    span = np.zeros(len(pressure))
    span[width:-width] = pressure[2 * width :] - pressure[: -2 * width]
    reach = 2 * width * _CLOSE if width > 1 else _NEAR + _NEAR_PART * pressure
    return np.asarray((span > 0) & (span <= reach))


def _noise(levels: Ladder, width: int, at: IntArray) -> FloatArray:
    """Return what a quantity usually does from level to level around some of its levels, (n_at,)."""
    values = levels.values
    bend = np.full(len(values), np.nan)
    bend[width:-width] = np.abs(values[width:-width] - 0.5 * (values[2 * width :] + values[: -2 * width]))
    window = at[:, None] + np.arange(-_SURROUNDINGS, _SURROUNDINGS + 1)
    inside = np.clip(window, 0, len(values) - 1)
    here = (window == inside) & (levels.cast[inside] == levels.cast[at][:, None]) & ~np.isnan(bend[inside])
    around = np.where(here, bend[inside], np.nan)
    return np.asarray(np.nanmedian(around, axis=1))


def _confirmed(data: Rows, name: str, rows: IntArray, checks: CheckSettings) -> BoolArray:
    """Return which of some rows show in another instrument what they show here, (n_found,).

    In the other salinity or oxygen, the same way and a third as much; for a water sample, in the CTD's
    temperature or salinity beyond the limit of a spike there.
    """
    values = plausible(data, name)
    confirmed = np.zeros(len(rows), dtype=bool)
    other = _OTHER.get(name)
    if other is not None and other in data.names:
        mine, theirs = _both_departures(data, values, plausible(data, other), rows)
        confirmed |= (mine * theirs > 0) & (np.abs(theirs) >= _SHARE_SEEN * np.abs(mine))
    if REGISTRY[name].flags is FlagScheme.WATER:
        for witness in ("temperature", "ctd_salinity"):
            limit: DepthLimit = getattr(checks.spike_bottle, LIMITED[witness])
            most = limit_at(limit, data.floats("pressure")[rows], checks)
            confirmed |= np.abs(_both_departures(data, values, plausible(data, witness), rows)[1]) > most
    return confirmed


def _both_departures(data: Rows, mine: FloatArray, theirs: FloatArray, rows: IntArray) -> FloatArray:
    """Return the departures of two quantities in some rows on the levels that have both, (2, n_found), else zero."""
    both = ladder(data, np.where(np.isnan(theirs), np.nan, mine))
    both = both.kept(np.isin(both.cast, data.casts[rows]))
    out = np.zeros((2, len(data)))
    for place, values in enumerate((mine, theirs)):
        out[place, both.rows] = departure(both.cast, both.pressure, values[both.rows])
    return out[:, rows]


def _mark(name: str, rows: IntArray, levels: Ladder, limit: DepthLimit, checks: CheckSettings) -> Mark:
    sound = levels.kept(~np.isin(levels.rows, rows))
    spots = levels.kept(np.isin(levels.rows, rows))
    spots = spots.kept(np.argsort(spots.rows))
    # The next sound level above and below: the ladder goes by cast and pressure, as these keys do.
    place = np.searchsorted(sound.cast * _CAST + sound.pressure, spots.cast * _CAST + spots.pressure)
    most = limit_at(limit, spots.pressure, checks)
    unit = f" {unit_of(name)}".rstrip()
    values, limits = [], []
    for i, value in enumerate(spots.values):
        beside = [
            f"{sound.values[j]:g} {word} it"
            for j, word in ((place[i] - 1, "above"), (place[i], "below"))
            if 0 <= j < len(sound.cast) and sound.cast[j] == spots.cast[i]
        ]
        values.append(f"{value:g} with {' and '.join(beside)}" if beside else f"{value:g}")
        limits.append(f"at most {plain(float(most[i]), 2)}{unit} beyond what its neighbours allow")
    return Mark("spike", Severity.DOUBT, name, spots.rows, values, "is {value}", limits)
