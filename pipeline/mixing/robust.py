"""Centre, spread and correlation that neither outliers nor one large cruise can move: arrays in, arrays out."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

# The standard deviation of a normal distribution over its median absolute deviation; Rousseeuw and Croux
# 1993, J. Am. Stat. Assoc. 88:1273-1283 (from memory).
NORMAL_PER_MAD = 1.4826
# Least eigenvalue of a correlation matrix: a tenth of a per cent keeps it positive definite through rounding.
LEAST_EIGENVALUE = 1e-3


def sample_weights(cruise: IntArray, water: IntArray, present: BoolArray, most_per_cruise: int) -> FloatArray:
    """Return the weight of every sample, (n_sample,), zero where it is not present.

    A water that was recorded m times weighs 1/m each time. A cruise weighs as many as it has waters, at
    most ``most_per_cruise``: errors that a cruise has in common do not average out, so its tenth sample
    tells less than its first and its thousandth nothing (Kish 1965, the design effect of clusters: n samples
    of intraclass correlation c are worth n / (1 + (n - 1) c), never more than 1 / c).

    Parameters
    ----------
    cruise, water
        Numbers from 0, (n_sample,): which cruise, and which water. All samples of a water name one cruise.
    present
        Which samples have a value, (n_sample,).
    most_per_cruise
        Samples from which on a cruise weighs no more.

    """
    weights = np.zeros(len(present))
    parts = parts_of_waters(water, present)[present]
    waters = np.bincount(cruise[present], parts)[cruise[present]]  # of the sample's cruise
    weights[present] = parts * np.minimum(waters, most_per_cruise) / waters
    return weights


def parts_of_waters(water: IntArray, present: BoolArray) -> FloatArray:
    """Return which part of its water every sample is: 1/m where m samples are present, (n_sample,), else zero."""
    parts = np.zeros(len(present))
    parts[present] = 1 / np.bincount(water[present])[water[present]]
    return parts


def weighted_median(values: FloatArray, weights: FloatArray) -> float:
    """Return the value that parts the weight in halves; the mean of two where any between them does.

    Parameters
    ----------
    values, weights
        Both (n_sample,), at least one weight above zero.

    """
    order = np.lexsort((weights, values))
    below = np.cumsum(weights[order])
    half = below[-1] / 2
    near = 1e-12 * below[-1]  # of sums in another order
    lower = int(np.searchsorted(below, half - near))
    upper = int(np.searchsorted(below, half + near, side="right"))
    return float((values[order][lower] + values[order][upper]) / 2)


def weighted_spread(values: FloatArray, weights: FloatArray, centre: float) -> float:
    """Return 1.4826 times the weighted median of the distances from ``centre``: a robust standard deviation.

    Inputs as for ``weighted_median``.
    """
    return NORMAL_PER_MAD * weighted_median(np.abs(values - centre), weights)


def rank_correlation(one: FloatArray, other: FloatArray, weights: FloatArray) -> float:
    """Return the correlation of two normal quantities that has their weighted rank correlation.

    Ranks are the weight below a value and half of that at it, so that ties share theirs. Zero where one
    quantity does not vary.

    Parameters
    ----------
    one, other, weights
        All (n_sample,), at least one weight above zero.

    References
    ----------
    Spearman 1904, Am. J. Psychol. 15:72; Pearson 1907 for rho = 2 sin(pi/6 r) (both from memory).

    """
    ranks = np.stack([_weighted_ranks(one, weights), _weighted_ranks(other, weights)])
    deviations = ranks - np.average(ranks, axis=1, weights=weights)[:, None]
    products = (deviations * weights) @ deviations.T
    scale = np.sqrt(products[0, 0] * products[1, 1])
    if scale <= 0:
        return 0.0
    return float(2 * np.sin(np.pi / 6 * np.clip(products[0, 1] / scale, -1, 1)))


def _weighted_ranks(values: FloatArray, weights: FloatArray) -> FloatArray:
    """Return the weight below every value and half of that at it, (n_sample,)."""
    _, place = np.unique(values, return_inverse=True)
    at = np.bincount(place, weights)
    return np.asarray((np.cumsum(at) - at / 2)[place])


def effective_count(weights: FloatArray, parts: FloatArray) -> float:
    """Return how many waters of equal weight average as well as these; Kish 1965 (from memory).

    Parameters
    ----------
    weights, parts
        Weight of every sample, and which part of its water it is; both (n_sample,), all above zero.

    """
    return float(np.sum(weights)) ** 2 / float(np.sum(weights**2 / parts))


def shrunk(correlation: FloatArray, count: FloatArray) -> FloatArray:
    """Return a correlation matrix drawn towards independence as far as few samples ask for; positive definite.

    The part that is taken from all correlations alike is the sum of their sampling variances over the sum
    of their squares, which makes the expected squared error least; more is taken where the matrix, put
    together pair by pair, would not be positive definite.

    Parameters
    ----------
    correlation
        (n, n), ones on its diagonal.
    count
        How many samples each was found with, (n, n).

    References
    ----------
    Schaefer and Strimmer 2005, Stat. Appl. Genet. Mol. Biol. 4:32 (from memory).

    """
    if len(correlation) == 1:
        return correlation
    apart = ~np.eye(len(correlation), dtype=bool)
    squares = correlation[apart] ** 2
    variance = (1 - squares) ** 2 / np.maximum(count[apart] - 1, 1)
    part = float(variance.sum() / squares.sum()) if squares.any() else 1.0
    least = float(np.linalg.eigvalsh(correlation)[0])
    if least < LEAST_EIGENVALUE:
        part = max(part, (LEAST_EIGENVALUE - least) / (1 - least))
    return np.where(apart, correlation * (1 - min(part, 1.0)), 1.0)


def most_extreme(
    towards: FloatArray, weights: FloatArray, parts: FloatArray, fraction: float, least: int
) -> BoolArray:
    """Return the samples with the highest values, (n_sample,), that hold ``fraction`` of the weight.

    At least ``least`` waters are taken, and with the last of them every sample of the same value, so that
    the order of samples does not decide.

    Parameters
    ----------
    towards
        Values, (n_sample,); NaN is never taken.
    weights, parts
        Weight of every sample, zero for those that do not count, and which part of its water it is; (n_sample,).
    fraction, least
        Part of the whole weight, and number of waters.

    """
    known = np.flatnonzero(~np.isnan(towards) & (weights > 0))
    if not len(known):
        return np.zeros(len(towards), dtype=bool)
    order = known[np.argsort(-towards[known], kind="stable")]
    rounding = 1e-9
    held = np.cumsum(weights[order])
    enough = (held >= fraction * held[-1] * (1 - rounding)) & (np.cumsum(parts[order]) >= least - rounding)
    last = order[np.argmax(enough)] if enough.any() else order[-1]
    return np.asarray(towards >= towards[last])
