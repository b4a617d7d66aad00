"""Polygons of longitude and latitude, across the date line too. An edge is a straight line between the two.

Every edge goes the shorter way round the earth, so a longitude may be written in either custom.
"""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]

_ON_EDGE = 1e-9  # degrees: 0.1 mm, so that rounding does not decide where an edge is


def unrolled(vertices: Sequence[tuple[float, float]]) -> FloatArray:
    """Return the vertices with longitudes that do not jump, (n_vertex + 1, 2), the first repeated as last.

    Parameters
    ----------
    vertices
        Longitude (degrees east) and latitude (degrees north) of each, in order round the polygon.

    """
    ring = np.array([*vertices, vertices[0]], dtype=np.float64)
    steps = (np.diff(ring[:, 0]) + 180.0) % 360.0 - 180.0  # -180 up to, not including, 180
    ring[1:, 0] = ring[0, 0] + np.cumsum(steps)
    return ring


def polygon_fault(vertices: Sequence[tuple[float, float]]) -> str | None:
    """Return why the vertices bound no area, as "found ...; expected ...; do ...", or None where they do."""
    ring = unrolled(vertices)
    edges = np.diff(ring, axis=0)
    if (repeated := np.flatnonzero((edges == 0).all(axis=1))).size:
        return (
            f"found the vertex {_shown(vertices[repeated[0]])} twice in a row; expected every vertex once, the "
            f"last joins the first by itself; remove one."
        )
    if (far := np.flatnonzero(edges[:, 0] == -180.0)).size:
        one, other = vertices[far[0]], vertices[(far[0] + 1) % len(vertices)]
        return (
            f"found 180 degrees of longitude from {_shown(one)} to {_shown(other)}, which has no shorter way; "
            f"expected less; put a vertex between them."
        )
    if abs(ring[-1, 0] - ring[0, 0]) > 180.0:
        return (
            "found a polygon that goes round a pole; expected one that encloses an area between meridians; "
            "give a range of latitude instead."
        )
    if np.ptp(ring[:, 0]) >= 360.0:
        return "found a polygon wider than the earth; expected less than 360 degrees; take vertices away."
    if np.linalg.matrix_rank(edges) < 2:
        return "found a polygon without an area: its vertices lie on one line; expected some beside it; correct one."
    if crossing := _crossing(ring):
        first, second = ((vertices[i], vertices[(i + 1) % len(vertices)]) for i in crossing)
        return (
            f"found a polygon that crosses or touches itself, from {_shown(first[0])} to {_shown(first[1])} and from "
            f"{_shown(second[0])} to {_shown(second[1])}; expected the vertices in order round it; reorder them."
        )
    return None


def inside(vertices: Sequence[tuple[float, float]], longitude: FloatArray, latitude: FloatArray) -> BoolArray:
    """Return which points lie in a polygon or on its edge, (n_point,); a missing coordinate does not.

    Parameters
    ----------
    vertices
        A polygon in which ``polygon_fault`` finds nothing.
    longitude, latitude
        (n_point,) in degrees east and north.

    """
    ring = unrolled(vertices)
    west = ring[:, 0].min()
    x = west + (longitude - west + _ON_EDGE) % 360.0 - _ON_EDGE
    within = np.zeros(len(longitude), dtype=bool)
    on_edge = np.zeros(len(longitude), dtype=bool)
    for (x0, y0), (x1, y1) in pairwise(ring):
        # A ray to the east: an edge is crossed by the points between its latitudes and to the west of it.
        if y0 != y1:
            passed = (y0 > latitude) != (y1 > latitude)
            within ^= passed & (x < x0 + (latitude - y0) * (x1 - x0) / (y1 - y0))
        length = np.hypot(x1 - x0, y1 - y0)
        along = ((x - x0) * (x1 - x0) + (latitude - y0) * (y1 - y0)) / length
        across = ((x - x0) * (y1 - y0) - (latitude - y0) * (x1 - x0)) / length
        on_edge |= (abs(across) <= _ON_EDGE) & (along >= -_ON_EDGE) & (along <= length + _ON_EDGE)
    return (within | on_edge) & ~np.isnan(longitude) & ~np.isnan(latitude)


def _crossing(ring: FloatArray) -> tuple[int, int] | None:
    """Return the first two edges of a closed ring, (n_edge + 1, 2), that share more than a common vertex."""
    start, end = ring[:-1], ring[1:]
    n_edge = len(start)
    first, second = np.triu_indices(n_edge, k=1)
    # On which side of one edge the ends of the other lie.
    a = _side(start[first], end[first], start[second])
    b = _side(start[first], end[first], end[second])
    c = _side(start[second], end[second], start[first])
    d = _side(start[second], end[second], end[first])
    overlap = (
        np.maximum(_low(start, end)[first], _low(start, end)[second])
        <= np.minimum(_high(start, end)[first], _high(start, end)[second])
    ).all(axis=1)
    crossed = (a * b <= 0) & (c * d <= 0) & overlap
    neighbours = (second == first + 1) | ((first == 0) & (second == n_edge - 1))
    # Neighbours share a vertex; they overlap only where the second goes back along the first.
    steps = end - start
    back = (a == 0) & (b == 0) & ((steps[first] * steps[second]).sum(axis=1) < 0)
    bad = np.flatnonzero(np.where(neighbours, back, crossed))
    return (int(first[bad[0]]), int(second[bad[0]])) if bad.size else None


def _side(start: FloatArray, end: FloatArray, point: FloatArray) -> FloatArray:
    """Return -1, 0 or 1: on which side of the line from ``start`` to ``end`` a point lies, all (n, 2)."""
    way, there = end - start, point - start
    return np.asarray(np.sign(way[:, 0] * there[:, 1] - way[:, 1] * there[:, 0]))


def _low(start: FloatArray, end: FloatArray) -> FloatArray:
    return np.minimum(start, end)


def _high(start: FloatArray, end: FloatArray) -> FloatArray:
    return np.maximum(start, end)


def _shown(vertex: tuple[float, float]) -> str:
    return f"[{vertex[0]:g}, {vertex[1]:g}]"
