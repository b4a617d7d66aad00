"""Integrals over pieces of columns and legs of a track: exact for what is linear. Arrays in, arrays out.

The area of a source is a sum of shares times weights, in m of depth times km along the track. The weights depend on
where samples lie and never on their shares, so that they are the same for every member of an ensemble.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.census.pieces import Pieces

    FloatArray = NDArray[np.float64]


def linear_weights(start: FloatArray, end: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the integrals of 1 - t and of t from ``start`` to ``end``, of any shape; zero where it ends before."""
    end = np.maximum(end, start)
    second = (end**2 - start**2) / 2
    return end - start - second, second


def class_parts(pieces: Pieces, boundaries: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return from where to where, 0 to 1, each piece lies in each class, (n_class, n_piece) each.

    Classes go from below the first of the (n_boundary,) ``boundaries`` to above the last; a last one more holds what
    has no density. A class holds its lower boundary.
    """
    edges = np.concatenate([[-np.inf], boundaries, [np.inf]])[:, None]
    low, high = pieces.density_top, pieces.density_bottom
    change = high - low
    with np.errstate(divide="ignore", invalid="ignore"):
        crossing = (edges - low) / change
    crossing = np.where(change == 0, np.where(edges <= low, -np.inf, np.inf), crossing)
    falling = change < 0
    start = np.where(falling, crossing[1:], crossing[:-1])
    end = np.where(falling, crossing[:-1], crossing[1:])
    known = np.isfinite(change)
    start = np.concatenate([np.where(known, np.clip(start, 0, 1), 0), np.zeros((1, len(low)))])
    end = np.concatenate([np.where(known, np.clip(end, 0, 1), 0), np.where(known, 0.0, 1.0)[None]])
    return start, end


def column_weights(
    pieces: Pieces, boundaries: FloatArray, top: float = 0.0, bottom: float = np.inf
) -> tuple[FloatArray, FloatArray]:
    """Return what the shares at the upper and the lower end of each piece weigh, m, (n_class, n_piece) each.

    Between the depths ``top`` and ``bottom``. The two add up to the height of the piece in the class.
    """
    height = pieces.bottom - pieces.top
    start, end = class_parts(pieces, boundaries)
    start = np.maximum(start, np.clip((top - pieces.top) / height, 0, 1))
    end = np.minimum(end, np.clip((bottom - pieces.top) / height, 0, 1))
    upper, lower = linear_weights(start, end)
    return upper * height, lower * height


def station_widths(lengths: FloatArray, filled: NDArray[np.bool_]) -> FloatArray:
    """Return how much of a track each station stands for, km, (n_station,): half of each filled leg beside it."""
    half = np.where(filled, lengths, 0.0) / 2
    return np.asarray(np.concatenate([half, [0.0]]) + np.concatenate([[0.0], half]))


def resolved_intervals(pieces: Pieces) -> FloatArray:
    """Return the depths between which the pieces of one station are resolved, (n_interval, 2), none touching."""
    found: list[list[float]] = []
    for top, bottom in zip(pieces.top[pieces.resolved], pieces.bottom[pieces.resolved], strict=True):
        if found and top <= found[-1][1]:
            found[-1][1] = float(bottom)
        else:
            found.append([float(top), float(bottom)])
    return np.array(found).reshape(-1, 2)


def intersection(one: FloatArray, other: FloatArray) -> FloatArray:
    """Return the depths that lie in both of two lists of intervals, (n, 2) each."""
    top = np.maximum(one[:, None, 0], other[None, :, 0])
    bottom = np.minimum(one[:, None, 1], other[None, :, 1])
    there = bottom > top
    return np.stack([top[there], bottom[there]], axis=1)
