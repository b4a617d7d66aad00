"""How uncertain the carbon anomalies are: first order, from the measurements and the published uncertainties of ratios.

Arrays in, arrays out, in umol/kg; NaN in gives NaN out. Salinity and temperature are so certain beside carbon and
oxygen that their uncertainties are left out.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from pipeline.tables import FloatArray
    from pipeline.tracers.stoichiometry import Ratio, Stoichiometry


@dataclass(frozen=True, slots=True)
class Uncertain:
    """Standard uncertainties of what anomalies are made of, (n,) each, umol/kg."""

    dic: FloatArray
    alkalinity: FloatArray
    oxygen: FloatArray
    nitrate: FloatArray
    phosphate: FloatArray
    relation: float  # of preformed alkalinity


def anomaly_uncertainties(
    of: Uncertain,
    dilution: FloatArray,
    aou: FloatArray,
    ratios: Stoichiometry,
    per_nitrate: float,
    per_po: float,
) -> dict[str, FloatArray]:
    """Return the standard uncertainties of the anomalies, by registry name, (n,) each.

    Oxygen stands in several terms of an anomaly, and so do the ratios: their parts are added before they are squared.
    C* is defined by its ratios, which are exact in it; what respiration and dissolution added is not.

    Parameters
    ----------
    of
        What goes in.
    dilution
        Reference salinity over salinity, (n,).
    aou
        Apparent oxygen utilization, (n,).
    ratios
        Of respiration.
    per_nitrate
        Alkalinity that one nitrate takes away.
    per_po
        Slope of preformed alkalinity against PO.

    """
    carbon, nitrogen = ratios.carbon.value / ratios.oxygen.value, ratios.nitrogen_per_oxygen
    of_carbon, of_nitrogen, of_oxygen = (
        _part(ratio) for ratio in (ratios.carbon, ratios.nitrogen, ratios.oxygen)
    )
    put_back = 0.5 * per_nitrate * nitrogen  # of DIC, per AOU
    by_po = (
        np.zeros_like(aou) if per_po == 0 else _root(of.oxygen, ratios.oxygen.value * of.phosphate) * per_po
    )
    po_of_phosphate = per_po * ratios.oxygen.value * of.phosphate if per_po else 0.0
    return {
        "dic_normalised": dilution * of.dic,
        "alkalinity_normalised": dilution * of.alkalinity,
        "potential_alkalinity": dilution * _root(of.alkalinity, per_nitrate * of.nitrate),
        "c_star": _root(of.dic, 0.5 * of.alkalinity, (carbon + 0.5 * nitrogen) * of.oxygen),
        "dic_soft_tissue": _root(carbon * of.oxygen, carbon * aou * np.hypot(of_carbon, of_oxygen)),
        "preformed_alkalinity": _root(by_po, of.relation),
        "dic_calcium_carbonate": _root(
            0.5 * of.alkalinity,
            0.5 * of.relation,
            (0.5 * per_po + put_back) * of.oxygen,
            0.5 * po_of_phosphate,
            put_back * aou * np.hypot(of_nitrogen, of_oxygen),
        ),
        "preformed_dic": _root(
            of.dic,
            0.5 * of.alkalinity,
            0.5 * of.relation,
            (carbon + put_back + 0.5 * per_po) * of.oxygen,
            0.5 * po_of_phosphate,
            carbon * aou * of_carbon,
            put_back * aou * of_nitrogen,
            (carbon + put_back) * aou * of_oxygen,
        ),
    }


def _part(ratio: Ratio) -> float:
    """Return the published uncertainty of a ratio as a part of it, 0 where none was published."""
    return (ratio.uncertainty or 0.0) / ratio.value


def _root(*parts: FloatArray | float) -> FloatArray:
    """Return the root of the sum of squares."""
    return np.sqrt(sum(np.square(part) for part in parts))
