"""Isotope ratios in a mixture: the row of a ratio is its product with the amount of the element.

A mixture has the mean of the products and the mean of the amounts, and its ratio is the one over the other; the
mean of the ratios it has only where all amounts are alike. Everything here is between values as they
are listed and values as they stand in the equations, its rows. Other properties are the same in both.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.properties import AMOUNT_OF
from pipeline.problems import BrokenPromise

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]


def _pairs(properties: Sequence[str]) -> Iterator[tuple[int, int]]:
    """Yield the places of every ratio and of its amount."""
    for place, name in enumerate(properties):
        if name in AMOUNT_OF:
            if AMOUNT_OF[name] not in properties:
                raise BrokenPromise(f"{name} is mixed without {AMOUNT_OF[name]}")
            yield place, properties.index(AMOUNT_OF[name])


def usable_together(properties: Sequence[str]) -> tuple[str, ...]:
    """Return properties without the ratios whose amount is not among them."""
    return tuple(name for name in properties if AMOUNT_OF.get(name, name) in properties)


def rows_of(properties: Sequence[str], values: FloatArray) -> FloatArray:
    """Return listed values (..., n_property) as they stand in the equations."""
    rows = np.array(values, dtype=np.float64)
    with np.errstate(over="ignore", invalid="ignore"):  # a value of any size is for the solver to refuse
        for ratio, amount in _pairs(properties):
            rows[..., ratio] *= rows[..., amount]
    return rows


def listed_of(properties: Sequence[str], rows: FloatArray) -> FloatArray:
    """Return rows of the equations (..., n_property) as listed values."""
    values = np.array(rows, dtype=np.float64)
    with np.errstate(all="ignore"):
        for ratio, amount in _pairs(properties):
            values[..., ratio] /= values[..., amount]
    return values


def uncertainty_in_rows(properties: Sequence[str], values: FloatArray, uncertainty: FloatArray) -> FloatArray:
    """Return the standard uncertainties of rows, (..., n_property), from those of listed values, independent.

    That of a product holds both: hypot(amount u(ratio), ratio u(amount)). That the product and the amount then err
    together is left out of the weights: by 6 % of the product's uncertainty at 1 per mil, with usual measurements of
    DIC (4 umol/kg) and carbon-13 (0.03 per mil).
    """
    spread = np.array(np.broadcast_to(uncertainty, np.shape(values)), dtype=np.float64)
    with np.errstate(over="ignore", invalid="ignore"):
        for ratio, amount in _pairs(properties):
            spread[..., ratio] = np.hypot(
                values[..., amount] * spread[..., ratio], values[..., ratio] * spread[..., amount]
            )
    return spread


def covariance_in_rows(properties: Sequence[str], values: FloatArray, covariance: FloatArray) -> FloatArray:
    """Return the covariance of the rows of one source, (n, n), from that of its listed values (n,), to first order."""
    slopes = np.eye(len(properties))
    for ratio, amount in _pairs(properties):
        slopes[ratio, ratio], slopes[ratio, amount] = values[amount], values[ratio]
    return np.asarray(slopes @ covariance @ slopes.T)


def parts_in_rows(
    properties: Sequence[str], absolute: FloatArray, relative: FloatArray, reference: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return absolute and relative parts of uncertainties of rows, (n_property,) each, from those of listed values.

    Parameters
    ----------
    properties
        Names.
    absolute, relative
        Of listed values, (n_property,).
    reference
        Rows near those that the parts are for, (n_property,): amounts of all samples count as these.

    """
    own, part = absolute.copy(), relative.copy()
    for ratio, amount in _pairs(properties):
        own[ratio] = absolute[ratio] * abs(reference[amount])
        of_amount = np.hypot(absolute[amount] / abs(reference[amount]), relative[amount])
        part[ratio] = np.hypot(relative[ratio], of_amount)
    return own, part


def listed_residuals(properties: Sequence[str], observed: FloatArray, residuals: FloatArray) -> FloatArray:
    """Return residuals, fitted less observed, of listed values, from rows and their residuals; all (n, n_property)."""
    if not any(True for _ in _pairs(properties)):
        return residuals
    listed = listed_of(properties, observed + residuals) - listed_of(properties, observed)
    ratios = [place for place, _ in _pairs(properties)]
    found = residuals.copy()
    found[:, ratios] = listed[:, ratios]
    return found
