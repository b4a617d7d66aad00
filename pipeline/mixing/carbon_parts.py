"""What calcium carbonate did to the samples of a mixture, and where the carbon-13 of their DIC came from."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.products import rows_of
from pipeline.mixing.properties import AMOUNT_OF

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from pipeline.mixing.entries import Catalogue, SourceSet

    FloatArray = NDArray[np.float64]

CALCIUM_CARBONATE, RATIO = "calcium_carbonate", "delta_carbon_13"
QUANTITIES = ("dic", "alkalinity")  # that calcium carbonate changes


def carbonate_parts(
    amount: FloatArray, uncertainty: FloatArray, dissolution: Mapping[str, float]
) -> dict[str, FloatArray]:
    """Return what dissolved and what it added, with standard uncertainties, by registry name, (n_sample,) each.

    Parameters
    ----------
    amount, uncertainty
        Calcium carbonate dissolved, (n_sample,), umol/kg.
    dissolution
        Change of each property per umol/kg of it.

    """
    parts = {CALCIUM_CARBONATE: amount, f"{CALCIUM_CARBONATE}_uncertainty": uncertainty}
    for name in QUANTITIES:
        parts[f"{name}_from_{CALCIUM_CARBONATE}"] = amount * dissolution[name]
        parts[f"{name}_from_{CALCIUM_CARBONATE}_uncertainty"] = uncertainty * abs(dissolution[name])
    return parts


def isotope_parts(
    catalogue: Catalogue,
    chosen: SourceSet,
    shares: FloatArray,
    amounts: Mapping[str, FloatArray],
    changes: Mapping[str, Mapping[str, float]],
) -> dict[str, FloatArray]:
    """Return the carbon-13 that came with the sources and what each process changed of it, (n_sample,) each.

    Empty where not every source gives it and DIC. Carbon of a process adds to the product of DIC and ratio and to
    DIC; the processes come one after the other, since a ratio has no parts that add up in any order.

    Parameters
    ----------
    catalogue, chosen
        The catalogue and the set.
    shares
        (n_sample, n_source).
    amounts
        Of every process of the set in the order of its further unknowns, (n_sample,).
    changes
        Of every process: change of each property, of the ratio the product's, per unit of the process.

    """
    names = (AMOUNT_OF[RATIO], RATIO)
    given = [catalogue.sources[code].properties for code in chosen.sources]
    if not all(name in properties for properties in given for name in names):
        return {}
    values = np.array([[properties[name].value for name in names] for properties in given])
    dic, product = (shares @ rows_of(names, values)).T
    parts = {}
    with np.errstate(all="ignore"):
        before = product / dic
        parts[f"{RATIO}_from_sources"] = before
        for process, amount in amounts.items():
            dic = dic + amount * changes[process][names[0]]
            product = product + amount * changes[process][RATIO]
            parts[f"{RATIO}_from_{process}"] = product / dic - before
            before = product / dic
    return parts
