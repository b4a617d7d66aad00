"""The settings of the carbonate system, and of what is read off a station's profile."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from pipeline.limits import Fraction, Positive, Section

Measured = Literal["dic", "alkalinity", "ph_total", "ph_seawater", "pco2", "fco2"]
AtTemperature = Literal["ph_total", "ph_seawater", "pco2", "fco2"]
# degC between which constants are evaluated at all: wider than the sea.
COLDEST, WARMEST = -4.0, 45.0
Degrees = Annotated[float, Field(ge=COLDEST, le=WARMEST)]


class CarbonateSettings(Section):
    """Which constants the carbonate system is solved with, and how uncertain what goes into it is."""

    carbonic: Literal["lueker_2000", "sulpis_2020", "roy_1993", "dickson_millero_1987"] = Field(
        "lueker_2000",
        description="constants of carbonic acid, by citation; Lueker et al. 2000 is what the Guide of 2007 recommends",
    )
    borate: Literal["uppstrom_1974", "lee_2010"] = Field(
        "lee_2010",
        description="boron by salinity; Lee et al. 2010 is now common, the Guide of 2007 has Uppstrom 1974, with which"
        " a computed pH is 0.003 to 0.009 higher (computed over the range of the ocean)",
    )
    fluoride: Literal["perez_fraga_1987", "dickson_riley_1979"] = Field(
        "perez_fraga_1987",
        description="constant of hydrogen fluoride; Perez and Fraga 1987 is what the Guide of 2007 recommends (from"
        " memory); it was measured from 9 degC on, and the other moves a computed pH by at most 0.0004, by way of the"
        " scale of pH, and carbonate by less than 0.01 % (computed over the range of the ocean)",
    )
    bisulfate: Literal["dickson_1990"] = Field(
        "dickson_1990", description="constant of bisulfate; Dickson 1990 is what the Guide of 2007 recommends"
    )
    uncertainty: dict[Measured, Positive] = Field(
        {}, description="standard uncertainty of a measured quantity, in its unit, in place of the registry's"
    )
    gas_uncertainty: Fraction = Field(
        0.01,
        description="standard uncertainty of a measured pCO2 or fCO2 as a part of it, where 'uncertainty' has none"
        " (our choice, no source)",
    )
    constants_uncertainty: Literal["none", "orr_2018"] = Field(
        "none",
        description="uncertainties of the constants that the propagated ones hold beside those of the measurements:"
        " none, for all samples share them, or those of Orr et al. 2018 (pK0 0.002, pK1 0.0075, pK2 0.015, pKB and"
        " pKW 0.01, solubilities 0.02, boron 2 %)",
    )
    assumed_temperature: dict[AtTemperature, Degrees] = Field(
        {},
        description="degC at which a quantity was measured, where no column says; without it such values are not used",
    )
    consistency: Positive = Field(
        3.0,
        description="combined standard uncertainties by which a third measured quantity may differ from what the pair"
        " gives (our choice, no source)",
    )


class Repeatability(Section):
    """Standard deviation of one bottle against the next of a cast, without what all bottles have in common."""

    oxygen: Positive = Field(
        0.3, description="umol/kg (a titration repeats to 0.1 to 0.5 %, from memory; 0.15 % of 200)"
    )
    phosphate: Positive = Field(0.015, description="umol/kg (0.4 % of full scale, from memory)")
    delta_carbon_13: Positive = Field(
        0.03, description="per mil (Quay 2003, as reported in Becker et al. 2016)"
    )


class ProfileSettings(Section):
    """How depths are read off the bottles of a station."""

    gap: Positive = Field(
        800.0,
        description="m between two bottles across which no horizon is interpolated (our choice, no source)",
    )
    same_depth: Positive = Field(
        2.0,
        description="m within which bottles are at one level, whose values are averaged (our choice, no source)",
    )
    oxygen_minimum: Positive = Field(
        60.0,
        description="umol/kg below which water counts to the oxygen minimum layer (common practice, no source)",
    )
    extreme_rise: Positive = Field(
        4.0,
        description="repeatabilities by which a profile must rise (or fall) on both sides of an extreme, as two"
        " neighbouring levels see it: of ten level bottles, noise alone makes one in a hundred times (computed)",
    )
    repeatability: Repeatability = Field(
        Repeatability(),
        description="of one bottle against the next: what is off in a whole cast makes no extreme",
    )
    horizon_uncertainty: Positive = Field(
        800.0,
        description="m of standard uncertainty above which a saturation horizon is told to be hardly known (our choice,"
        " no source)",
    )
