"""Corrections of all cruises at once from the offsets between them: arrays in, arrays out."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

# Correction, in standard deviations of what is presumed, from which on a cruise counts as off and no longer
# draws the others towards it (Huber 1964, Ann. Math. Stat. 35:73; 1.5 is common practice).
BEND = 1.5
ROUNDS = 100
SETTLED = 1e-10  # of the presumed standard deviation


@dataclass(frozen=True, slots=True)
class Inversion:
    """Corrections of cruises; arrays are (n_cruise,)."""

    correction: FloatArray  # to be added to the values
    uncertainty: FloatArray
    group: IntArray  # numbers from 0, the same for cruises that crossovers connect
    misfit: FloatArray  # of the cruise's group: reduced chi-square, NaN where there is nothing to judge it by


def invert(
    pairs: IntArray, offset: FloatArray, uncertainty: FloatArray, presumed: float, fixed: BoolArray
) -> Inversion:
    """Return the corrections m that make cruises agree and are no larger than they need to be.

    With x_i + m_i = x_j + m_j wanted, a crossover that found d = x_i - x_j says m_i - m_j = -d. Offsets tell
    differences only: the same amount on all cruises of a group changes no offset. What settles it is that a
    cruise's error is presumed to be zero, with a standard deviation; the corrections minimise

        sum (m_i - m_j + d_ij)^2 / s_ij^2  +  sum rho(m_i / presumed),      m = 0 where fixed

    with rho(z) = z^2, but growing in proportion to |z| from ``BEND`` on, so that one cruise that is far off
    does not spread its error over all others, as it does where squares are counted. The sum is convex: every
    round is the damped weighted least-squares solution m = -(G' W G + P)^-1 G' W d, whose inverse matrix is
    the covariance. Where the crossovers of a group contradict each other by more than they claim to be
    uncertain by, uncertainties grow by the square root of the reduced chi-square.

    Parameters
    ----------
    pairs
        The two cruises of every crossover, (n_crossover, 2), numbers below n_cruise.
    offset, uncertainty
        First less second and its standard uncertainty, (n_crossover,).
    presumed
        Standard deviation of a cruise's error.
    fixed
        Cruises whose correction is zero, (n_cruise,).

    References
    ----------
    Johnson, Robbins and Hufford 2001, J. Atmos. Ocean. Technol. 18; Wunsch 1996 (both from memory).

    """
    n_cruise = len(fixed)
    links = coo_array((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(n_cruise, n_cruise))
    group = connected_components(links, directed=False)[1].astype(np.int64)
    correction, deviation, misfit = np.zeros(n_cruise), np.zeros(n_cruise), np.full(n_cruise, np.nan)
    for number in range(int(group.max(initial=-1)) + 1):
        cruises = np.flatnonzero(group == number)
        mine = group[pairs[:, 0]] == number
        free = cruises[~fixed[cruises]]
        deviation[free] = presumed
        if not mine.any() or not len(free):
            continue
        G = np.zeros((int(mine.sum()), n_cruise))  # (n_crossover of the group, n_cruise)
        rows = np.arange(len(G))
        G[rows, pairs[mine, 0]], G[rows, pairs[mine, 1]] = 1.0, -1.0
        m, covariance = _solve(G[:, free], offset[mine], uncertainty[mine], presumed)
        left = (G[:, free] @ m + offset[mine]) / uncertainty[mine]
        # Without a fixed cruise the common part of all corrections fits nothing.
        spare = len(G) - (len(free) - (len(free) == len(cruises)))
        chi_square = float((left**2).sum()) / spare if spare > 0 else np.nan
        grown = np.sqrt(max(chi_square, 1.0)) if spare > 0 else 1.0
        correction[free], deviation[free] = m, np.sqrt(np.diag(covariance)) * grown
        misfit[cruises] = chi_square
    return Inversion(correction, deviation, group, misfit)


def _solve(
    G: FloatArray, offset: FloatArray, uncertainty: FloatArray, presumed: float
) -> tuple[FloatArray, FloatArray]:
    """Return corrections (n_free,) and their covariance (n_free, n_free); what is presumed bends at ``BEND``."""
    weighted = G / uncertainty[:, None] ** 2
    normal, right = weighted.T @ G, -(weighted.T @ offset)
    m: FloatArray = np.zeros(G.shape[1])
    for _ in range(ROUNDS):
        damping = np.diag(np.minimum(1.0, BEND * presumed / np.maximum(np.abs(m), 1e-300)) / presumed**2)
        before, m = m, np.asarray(np.linalg.solve(normal + damping, right), dtype=np.float64)
        if np.abs(m - before).max() <= SETTLED * presumed:
            break
    return m, np.asarray(np.linalg.inv(normal + damping), dtype=np.float64)
