"""What the properties of sea water imply of each other: a robust centre and covariance, and what departs from it.

Arrays in, arrays out.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]

# Scatter of a normal distribution in median absolute deviations.
SIGMA = 1.4826
# Standard deviations from which a value does not pull at the first covariance.
_WINSOR = 2.5
# Part of the samples that the covariance is made of, and how often these are chosen anew.
_KEPT, _STEPS = 0.8, 3
# Part of a variance that is added to it, so that properties in a fixed ratio can be compared all the same.
_RIDGE = 1e-8


class Shape(NamedTuple):
    """A robust centre, (n_variable,), and covariance, (n_variable, n_variable)."""

    centre: FloatArray
    covariance: FloatArray


def robust_shape(values: FloatArray) -> Shape:
    """Return centre and covariance of most samples, those that lie closest together.

    Concentration steps (Rousseeuw and Van Driessen 1999, from memory) from a covariance of winsorised values:
    the same samples give the same answer, with nothing drawn by lot. The covariance is that of the samples
    kept, so smaller than that of all; whoever uses it scales what comes out.

    Parameters
    ----------
    values
        Without gaps, (n_sample, n_variable), with more samples than variables.

    """
    middle = medians(values)
    scale = SIGMA * medians(np.abs(values - middle))
    spread = values.std(axis=0)
    scale = np.where(scale > 0, scale, np.where(spread > 0, spread, 1.0))
    normal = (values - middle) / scale
    clipped = np.clip(normal, -_WINSOR, _WINSOR)
    centre, covariance = np.zeros(values.shape[1]), _covariance(clipped)
    n_kept = max(int(_KEPT * len(values)), values.shape[1] + 1)
    for _ in range(_STEPS):
        away = normal - centre
        distance = ((away @ np.linalg.inv(covariance)) * away).sum(axis=1)
        kept = normal[distance <= np.partition(distance, n_kept - 1)[n_kept - 1]]
        centre, covariance = kept.mean(axis=0), _covariance(kept)
    return Shape(middle + centre * scale, covariance * np.outer(scale, scale))


def conditional_residuals(values: FloatArray, shape: Shape) -> tuple[FloatArray, FloatArray]:
    """Return how far each value is from what the sample's other values imply, and that in standard deviations.

    Both are (n_sample, n_variable), NaN where the value is missing; a missing value implies nothing of others.
    If one value of a sample is wrong, it is the one furthest away in standard deviations.

    Parameters
    ----------
    values
        NaN where missing, (n_sample, n_variable).
    shape
        Their centre and covariance.

    """
    residual, normal = np.full(values.shape, np.nan), np.full(values.shape, np.nan)
    present = ~np.isnan(values)
    which = present @ (1 << np.arange(values.shape[1]))  # a number for each pattern of gaps
    for number in np.unique(which):
        rows = np.flatnonzero(which == number)
        pattern = present[rows[0]]
        if pattern.sum() < 2:
            continue
        there = np.flatnonzero(pattern)
        precision = np.linalg.inv(shape.covariance[np.ix_(there, there)])
        own = np.diag(precision)
        cells = np.ix_(rows, there)
        pulled = (values[cells] - shape.centre[there]) @ precision
        residual[cells] = pulled / own
        normal[cells] = pulled / np.sqrt(own)
    return residual, normal


def medians(values: FloatArray) -> FloatArray:
    """Return the median of each column of values without gaps, (n_variable,): numpy's own, to the bit, and faster."""
    columns = np.sort(np.ascontiguousarray(values.T), axis=1)
    lower, upper = columns[:, (len(values) - 1) // 2], columns[:, len(values) // 2]
    return np.asarray((lower + upper) / 2.0 if len(values) % 2 == 0 else upper)


def _covariance(values: FloatArray) -> FloatArray:
    """Return the covariance of values that are about one in size, made safe to invert."""
    away = values - values.mean(axis=0)
    covariance = away.T @ away / (len(values) - 1)
    return np.asarray(covariance + np.eye(len(covariance)) * _RIDGE, dtype=np.float64)
