"""What source waters bring along, calcium carbonate among what changes it, and where carbon-13 of DIC came from."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.products import covariance_in_rows, rows_of
from pipeline.mixing.properties import AMOUNT_OF

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.mixing.entries import Catalogue, SourceSet

    FloatArray = NDArray[np.float64]

CALCIUM_CARBONATE, RATIO = "calcium_carbonate", "delta_carbon_13"
AMOUNT = AMOUNT_OF[RATIO]
QUANTITIES = ("dic", "alkalinity")  # that calcium carbonate changes


@dataclass(frozen=True, eq=False)
class Carried:
    """Quantities that the sources of a set bring along, as combinations of rows.

    Where every source gives carbon-13 and DIC, the last is the ratio of a mixture to first order about the mean of
    the sources: (P - ratio D) / D, of the products P and amounts D, with ratio and divisor those of the mean.
    """

    names: tuple[str, ...]  # properties whose rows are combined, those of the set and others
    listed: tuple[int, ...]  # places of the set's properties among them
    combined: FloatArray  # (n_quantity, n_name)
    rows: FloatArray  # of the sources, (n_source, n_name)
    has_ratio: bool

    @property
    def values(self) -> FloatArray:
        """Values of the quantities in the sources, (n_source, n_quantity)."""
        return np.asarray(self.rows @ self.combined.T)

    def row(self, name: str) -> FloatArray:
        """Return the rows of one property in the sources, (n_source,)."""
        return self.rows[:, self.names.index(name)]

    def covariances(self, catalogue: Catalogue, chosen: SourceSet) -> FloatArray:
        """Return the covariance of the rows of the set's properties and of the quantities, of every source."""
        each = np.concatenate([np.eye(len(self.names))[list(self.listed)], self.combined])
        sources = [catalogue.sources[code] for code in chosen.sources]
        of_rows = [
            covariance_in_rows(self.names, one.values_of(self.names), one.covariance_of(self.names))
            for one in sources
        ]
        return np.array([each @ covariance @ each.T for covariance in of_rows])


def carried_of(catalogue: Catalogue, chosen: SourceSet, quantities: Sequence[str]) -> Carried:
    """Return what the sources of a set bring along.

    Parameters
    ----------
    catalogue, chosen
        The catalogue and the set.
    quantities
        Amounts that every source of it gives.

    """
    sources = [catalogue.sources[code] for code in chosen.sources]
    has_ratio = all(name in source.properties for source in sources for name in (AMOUNT, RATIO))
    names = tuple(sorted({*chosen.properties, *quantities, *((AMOUNT, RATIO) if has_ratio else ())}))
    rows = np.array([rows_of(names, source.values_of(names)) for source in sources])
    combined = np.zeros((len(quantities) + has_ratio, len(names)))
    combined[np.arange(len(quantities)), [names.index(name) for name in quantities]] = 1.0
    if has_ratio:
        amount, product = names.index(AMOUNT), names.index(RATIO)
        mean = rows.mean(axis=0)
        combined[-1, product] = 1.0 / mean[amount]
        combined[-1, amount] = -mean[product] / mean[amount] ** 2
    listed = tuple(names.index(name) for name in chosen.properties)
    return Carried(names, listed, combined, rows, has_ratio)


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
    carried: Carried,
    shares: FloatArray,
    of_ratio: FloatArray,
    processes: Mapping[str, tuple[FloatArray, FloatArray]],
    changes: Mapping[str, Mapping[str, float]],
) -> dict[str, FloatArray]:
    """Return the carbon-13 that came with the sources and what each process changed of it, (n_sample,) each.

    Carbon of a process adds to the product of DIC and ratio and to DIC; the processes come one after the other, since
    a ratio has no parts that add up in any order. The uncertainty of a change is that of the process alone.

    Parameters
    ----------
    carried
        What the sources bring along, the ratio among it.
    shares
        (n_sample, n_source).
    of_ratio
        Standard uncertainty of the ratio among what is carried, (n_sample,).
    processes
        Of every process of the set, in the order of its further unknowns, its amount and the standard uncertainty
        of that, (n_sample,) each.
    changes
        Of every process: change of each property, of the ratio the product's, per unit of the process.

    """
    dic, product = shares @ carried.row(AMOUNT), shares @ carried.row(RATIO)
    parts = {}
    with np.errstate(all="ignore"):
        before = product / dic
        parts[f"{RATIO}_from_sources"] = before
        parts[f"{RATIO}_from_sources_uncertainty"] = of_ratio * (carried.row(AMOUNT).mean() / dic)
        for process, (amount, uncertainty) in processes.items():
            change = changes[process]
            dic = dic + amount * change[AMOUNT]
            product = product + amount * change[RATIO]
            slope = (change[RATIO] - before * change[AMOUNT]) / dic
            parts[f"{RATIO}_from_{process}"] = product / dic - before
            parts[f"{RATIO}_from_{process}_uncertainty"] = np.abs(slope) * uncertainty
            before = product / dic
    return parts
