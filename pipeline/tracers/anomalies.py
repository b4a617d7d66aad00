"""Carbon anomalies: DIC and alkalinity without what dilution, respiration or calcium carbonate do.

Arrays in, arrays out. All amounts are in umol/kg and broadcast; NaN in gives NaN out. Formulas are from
memory, except where it says verified.
"""

from __future__ import annotations

from enum import StrEnum
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from pipeline.findings import Finding, Severity
from pipeline.seawater import Domain
from pipeline.tracers.anomaly_uncertainties import Uncertain, anomaly_uncertainties
from pipeline.tracers.carbonate_inputs import POSSIBLE
from pipeline.tracers.choices import chosen
from pipeline.tracers.stoichiometry import stoichiometry
from pipeline.tracers.uncertainties import carbon_uncertainty, carbon_words, usual_uncertainty, usual_words

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from pipeline.carbonate_settings import CarbonateSettings
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
# What is normalised, and what it is like: no more or less of it than any sea water has.
_NORMALISED = {
    "dic_normalised": "dic",
    "alkalinity_normalised": "alkalinity",
    "potential_alkalinity": "alkalinity",
}
_MOST_DILUTED = (
    2.0  # times; beyond it the water that dilutes counts more than the sea's (our choice, no source)
)


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


def anomalies(data: Rows, settings: TracerSettings, carbonate: CarbonateSettings) -> dict[str, FloatArray]:
    """Return the carbon anomalies of a table of samples and their standard uncertainties, by registry name, (n_row,).

    They are made of measured values alone: what the carbonate system computes has an error of its own. Preformed
    alkalinity is the linear relation of the settings, and missing without one: with it go the calcium carbonate part
    and preformed DIC. What is normalised to more or less than any sea water has is missing.

    Parameters
    ----------
    data
        n_row samples with their TEOS-10 columns and tracers.
    settings
        Forms, ratios and relations.
    carbonate
        How uncertain DIC and alkalinity are.

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
    preformed, phosphate = np.full(len(data), np.nan), usable("phosphate", _PHOSPHATE)
    if (relation := settings.preformed_alkalinity) is not None:
        terms = (
            (relation.per_salinity, salinity),
            (relation.per_potential_temperature, usable("potential_temperature", _TEMPERATURE)),
            (relation.per_po, oxygen + ratios.oxygen.value * phosphate),
        )
        preformed = np.where(np.isnan(alkalinity), np.nan, relation.intercept)
        for slope, values in terms:
            if slope:
                preformed = preformed + slope * values
        preformed = np.where(POSSIBLE["alkalinity"].holds(preformed), preformed, np.nan)
    respired = np.where(np.isnan(dic), np.nan, soft_tissue(aou, ratios))
    dissolved = calcium_carbonate(alkalinity, preformed, aou, ratios, per_nitrate)
    reference = settings.reference_salinity
    found = {
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
    for name, like in _NORMALISED.items():
        found[name] = np.where(POSSIBLE[like].holds(found[name]), found[name], np.nan)
    uncertain = Uncertain(
        dic=carbon_uncertainty("dic", dic, carbonate),
        alkalinity=carbon_uncertainty("alkalinity", alkalinity, carbonate),
        oxygen=usual_uncertainty("oxygen", oxygen),
        nitrate=usual_uncertainty("nitrate", nitrate),
        phosphate=usual_uncertainty("phosphate", phosphate),
        relation=0.0 if relation is None else relation.uncertainty,
    )
    per_po = 0.0 if relation is None else relation.per_po
    of_each = anomaly_uncertainties(uncertain, reference / salinity, aou, ratios, per_nitrate, per_po)
    return found | {
        f"{name}_uncertainty": np.where(np.isnan(values), np.nan, of_each[name])
        for name, values in found.items()
    }


def dilution_findings(data: Rows, settings: TracerSettings) -> Iterator[Finding]:
    """Yield a note for samples so fresh that the water that dilutes makes most of what they are normalised to."""
    salinity, carbon = data.usable("practical_salinity"), data.usable("dic")
    carbon = np.where(np.isnan(carbon), data.usable("alkalinity"), carbon)
    least = settings.reference_salinity / _MOST_DILUTED
    with np.errstate(invalid="ignore"):
        count = int((~np.isnan(carbon) & (salinity < least)).sum())
    if count:
        low, high = POSSIBLE["dic"].low, POSSIBLE["dic"].high
        yield Finding(
            "carbon-dilution", Severity.NOTE,
            f"{count} samples with TCARBN or ALKALI have a salinity below {least:g}, from which dic_normalised,"
            " alkalinity_normalised and potential_alkalinity are made more than twice as large; expected water that"
            f" was diluted by less; they hold what the settings take for the water that dilutes"
            f" (tracers.dic_without_salt {settings.dic_without_salt:g}, tracers.alkalinity_without_salt"
            f" {settings.alkalinity_without_salt:g} umol/kg), and are missing beyond {low:g} to {high:g} umol/kg.",
            variable="practical_salinity", limit=f"{least:g}", count=count,
        )  # fmt: skip


def anomaly_forms(settings: TracerSettings, carbonate: CarbonateSettings) -> dict[str, dict[str, str]]:
    """Return, by column, which forms, ratios and relations were taken, and what its uncertainty holds."""
    whole = stoichiometry(settings.stoichiometry)
    ratios, of_ratios = whole.words, whole.uncertainty_words
    carbon, nitrogen, oxygen = (f"{r.value:g}" for r in (whole.carbon, whole.nitrogen, whole.oxygen))
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
        "c_star": f"DIC + {carbon}/{oxygen} O2 - 1/2 (TA - {nitrogen}/{oxygen} O2); {ratios}",
        "dic_soft_tissue": f"{carbon}/{oxygen} AOU; {ratios}",
        "preformed_alkalinity": preformed,
        "dic_calcium_carbonate": f"{ratios}; {per_nitrate}; preformed alkalinity {preformed}",
        "preformed_dic": f"{ratios}; {per_nitrate}; preformed alkalinity {preformed}",
    }
    dic, alkalinity = (carbon_words((name,), carbonate) for name in ("dic", "alkalinity"))
    of_oxygen, nitrate, phosphate = (
        f"{name} {usual_words(name)}" for name in ("oxygen", "nitrate", "phosphate")
    )
    relative = "no relation" if relation is None else f"relation {relation.uncertainty:g} umol/kg"
    of_relation = (
        f"{relative}, {of_oxygen}, {phosphate}" if relation is not None and relation.per_po else relative
    )
    held = {
        "dic_normalised": f"{dic}; water that dilutes and salinity taken as exact",
        "alkalinity_normalised": f"{alkalinity}; water that dilutes and salinity taken as exact",
        "potential_alkalinity": f"{alkalinity}, {nitrate}",
        "c_star": f"{dic}, {alkalinity}, {of_oxygen}; ratios exact, as C* is defined by them",
        "dic_soft_tissue": f"{of_oxygen}, {of_ratios}; solubility taken as exact",
        "preformed_alkalinity": of_relation,
        "dic_calcium_carbonate": f"{alkalinity}, {of_oxygen}, {of_ratios}, {of_relation}",
        "preformed_dic": f"{dic}, {alkalinity}, {of_oxygen}, {of_ratios}, {of_relation}",
    }
    return {
        f"{name}{suffix}": {"form": form} | ({"uncertainty": held[name]} if suffix else {})
        for name, form in told.items()
        for suffix in ("", "_uncertainty")
    }
