"""How deep the mixed layer of every cast goes, by density, from the samples alone."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]

REFERENCE = 10.0  # dbar
# A cast whose samples begin deeper (a second cast for deep water, a surface bottle that failed) says nothing
# of the surface: its first sample would count as mixed layer, at whatever depth (our choice, no source).
DEEPEST_REFERENCE = 50.0  # dbar
FEWEST_LEVELS = 3  # with a density: fewer are no profile that could be judged (our choice, no source)
WIDEST_GAP = 500.0  # dbar between samples across which no layer is followed (our choice, no source)


def mixed_layer_pressure(
    cast: NDArray[np.int64], pressure: FloatArray, sigma0: FloatArray, excess: float
) -> FloatArray:
    """Return the pressure at which the mixed layer of each sample's cast ends, (n_sample,), NaN if unknown.

    It ends where sigma0, linear between samples, first exceeds that at 10 dbar by ``excess``. The reference
    is interpolated to 10 dbar, or is that of the first sample where the cast begins deeper. In a cast that
    nowhere exceeds it, the layer ends at the deepest sample with a density; it is not followed across a gap
    of more than 500 dbar. It is unknown in casts that begin below 50 dbar or have less than three densities.

    Parameters
    ----------
    cast
        (n_sample,) the same number for the samples of a cast.
    pressure, sigma0
        (n_sample,) in dbar and kg/m3, NaN where missing.
    excess
        kg/m3.

    References
    ----------
    de Boyer Montegut et al. 2004, J. Geophys. Res. 109:C12003 (from memory).

    """
    ends = np.full(len(cast), np.nan)
    known = np.flatnonzero(~np.isnan(pressure) & ~np.isnan(sigma0))
    if not known.size:
        return ends
    # One level after the other, cast by cast; at equal pressures the lighter first.
    order = known[np.lexsort((sigma0[known], pressure[known], cast[known]))]
    p, density, number = pressure[order], sigma0[order], cast[order]
    start = np.flatnonzero(np.diff(number, prepend=number[0] - 1))  # (n_cast,)
    size = np.diff(np.append(start, len(order)))
    last = start + size - 1

    # The levels on both sides of the reference pressure; the same level where one side has none.
    n_above = np.add.reduceat((p <= REFERENCE).astype(np.int64), start)
    upper = np.where(n_above > 0, start + n_above - 1, start)
    lower = np.minimum(start + n_above, last)
    surface = _between(p[upper], density[upper], p[lower], density[lower], np.full(len(start), REFERENCE))
    limit = surface + excess

    each = np.repeat(np.arange(len(start)), size)
    gap = (
        np.diff(p, prepend=p[0]) > WIDEST_GAP
    )  # within a cast: the first of a cast is never below its reference
    beyond = (gap | (density > limit[each])) & (p > np.maximum(REFERENCE, p[start])[each])
    place = np.minimum.reduceat(np.where(beyond, np.arange(len(order)), len(order)), start)
    ended = place < len(order)
    below = np.where(ended, place, last)
    above = np.where(ended, np.maximum(below - 1, start), last)
    end = _between(density[above], p[above], density[below], p[below], limit)
    end = np.where(ended, np.where(gap[below], p[above], end), p[last])
    end = np.where((p[start] <= DEEPEST_REFERENCE) & (size >= FEWEST_LEVELS), end, np.nan)

    found = np.searchsorted(number[start], cast)
    found = np.minimum(found, len(start) - 1)
    return np.where(number[start][found] == cast, end[found], np.nan)


def _between(x0: FloatArray, y0: FloatArray, x1: FloatArray, y1: FloatArray, x: FloatArray) -> FloatArray:
    """Return y at ``x`` on the line through two points, held between them; all (n,)."""
    span = x1 - x0
    part = np.clip((x - x0) / np.where(span == 0, 1.0, span), 0.0, 1.0)
    return np.asarray(np.where(span == 0, y0, y0 + part * (y1 - y0)))
