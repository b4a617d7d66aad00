"""What came with the source waters and what respiration added, per sample, for quantities that respiration changes.

The first is the mean of the sources' values, weighted by the shares; the second the fixed ratio times the
phosphate released, negative for oxygen. Together, with what
calcium carbonate added, they are the fitted value. A quantity need not be among
the properties that the shares were found from: it is enough that every source of the set gives it.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.operators import operator_of
from pipeline.mixing.problem import equations_for, weighted_system
from pipeline.mixing.solver import groups
from pipeline.problems import BrokenPromise

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.mixing.blocks import Equations
    from pipeline.mixing.entries import Catalogue, SourceSet
    from pipeline.mixing.problem import MixingProblem

    FloatArray = NDArray[np.float64]

QUANTITIES = ("phosphate", "nitrate", "silicate", "oxygen", "dic", "alkalinity")


def quantities_of(catalogue: Catalogue, chosen: SourceSet) -> tuple[str, ...]:
    """Return those of ``QUANTITIES`` that every source of a set gives."""
    return tuple(
        name
        for name in QUANTITIES
        if all(name in catalogue.sources[code].properties for code in chosen.sources)
    )


def source_values(catalogue: Catalogue, chosen: SourceSet, names: Sequence[str]) -> FloatArray:
    """Return the catalogue's values, (n_source, n_name), in property units."""
    values = [[catalogue.sources[code].properties[name].value for name in names] for code in chosen.sources]
    return np.array(values).reshape(len(chosen.sources), len(names))


def first_order_uncertainty(
    problem: MixingProblem,
    observed: FloatArray,
    support: NDArray[np.int32],
    shares: FloatArray,
    measured: FloatArray,
    covariances: FloatArray,
    carried: FloatArray,
) -> FloatArray:
    """Return the standard uncertainty of what the source waters brought, (n_sample, n_quantity), to first order.

    With errors m of the measurements and e_i of the sources, what the sources brought is off by
    g (m - sum_i f_i e_i) + sum_i f_i e_iq, where g = sum_i v_i P_i goes through the operator P of the
    sample's support and the sources' values v, and e_iq is the error of the quantity itself.

    Parameters
    ----------
    problem
        What the samples were solved with.
    observed
        (n_sample, n_property), NaN where missing.
    support, shares
        Of the solution, (n_sample,) and (n_sample, n_source).
    measured
        Standard uncertainties of the measurements, (n_sample, n_property).
    covariances
        Of every source, (n_source, n_name, n_name): the names are the properties, then the quantities.
        A quantity that is a property as well stands there twice.
    carried
        Values of the quantities in the sources, (n_source, n_quantity).

    """
    n_sample, n_property = observed.shape
    n_source, n_quantity = carried.shape
    uncertainty = np.full((n_sample, n_quantity), np.nan)
    for columns, alike in groups(observed):
        equations = equations_for(problem, weighted_system(problem, columns), columns)
        for one in np.unique(support[alike]).tolist():
            rows = alike[support[alike] == one]
            own = np.zeros((n_quantity, covariances.shape[1]))
            own[:, columns] = carried.T @ _response(equations, one)[:n_source]
            of_measurement = (own[:, columns] ** 2) @ (measured[rows][:, columns] ** 2).T
            own[np.arange(n_quantity), n_property + np.arange(n_quantity)] -= 1.0
            of_source = np.einsum("qa,iab,qb->qi", own, covariances, own)  # per squared share
            uncertainty[rows] = np.sqrt(of_measurement + of_source @ (shares[rows] ** 2).T).T
    return uncertainty


def _response(equations: Equations, support: int) -> FloatArray:
    """Return how the unknowns of a support follow the properties of a system, (n_unknown, n_used).

    Zero for unknowns that take no part. The support is one that samples were solved with.
    """
    operator = operator_of(equations, support)
    if operator is None:
        raise BrokenPromise(f"support {support} has been solved with and has no operator")
    return np.where(operator.inside[:, None], operator.matrix, 0.0)


def split(
    shares: FloatArray, respiration: FloatArray, carried: FloatArray, ratios: Sequence[float]
) -> tuple[FloatArray, FloatArray]:
    """Return what the source waters brought and what respiration added, both (n_sample, n_quantity).

    Parameters
    ----------
    shares
        (n_sample, n_source).
    respiration
        Phosphate released, (n_sample,), umol/kg; NaN where the set knows no respiration.
    carried
        Values of the quantities in the sources, (n_source, n_quantity), umol/kg.
    ratios
        Change of each quantity per umol/kg of phosphate released, (n_quantity,).

    """
    return shares @ carried, respiration[:, None] * np.asarray(ratios)


def pseudo_age(respiration: FloatArray, ratios: Mapping[str, float], rate: float) -> FloatArray:
    """Return oxygen consumed over a rate of utilisation, (n_sample,), in years (Karstensen and Tomczak 1998).

    A pseudo-age is no ventilation age: the rate falls with depth by orders of magnitude and is not constant
    along the way of a water, oxygen was consumed in the sources before they mixed as well, and a mixture
    has no single age. It orders waters of similar history, no more.

    Parameters
    ----------
    respiration
        Phosphate released, (n_sample,), umol/kg.
    ratios
        Change of each property per umol/kg of phosphate; oxygen's is negative.
    rate
        Oxygen utilisation, umol/kg per year.

    """
    return respiration * (-ratios["oxygen"] / rate)
