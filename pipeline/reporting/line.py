"""Kernel: casts put in order along a line, how far along it each lies, and which ones lie off it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

EARTH_RADIUS = 6371.0  # km; mean radius, IUGG 1980 (Moritz 2000, from memory)
# All below: our choice, no source. A cast is off the line when the line is shorter by this part without it ...
OFF_LINE = 0.2
FEWEST_CASTS = 8  # ... if the line has as many casts, of which at most one in ten is left out.
SAME_PLACE = 2.0  # km along the line within which casts stand in one column


@dataclass(frozen=True, slots=True)
class Line:
    """Casts along a line. ``order`` and ``off`` are indices into what was given, and hold each of them once."""

    order: IntArray  # (n_on,)
    distance: FloatArray  # km from the first, (n_on,), the same for casts of one place
    off: IntArray  # (n_off,), in the order in which they were left out


def along_line(latitude: FloatArray, longitude: FloatArray, time: FloatArray) -> Line:
    """Return casts in the order of time or along their main direction, whichever makes the shorter line.

    A single wrong time or position must not tear the line: of two orders the shorter one is taken, and a cast
    without which the line is much shorter is left out. The line begins at its western end, or at its southern one
    where it goes farther north than east, so that two visits to a section can be laid beside each other.

    Parameters
    ----------
    latitude, longitude
        Degrees, (n_cast,), all finite.
    time
        Any count of time, (n_cast,), NaN where unknown: such casts keep their place behind those of known time.

    """
    if not len(latitude):
        return Line(np.zeros(0, dtype=np.int64), np.zeros(0), np.zeros(0, dtype=np.int64))
    places = unit_vectors(latitude, longitude)
    by_time = np.argsort(time, kind="stable")
    orders = [by_time, by_time[np.argsort(_main_direction(places)[by_time], kind="stable")]]
    lines = [_without_strays(places, order) for order in orders]
    order, off = min(lines, key=lambda line: (len(line[1]), round(_length(places[line[0]]), 3)))
    if _runs_west_or_south(latitude[order], longitude[order]):
        order = order[::-1]
    steps = great_circle(places[order][:-1], places[order][1:])
    steps[steps < SAME_PLACE] = 0.0
    return Line(order, np.concatenate([[0.0], np.cumsum(steps)]), off)


def unit_vectors(latitude: FloatArray, longitude: FloatArray) -> FloatArray:
    """Return places on the unit sphere, (n, 3), of degrees, (n,)."""
    phi, lam = np.radians(latitude), np.radians(longitude)
    return np.stack([np.cos(phi) * np.cos(lam), np.cos(phi) * np.sin(lam), np.sin(phi)], axis=-1)


def great_circle(one: FloatArray, other: FloatArray) -> FloatArray:
    """Return distances on a sphere, km, (n,), of unit vectors, (n, 3)."""
    chord = np.linalg.norm(np.asarray(one) - np.asarray(other), axis=-1)
    return np.asarray(2 * EARTH_RADIUS * np.arcsin(np.clip(chord / 2, 0.0, 1.0)))


def _runs_west_or_south(latitude: FloatArray, longitude: FloatArray) -> bool:
    """Return whether a line ends west of where it begins; where it goes more north than east, whether south of it."""
    north = float(latitude[-1] - latitude[0])
    east = float((longitude[-1] - longitude[0] + 180.0) % 360.0 - 180.0)
    east *= np.cos(np.radians((latitude[-1] + latitude[0]) / 2))
    return east < 0 if abs(east) >= abs(north) else north < 0


def _length(places: FloatArray) -> float:
    return float(great_circle(places[:-1], places[1:]).sum())


def _main_direction(places: FloatArray) -> FloatArray:
    """Return coordinates along the direction in which the places spread most, (n,), the first place not last."""
    centred = places - np.median(places, axis=0)
    along: FloatArray = centred @ np.linalg.svd(centred, full_matrices=False)[2][0]
    return along if along[0] <= np.median(along) else -along


def _without_strays(places: FloatArray, order: IntArray) -> tuple[IntArray, IntArray]:
    """Return the order without the casts that lie off the line, and these."""
    off: list[int] = []
    most = len(order) // 10 if len(order) >= FEWEST_CASTS else 0
    while len(off) < max(most, 1 if len(order) + len(off) >= FEWEST_CASTS else 0):
        steps = great_circle(places[order][:-1], places[order][1:])
        total = float(steps.sum())
        across = great_circle(places[order][:-2], places[order][2:])
        saved = np.concatenate([steps[:1], steps[:-1] + steps[1:] - across, steps[-1:]])
        worst = int(np.argmax(saved))
        if not saved[worst] > OFF_LINE * total:
            break
        off.append(int(order[worst]))
        order = np.delete(order, worst)
    return order, np.asarray(off, dtype=np.int64)
