"""Carbon anomalies: DIC and alkalinity without what dilution, respiration or calcium carbonate do.

Arrays in, arrays out. All amounts are in umol/kg and broadcast; NaN in gives NaN out. Formulas are from
memory, except where it says verified.
"""

from __future__ import annotations

from enum import StrEnum
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from pipeline.seawater import Domain
from pipeline.tracers.carbonate_inputs import POSSIBLE
from pipeline.tracers.choices import chosen
from pipeline.tracers.stoichiometry import stoichiometry
from pipeline.variables import ANOMALIES

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pipeline.settings import TracerSettings
    from pipeline.tables import FloatArray
    from pipeline.tracers.stoichiometry import Stoichiometry
    from pipeline.usable import Rows


class PotentialAlkalinityForm(StrEnum):
    """Published forms of potential alkalinity, by citation."""

    BREWER_1975 = "brewer_1975"
    CARTER_2014 = "carter_2014"


# Alkalinity that goes as one nitrate comes. Brewer et al. 1975; Carter et al. 2014, BG 11:7349, where sulfate and
# phosphate are counted too (that paper's potential alkalinity verified, its 1.26 from memory).
ALKALINITY_PER_NITRATE: Mapping[PotentialAlkalinityForm, float] = MappingProxyType(
    {PotentialAlkalinityForm.BREWER_1975: 1.0, PotentialAlkalinityForm.CARTER_2014: 1.26}
)
ALKALINITY_PER_CALCIUM_CARBONATE = 2.0  # exact, by charge

# What is computed with; the checks judge by narrower limits. Fresher water has no salinity to divide by.
_SALINITY = Domain(1.0, 60.0)
_OXYGEN, _NITRATE, _PHOSPHATE, _AOU = (
    Domain(-10.0, 1000.0),
    Domain(-1.0, 200.0),
    Domain(-0.1, 10.0),
    Domain(-500.0, 1000.0),
)
_TEMPERATURE = Domain(-6.0, 50.0)


def normalised_friis_2003(
    amount: FloatArray, salinity: FloatArray, reference: float, without_salt: float
) -> FloatArray:
    """Return an amount as it would be at the salinity ``reference``, diluted with water that has ``without_salt``.

    (X - X0) S_ref / S + X0. Friis et al. 2003; with X0 zero the plain proportion S_ref / S.
    """
    return (amount - without_salt) * (reference / salinity) + without_salt


def alkalinity_per_nitrate(name: str) -> float:
    """Return how much alkalinity one nitrate that respiration frees takes away, of the form called ``name``.

    Raises
    ------
    SettingsProblem
        With the names that exist.

    """
    return chosen(ALKALINITY_PER_NITRATE, "tracers.potential_alkalinity", name)


def potential_alkalinity(
    alkalinity: FloatArray, nitrate: FloatArray, salinity: FloatArray, per_nitrate: float, reference: float
) -> FloatArray:
    """Return (TA + per_nitrate NO3) S_ref / S: respiration and dilution leave it as it is.

    Brewer et al. 1975, with 1 per nitrate; with the 1.26 of Carter et al. 2014 normalised in the same way, which
    that paper does not.
    """
    return (alkalinity + per_nitrate * nitrate) * (reference / salinity)


def c_star_gruber_1996(
    dic: FloatArray, oxygen: FloatArray, alkalinity: FloatArray, ratios: Stoichiometry
) -> FloatArray:
    """Return C*, DIC + r_C/r_O O2 - 1/2 (TA - r_N/r_O O2), which mixes, and which neither process changes.

    Gruber, Sarmiento and Stocker 1996, GBC 10:809. One nitrate takes one of alkalinity here, whatever the settings
    say of potential alkalinity.
    """
    per_oxygen = ratios.carbon.value / ratios.oxygen.value
    return dic + per_oxygen * oxygen - 0.5 * (alkalinity - ratios.nitrogen_per_oxygen * oxygen)


def soft_tissue(aou: FloatArray, ratios: Stoichiometry) -> FloatArray:
    """Return DIC that respiration freed: AOU times carbon per oxygen. Gruber et al. 1996."""
    return aou * (ratios.carbon.value / ratios.oxygen.value)


