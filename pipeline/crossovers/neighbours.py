"""Which stations of two cruises lie near each other on the sphere."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy.spatial import cKDTree

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]


def unit_vectors(latitude: FloatArray, longitude: FloatArray) -> FloatArray:
    """Return points on the unit sphere, (n_station, 3), from degrees north and east, (n_station,) each.

    On the sphere there is neither a date line nor a pole.
    """
    north, east = np.radians(latitude), np.radians(longitude)
    return np.stack([np.cos(north) * np.cos(east), np.cos(north) * np.sin(east), np.sin(north)], axis=1)


def chord(arc: float) -> float:
    """Return the straight distance on the unit sphere of an arc of at most 180 degrees."""
    return float(2 * np.sin(np.radians(arc) / 2))


def near_pairs(one: FloatArray, other: FloatArray, arc: float, partners: int) -> IntArray:
    """Return the pairs of stations within ``arc`` degrees, (n_pair, 2), in order, first of ``one``, then of ``other``.

    A station counts with its ``partners`` nearest stations of the other cruise, so that two cruises that
    stayed in one place have pairs in proportion to their stations and not to the product of them.

    Parameters
    ----------
    one, other
        Points on the unit sphere, (n_one, 3) and (n_other, 3).
    arc, partners
        Farthest, degrees, and how many.

    """
    reach = chord(arc) * (1 + 1e-12)
    forth, back = _nearest(one, other, reach, partners), _nearest(other, one, reach, partners)
    both = np.concatenate([forth, back[:, ::-1]])
    return np.unique(both, axis=0) if len(both) else both


def _nearest(points: FloatArray, others: FloatArray, reach: float, partners: int) -> IntArray:
    count = min(partners, len(others))
    distance, index = cKDTree(others).query(points, k=np.arange(1, count + 1), distance_upper_bound=reach)
    row, rank = np.nonzero(np.isfinite(distance))
    return np.stack([row, np.asarray(index)[row, rank]], axis=1).astype(np.int64)


def places(points: FloatArray, arc: float) -> IntArray:
    """Return a number per point, (n_point,), from 0: points around the first of their place, within ``arc`` degrees.

    A point that no earlier place reaches begins one; a point belongs to the nearest place that does.

    Parameters
    ----------
    points
        Directions, (n_point, 3), of any length but zero.
    arc
        Degrees.

    """
    directions = points / np.linalg.norm(points, axis=1, keepdims=True)
    reach = chord(arc) * (1 + 1e-12)
    centres: list[FloatArray] = []
    nearest = np.full(len(points), np.inf)
    place = np.zeros(len(points), dtype=np.int64)
    while (left := np.flatnonzero(nearest > reach)).size:
        centre = directions[left[0]]
        distance = np.linalg.norm(directions - centre, axis=1)
        mine = distance < nearest
        place[mine], nearest[mine] = len(centres), distance[mine]
        centres.append(centre)
    # A later centre may have taken every point of an earlier place.
    return np.unique(place, return_inverse=True)[1].astype(np.int64)
