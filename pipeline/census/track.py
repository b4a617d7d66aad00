"""The track of a cruise: the order of its stations, and how far along it they lie. Arrays in, arrays out."""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.track import nautical_miles
from pipeline.crossovers.neighbours import unit_vectors

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

KM_PER_MILE = 1.852  # the nautical mile, exact by definition; a minute of arc on the sphere
KM_PER_RADIAN = KM_PER_MILE * 60 * 180 / np.pi
_SHORTER = 0.999  # by how much another order has to be shorter than that of time to be believed


def leg_lengths(latitude: FloatArray, longitude: FloatArray) -> FloatArray:
    """Return the great-circle distances from station to station, km, (n_station - 1,), of positions (n_station,)."""
    return KM_PER_MILE * nautical_miles(latitude[:-1], longitude[:-1], latitude[1:], longitude[1:])


def track_order(latitude: FloatArray, longitude: FloatArray, instant: FloatArray) -> IntArray:
    """Return the order of the stations along their section, (n_station,).

    That of time, of the names (the order they are given in), or of the place along the main direction: of these the
    one with the shortest track. So a wrong date does not tear a section apart, and a curved one is not folded.

    Parameters
    ----------
    latitude, longitude
        Degrees, (n_station,), in the order of the stations' names.
    instant
        (n_station,), NaN where unknown.

    """
    orders = [np.argsort(instant, kind="stable"), np.arange(len(latitude)), _along(latitude, longitude)]
    lengths = [leg_lengths(latitude[order], longitude[order]).sum() for order in orders]
    best = 0
    for other in range(1, len(orders)):
        if lengths[other] < _SHORTER * lengths[best]:
            best = other
    return orders[best].astype(np.int64)


def _along(latitude: FloatArray, longitude: FloatArray) -> IntArray:
    points = unit_vectors(latitude, longitude)
    centred = points - points.mean(axis=0)
    direction = np.linalg.svd(centred, full_matrices=False)[2][0]
    direction = direction * np.sign(direction[np.abs(direction).argmax()] or 1.0)
    return np.argsort(centred @ direction, kind="stable")


def project(
    points: FloatArray, track: FloatArray, along: FloatArray, legs: IntArray
) -> tuple[FloatArray, FloatArray]:
    """Return where along a track points lie, and how far off it, km, (n_point,) each; NaN where it has no leg.

    Parameters
    ----------
    points
        On the unit sphere, (n_point, 3).
    track
        Stations on the unit sphere, (n_station, 3).
    along
        Of the stations, km, (n_station,).
    legs
        Legs of the track that count, by the station they start at, (n_leg,).

    """
    place, off = np.full(len(points), np.nan), np.full(len(points), np.inf)
    for leg in legs:
        start, end = track[leg], track[leg + 1]
        length = along[leg + 1] - along[leg]
        part = _part_of_leg(points, start, end)
        nearest = _between(start, end, part)
        distance = KM_PER_RADIAN * _angle(points, nearest)
        nearer = distance < off
        place[nearer] = along[leg] + part[nearer] * length
        off[nearer] = distance[nearer]
    return place, np.where(np.isfinite(off), off, np.nan)


def _part_of_leg(points: FloatArray, start: FloatArray, end: FloatArray) -> FloatArray:
    """Return the part of a leg, 0 to 1, at which it comes nearest to points."""
    whole = float(_angle(start[None], end)[0])
    if whole == 0.0:
        return np.zeros(len(points))
    across = np.cross(start, end)
    towards = np.cross(across / np.linalg.norm(across), start)
    return np.asarray(np.clip(np.arctan2(points @ towards, points @ start) / whole, 0.0, 1.0))


def _between(start: FloatArray, end: FloatArray, part: FloatArray) -> FloatArray:
    """Return points on the leg, (n_part, 3)."""
    whole = float(_angle(start[None], end)[0])
    if whole == 0.0:
        return np.asarray(np.tile(start, (len(part), 1)), dtype=np.float64)
    weights = np.stack([np.sin((1 - part) * whole), np.sin(part * whole)], axis=1) / np.sin(whole)
    return np.asarray(weights @ np.stack([start, end]))


def _angle(one: FloatArray, other: FloatArray) -> FloatArray:
    """Return the angle between points of the unit sphere, (n, 3) and (3,) or (n, 3); exact for small ones too."""
    return np.asarray(2 * np.arcsin(np.clip(np.linalg.norm(one - other, axis=-1) / 2, 0.0, 1.0)))


def pairs(values: Sequence[float] | FloatArray) -> list[tuple[float, float]]:
    """Return neighbours of a rising list that are apart."""
    return [(float(a), float(b)) for a, b in pairwise(values) if b > a]
