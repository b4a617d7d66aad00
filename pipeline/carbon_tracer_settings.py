"""The settings of the carbon isotopes and of the carbon anomalies."""

from __future__ import annotations

from types import MappingProxyType
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field

from pipeline.limits import Finite, Positive, Section

# The tables are of samples, and nobody measured carbon-13 of the air much before.
FIRST_YEAR, LAST_YEAR = 1800, 2100
Year = Annotated[int, Field(ge=FIRST_YEAR, le=LAST_YEAR)]
# From memory; a settings file adds years to these, or takes another value for them.
AIR_BY_YEAR = MappingProxyType({1990: -7.8, 2010: -8.3, 2020: -8.5})
# The air had about -6.4 before industry, and falls: wide enough for any year to come.
LEAST_OF_AIR, MOST_OF_AIR = -20.0, 0.0
OfAir = Annotated[float, Field(ge=LEAST_OF_AIR, le=MOST_OF_AIR)]


def _by_year(given: Any) -> Any:
    """Return numbers by year over those that stand here; one number for all years as it is."""
    if isinstance(given, dict) and all(_is_year(year) and _is_of_air(value) for year, value in given.items()):
        return {**AIR_BY_YEAR, **{int(year): value for year, value in given.items()}}
    if _is_of_air(given):
        return given
    raise ValueError(
        f"per mil from {LEAST_OF_AIR:g} to {MOST_OF_AIR:g}: one number for all years, or numbers by year from"
        f" {FIRST_YEAR} to {LAST_YEAR}, such as {{1972 = -7.3}}, which are added to those that stand there"
    )


def _is_year(written: Any) -> bool:
    text = str(written)
    return len(text) == len(str(LAST_YEAR)) and text.isdecimal() and FIRST_YEAR <= int(text) <= LAST_YEAR


def _is_of_air(value: Any) -> bool:
    return (
        isinstance(value, int | float)
        and not isinstance(value, bool)
        and LEAST_OF_AIR <= value <= MOST_OF_AIR
    )


def _relation(given: Any) -> Any:
    """Refuse what is no table, in words that name its keys."""
    keys = set(PreformedAlkalinity.model_fields)
    needed = {name for name, field in PreformedAlkalinity.model_fields.items() if field.is_required()}
    if (
        given is None
        or isinstance(given, PreformedAlkalinity)
        or (isinstance(given, dict) and needed <= set(given) <= keys)
    ):
        return given
    raise ValueError(
        "a table: intercept and reference, and per_salinity, per_potential_temperature, per_po or uncertainty where"
        " they are not 0, such as"
        ' {intercept = 300.0, per_salinity = 57.2, reference = "where it comes from"}'
    )


class PreformedAlkalinity(Section):
    """What alkalinity water left the surface with: a linear relation, without which there is none."""

    intercept: Finite = Field(description="umol/kg")
    per_salinity: Finite = Field(0.0, description="umol/kg per unit of practical salinity")
    per_potential_temperature: Finite = Field(0.0, description="umol/kg per degC")
    per_po: Finite = Field(
        0.0,
        description="umol/kg per umol/kg of oxygen and phosphate times the oxygen that 'stoichiometry' gives it",
    )
    uncertainty: Annotated[float, Field(ge=0, le=1e3)] = Field(
        0.0, description="umol/kg, standard uncertainty of the relation itself"
    )
    reference: str = Field(
        min_length=1, description="where the relation comes from: metadata of what is made of it"
    )


class CarbonTracers(Section):
    """Which published forms and constants the carbon isotopes and the carbon anomalies take."""

    equilibrium_carbon_13: Literal["zhang_1995", "zhang_1995_abstract", "zhang_1995_species"] = Field(
        "zhang_1995",
        description="carbon-13 of DIC at equilibrium with the air, Zhang, Quay and Wilbur 1995: the form with -0.105"
        " per degC (verified), that of the abstract with -0.107 (from memory; 0.05 per mil less at 25 degC), or the sum"
        " over aqueous CO2, bicarbonate and carbonate",
    )
    atmosphere_delta_carbon_13: Annotated[OfAir | dict[Year, OfAir], BeforeValidator(_by_year)] = Field(
        dict(AIR_BY_YEAR),
        description="per mil, carbon-13 of the carbon dioxide of the air (from memory): one number for all years, or"
        " numbers by year, which are added to these; linear between and constant beyond the ends, taken at the year of"
        " the sample and not at that of the water",
    )
    biological_slope: Literal["stoichiometry", "broecker_maier_reimer_1992", "lynch_stieglitz_1995"] = Field(
        "stoichiometry",
        description="slope of carbon-13 of DIC against phosphate that biology makes: computed from photosynthetic"
        " fractionation, mean DIC and the carbon per phosphate of 'stoichiometry', or that of Broecker and Maier-Reimer"
        " 1992 (128, from memory), or -1.1 as Lynch-Stieglitz et al. 1995 print it (from memory)",
    )
    biological_constant: Literal["lynch_stieglitz_1995", "charles_1993"] = Field(
        "lynch_stieglitz_1995",
        description="carbon-13 of DIC without phosphate: 2.7 (Lynch-Stieglitz et al. 1995) or 2.75 per mil (Charles et"
        " al. 1993), both from memory and for a slope of -1.1; with another slope the line turns about"
        " 'mean_phosphate'",
    )
    photosynthetic_fractionation: Annotated[float, Field(ge=-60, le=0)] = Field(
        -19.0,
        description="per mil, of organic matter against the DIC of the mean ocean (Broecker and Maier-Reimer 1992, from"
        " memory; phytoplankton fractionate by 20 to 25, common practice, no source)",
    )
    mean_dic: Annotated[float, Field(ge=100, le=5000)] = Field(
        2200.0, description="umol/kg, of the mean ocean (Broecker and Maier-Reimer 1992, from memory)"
    )
    mean_phosphate: Annotated[float, Field(ge=0, le=10)] = Field(
        2.2, description="umol/kg, of the mean ocean (from memory)"
    )
    mean_delta_carbon_13: Annotated[float, Field(ge=-5, le=5)] = Field(
        0.3,
        description="per mil, of the DIC of the mean ocean (from memory): organic matter has this and the"
        " fractionation, calcium carbonate this alone (no significant fractionation, Humphreys et al. 2016)",
    )
    reference_salinity: Positive = Field(
        35.0, description="salinity that DIC and alkalinity are normalised to (common practice, no source)"
    )
    dic_without_salt: Finite = Field(
        0.0,
        description="umol/kg, DIC of the water that dilutes: not zero near rivers and ice (Friis et al. 2003, from"
        " memory)",
    )
    alkalinity_without_salt: Finite = Field(
        0.0, description="umol/kg, alkalinity of the water that dilutes (Friis et al. 2003, from memory)"
    )
    potential_alkalinity: Literal["brewer_1975", "carter_2014"] = Field(
        "brewer_1975",
        description="alkalinity that one nitrate takes away: 1 (Brewer et al. 1975, from memory) or 1.26 (Carter et al."
        " 2014, from memory); respiration in a mixture takes away as much",
    )
    preformed_alkalinity: Annotated[PreformedAlkalinity | None, BeforeValidator(_relation)] = Field(
        None,
        description="relation for the alkalinity water left the surface with; without one, what dissolving calcium"
        " carbonate added, and preformed DIC, are not computed",
    )