def calcium_carbonate(
    alkalinity: FloatArray,
    preformed: FloatArray,
    aou: FloatArray,
    ratios: Stoichiometry,
    per_nitrate: float,
) -> FloatArray:
    """Return DIC that dissolving calcium carbonate added: half the alkalinity beyond the preformed one.

    1/2 (TA - TA0 + per_nitrate r_N/r_O AOU): what the nitrate of respiration took away is put back first.
    Gruber et al. 1996, with 1 per nitrate. It is as good as ``preformed``, of which an error counts by half.
    """
    put_back = per_nitrate * ratios.nitrogen_per_oxygen * aou
    return (alkalinity - preformed + put_back) / ALKALINITY_PER_CALCIUM_CARBONATE


def anomalies(data: Rows, settings: TracerSettings) -> dict[str, FloatArray]:
    """Return the carbon anomalies of a table of samples, by registry name, (n_row,) each.

    Preformed alkalinity is the linear relation of the settings, and missing without one: with it go the calcium
    carbonate part and preformed DIC.

    Parameters
    ----------
    data
        n_row samples with their TEOS-10 columns and tracers.
    settings
        Forms, ratios and relations.

    Raises
    ------
    SettingsProblem
        If a setting names a form that does not exist.

    """
    ratios = stoichiometry(settings.stoichiometry)
    per_nitrate = alkalinity_per_nitrate(settings.potential_alkalinity)

    def usable(name: str, domain: Domain) -> FloatArray:
        values = data.usable(name)
        return np.where(domain.holds(values), values, np.nan)

    dic, alkalinity = (usable(name, POSSIBLE[name]) for name in ("dic", "alkalinity"))
    salinity, aou = usable("practical_salinity", _SALINITY), usable("aou", _AOU)
    oxygen, nitrate = usable("oxygen", _OXYGEN), usable("nitrate", _NITRATE)
    preformed = np.full(len(data), np.nan)
    if (relation := settings.preformed_alkalinity) is not None:
        terms = (
            (relation.per_salinity, salinity),
            (relation.per_potential_temperature, usable("potential_temperature", _TEMPERATURE)),
            (relation.per_po, oxygen + ratios.oxygen.value * usable("phosphate", _PHOSPHATE)),
        )
        preformed = np.where(np.isnan(alkalinity), np.nan, relation.intercept)
        for slope, values in terms:
            if slope:
                preformed = preformed + slope * values
        preformed = np.where(POSSIBLE["alkalinity"].holds(preformed), preformed, np.nan)
    respired = np.where(np.isnan(dic), np.nan, soft_tissue(aou, ratios))
    dissolved = calcium_carbonate(alkalinity, preformed, aou, ratios, per_nitrate)
    reference = settings.reference_salinity
    return {
        "dic_normalised": normalised_friis_2003(dic, salinity, reference, settings.dic_without_salt),
        "alkalinity_normalised": normalised_friis_2003(
            alkalinity, salinity, reference, settings.alkalinity_without_salt
        ),
        "potential_alkalinity": potential_alkalinity(alkalinity, nitrate, salinity, per_nitrate, reference),
        "c_star": c_star_gruber_1996(dic, oxygen, alkalinity, ratios),
        "dic_soft_tissue": respired,
        "preformed_alkalinity": preformed,
        "dic_calcium_carbonate": dissolved,
        "preformed_dic": dic - respired - dissolved,
    }


def anomaly_forms(settings: TracerSettings) -> dict[str, dict[str, str]]:
    """Return, by column, which forms, ratios and relations were taken: metadata of the columns."""
    ratios = f"ratios {settings.stoichiometry}"
    reference = f"salinity {settings.reference_salinity:g}"
    taken = alkalinity_per_nitrate(settings.potential_alkalinity)
    per_nitrate = f"{settings.potential_alkalinity}, {taken:g} per nitrate"
    relation = settings.preformed_alkalinity
    preformed = "no relation in the settings"
    if relation is not None:
        preformed = (
            f"{relation.intercept:g} {relation.per_salinity:+g} S {relation.per_potential_temperature:+g} theta"
            f" {relation.per_po:+g} PO: {relation.reference}"
        )
    told = {
        "dic_normalised": f"{reference}, {settings.dic_without_salt:g} umol kg-1 without salt",
        "alkalinity_normalised": f"{reference}, {settings.alkalinity_without_salt:g} umol kg-1 without salt",
        "potential_alkalinity": f"{per_nitrate}, {reference}",
        "c_star": ratios,
        "dic_soft_tissue": ratios,
        "preformed_alkalinity": preformed,
        "dic_calcium_carbonate": f"{ratios}, {per_nitrate}, preformed alkalinity {preformed}",
        "preformed_dic": f"{ratios}, {per_nitrate}, preformed alkalinity {preformed}",
    }
    return {variable.name: {"form": told[variable.name]} for variable in ANOMALIES}
