"""The census of one section: the area of each source water in each density class, and what is not resolved."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.census.areas import column_weights, station_widths
from pipeline.census.pieces import STATION_GAP

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from pipeline.census.section import Section
    from pipeline.mixing.member_sums import MemberSums

    FloatArray = NDArray[np.float64]

KM = 1e-3  # per m


@dataclass(frozen=True, eq=False)
class Layout:
    """How much of a section each level stands for, and what nothing stands for. The first class is the whole."""

    weights: FloatArray  # (1 + n_class, n_level) km2, or km where the section has no width
    resolved: FloatArray  # (1 + n_class,) the same
    unresolved: Mapping[str, FloatArray]  # by reason, (1 + n_class,)
    has_width: bool  # else the columns of its stations are taken together, each as if one km wide
    gaps: tuple[tuple[str, str, float], ...]  # legs that are too long: from and to, km
    alone: tuple[str, ...]  # stations that stand for nothing: no other is near enough


@dataclass(frozen=True, eq=False)
class Shares:
    """Parts that sources have in a whole, and how uncertain these are; NaN where there is nothing."""

    area: FloatArray  # (1 + n_class, n_source)
    area_uncertainty: FloatArray
    share: FloatArray  # of what is resolved
    share_uncertainty: FloatArray


def lay_out(section: Section, boundaries: FloatArray) -> Layout:
    """Return how much of a section each of its levels stands for.

    The trapezoid rule: shares linear in depth between the samples of a station, and what that gives of each column
    linear from station to station, so that every station stands for half of the legs beside it.

    Parameters
    ----------
    section
        Of n_level levels.
    boundaries
        Densities between the classes, (n_boundary,): n_boundary + 2 classes, the last without density.

    """
    pieces, lengths = section.pieces, section.lengths
    width = station_widths(lengths, section.filled) if len(section.names) else np.zeros(0)
    has_width = bool((width > 0).any())
    if not has_width:
        width = np.ones(len(section.names))
    upper, lower = column_weights(pieces, boundaries)
    upper, lower = (_with_total(part * width[pieces.station] * KM) for part in (upper, lower))
    known = pieces.resolved
    weights = np.zeros((len(upper), section.n_level))
    for part, level in ((upper, pieces.upper), (lower, pieces.lower)):
        weights += np.array([np.bincount(level[known], own[known], section.n_level) for own in part])
    height = upper + lower
    unresolved = {
        reason: height[:, pieces.reason == reason].sum(axis=1)
        for reason in sorted(set(pieces.reason[~known]))
    }
    gaps: tuple[tuple[str, str, float], ...] = ()
    if has_width:
        far = np.flatnonzero(~section.filled)
        gaps = tuple((section.names[k], section.names[k + 1], float(lengths[k])) for k in far)
        if far.size:
            area = float((lengths[far] * (section.floor[far] + section.floor[far + 1]) / 2).sum()) * KM
            unresolved[STATION_GAP] = np.array([area, *[0.0] * (len(height) - 2), area])
    alone = tuple(name for name, own in zip(section.names, width, strict=True) if own == 0)
    return Layout(weights, height[:, known].sum(axis=1), unresolved, has_width, gaps, alone)


def _with_total(classes: FloatArray) -> FloatArray:
    """Return (1 + n_class, n) of (n_class, n): the whole first."""
    return np.concatenate([classes.sum(axis=0)[None], classes])


def shares_of(sums: MemberSums, resolved: FloatArray) -> Shares:
    """Return the areas of sources, and their parts of what is resolved, (n_row,), with the spread over the members."""
    with np.errstate(divide="ignore", invalid="ignore"):
        part = np.where(resolved > 0, 1 / resolved, np.nan)[:, None]
    spread = sums.members.std(axis=0, ddof=1)
    return Shares(sums.best, spread, sums.best * part, spread * part)
