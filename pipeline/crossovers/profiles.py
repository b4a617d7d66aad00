"""The deep profiles of a cruise's stations, and two of them on the same levels."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from scipy.interpolate import PchipInterpolator

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]


@dataclass(frozen=True)
class Profile:
    """Values of one station on one kind of surface; all arrays (n_level,), surfaces strictly increasing."""

    surface: FloatArray
    pressure: FloatArray  # dbar
    value: FloatArray
    _curve: list[PchipInterpolator] = field(default_factory=list, repr=False, compare=False)

    def at(self, levels: FloatArray, widest_gap: float) -> FloatArray:
        """Return values at levels, (n_wanted,), piecewise cubic Hermite, NaN outside the profile and in its gaps.

        Parameters
        ----------
        levels
            In the unit of ``surface``.
        widest_gap
            dbar between two samples across which nothing is interpolated.

        References
        ----------
        Fritsch and Carlson 1980, SIAM J. Numer. Anal. 17:238 (from memory): no overshoot between samples.

        """
        last = len(self.surface) - 1
        below = np.clip(np.searchsorted(self.surface, levels), 0, last)
        on_sample = self.surface[below] == levels
        above = np.maximum(below - 1, 0)
        bridged = np.abs(self.pressure[below] - self.pressure[above]) <= widest_gap
        inside = (levels >= self.surface[0]) & (levels <= self.surface[last])
        known = inside & (on_sample | bridged)
        found = np.full(len(levels), np.nan)
        found[known] = self._interpolated(levels[known])
        return found

    def _interpolated(self, levels: FloatArray) -> FloatArray:
        if len(self.surface) == 1:
            return np.full(len(levels), self.value[0])
        if not self._curve:
            # scipy divides by the slopes, which may be next to nothing; the slope it makes of that is zero
            with np.errstate(over="ignore"):
                self._curve.append(PchipInterpolator(self.surface, self.value, extrapolate=False))
        return np.asarray(self._curve[0](levels), dtype=np.float64)


def make_profile(
    surface: FloatArray, pressure: FloatArray, value: FloatArray, resolution: float
) -> Profile | None:
    """Return the profile of one station, None where no sample has all that is needed.

    Samples whose surfaces lie within ``resolution`` of the lightest of them are one level, their mean.

    Parameters
    ----------
    surface, pressure, value
        Of every sample, (n_sample,) in any order, NaN where missing.
    resolution
        In the unit of ``surface``.

    """
    known = np.flatnonzero(np.isfinite(surface) & np.isfinite(pressure) & np.isfinite(value))
    if not len(known):
        return None
    order = known[np.lexsort((value[known], pressure[known], surface[known]))]
    s = surface[order]
    level = np.zeros(len(s), dtype=np.int64)
    first = s[0]
    for k in range(1, len(s)):
        level[k] = level[k - 1] + (s[k] - first >= resolution)
        if level[k] != level[k - 1]:
            first = s[k]
    count = np.bincount(level)
    means = [np.bincount(level, column[order]) / count for column in (surface, pressure, value)]
    return Profile(means[0], means[1], means[2])


@dataclass(frozen=True, slots=True)
class Comparison:
    """One profile less another; arrays are (n_level,)."""

    surface: FloatArray
    offset: FloatArray
    other: FloatArray  # value of the other profile
    independent: int  # levels that the sparser profile has of its own in what both share


def compare(one: Profile, other: Profile, widest_gap: float, least_span: float = 0.0) -> Comparison | None:
    """Return ``one`` less ``other`` at the levels that either was sampled at and both reach.

    At a level one of the two is a sample and the other interpolated, so that swapping them changes the sign
    and nothing else. None where they share no level, or a range of surfaces narrower than ``least_span``.
    """
    low = max(one.surface[0], other.surface[0])
    high = min(one.surface[-1], other.surface[-1])
    if not high - low >= least_span:
        return None
    own = [p.surface[(p.surface >= low) & (p.surface <= high)] for p in (one, other)]
    levels = np.sort(np.concatenate(own))
    levels = levels[np.diff(levels, prepend=-np.inf) > 0]
    mine, theirs = one.at(levels, widest_gap), other.at(levels, widest_gap)
    known = np.isfinite(mine) & np.isfinite(theirs)
    if not known.any():
        return None
    independent = min(int(known[np.searchsorted(levels, samples)].sum()) for samples in own)
    return Comparison(levels[known], mine[known] - theirs[known], theirs[known], max(independent, 1))
