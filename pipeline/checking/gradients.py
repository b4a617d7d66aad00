"""Steps from level to level that no ocean has."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.figures import beyond, unit_of
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import plausible
from pipeline.checking.profiles import LIMITED, ladder, limit_at
from pipeline.findings import Severity

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.checking.profiles import Ladder
    from pipeline.limits import DepthLimit
    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# Levels that are closer count as this far apart: a bottle closes while the ship heaves (our choice, no source).
_LEAST_BOTTLE, _LEAST_CTD = 10.0, 2.0  # dbar


def gradient(data: Rows, settings: Settings) -> list[Mark]:
    """Changes per dbar that are too large between neighbouring levels.

    Doubted is the level that has such a step on every side on which it has a neighbour: the top or the bottom
    of a cast, which no spike test reaches, or a value between two steps. Of a single step within a cast
    nothing tells which side is wrong: a note.
    """
    least = _LEAST_BOTTLE if data.is_bottle else _LEAST_CTD
    marks = []
    for name, key in LIMITED.items():
        limit: DepthLimit | None = getattr(settings.checks.gradient, key, None)
        if limit is None or name not in data.names:
            continue
        levels = ladder(data, plausible(data, name))
        if len(levels.rows) < 2:
            continue
        same = levels.cast[1:] == levels.cast[:-1]
        apart = np.maximum(np.diff(levels.pressure), least)
        middle = 0.5 * (levels.pressure[1:] + levels.pressure[:-1])
        most = limit_at(limit, middle, settings.checks)
        slope = np.where(same, np.diff(levels.values) / apart, 0.0)
        steep = np.flatnonzero(np.abs(slope) > most)
        if len(steep):
            marks += _marks(name, levels, slope, most, steep)
    return marks


def _marks(name: str, levels: Ladder, slope: FloatArray, most: FloatArray, steep: IntArray) -> list[Mark]:
    n_level = len(levels.rows)
    is_steep = np.zeros(n_level + 1, dtype=bool)  # is_steep[i]: between level i - 1 and level i
    is_steep[steep + 1] = True
    first = np.diff(levels.cast, prepend=-1) != 0
    last = np.append(first[1:], True)
    above, below = is_steep[:-1], is_steep[1:]
    doubted = (above | below) & (above | first) & (below | last)
    # Two levels that are a whole cast accuse each other.
    doubted &= ~((first & last[np.minimum(np.arange(n_level) + 1, n_level - 1)]) | (last & np.roll(first, 1)))
    told = np.zeros(n_level, dtype=bool)
    told[steep + 1] = True
    told &= ~doubted & ~np.roll(doubted, 1)
    unit = f"{unit_of(name)} ".lstrip()
    marks = []
    for severity, chosen in ((Severity.DOUBT, doubted), (Severity.NOTE, told)):
        at = np.flatnonzero(chosen)
        at = at[np.argsort(levels.rows[at])]
        if not len(at):
            continue
        step = np.where(above[at], at - 1, at)  # the step told of is the one above, if it is steep
        figures = [beyond(abs(float(slope[i])), float(most[i])) for i in step]
        values = [
            f"by {'-' if slope[i] < 0 else '+'}{by} {unit}per dbar"
            f" from {levels.values[i]:g} to {levels.values[i + 1]:g}"
            for i, (by, _) in zip(step, figures, strict=True)
        ]
        limits = [
            f"at most {limit} {unit}per dbar at {levels.pressure[i]:.0f} dbar"
            for i, (_, limit) in zip(step, figures, strict=True)
        ]
        other = levels.rows[np.where(above[at], at - 1, at + 1)]
        marks.append(
            Mark("gradient", severity, name, levels.rows[at], values, "changes {value}", limits, beside=other)
        )
    return marks
