"""What the sections of the settings are made of: kinds of numbers, and limits by depth and region."""

from __future__ import annotations

import difflib
from typing import Annotated, Any

from pydantic import AfterValidator, BaseModel, ConfigDict, Field

from pipeline.variables import MEASURED

Finite = Annotated[float, Field(allow_inf_nan=False)]
Fraction = Annotated[float, Field(ge=0, le=1)]
Positive = Annotated[float, Field(gt=0, allow_inf_nan=False)]
# Pressure (dbar) from which on a limit holds, and the limit.
Steps = Annotated[tuple[tuple[Finite, Positive], ...], Field(min_length=1)]
Range = tuple[Finite, Finite]


def _measured(name: str) -> str:
    if name not in MEASURED:
        near = difflib.get_close_matches(name, MEASURED, n=1)
        raise ValueError(f"a measured quantity by its column, such as {near[0] if near else 'nitrate'}")
    return name


Measured = Annotated[str, AfterValidator(_measured)]


class Section(BaseModel):
    """A part of the settings: frozen, and an unknown key is a fault."""

    model_config = ConfigDict(frozen=True, extra="forbid")


class DepthLimit(Section):
    """A limit that goes from that of the upper ocean to that of the deep, in equal ratios by pressure."""

    upper: Positive = Field(description="at checks.upper_pressure and above")
    deep: Positive = Field(description="at checks.deep_pressure and below")


def depth_limit(upper: float, deep: float, source: str) -> Any:
    """Return the field of a depth limit."""
    return Field(DepthLimit(upper=upper, deep=deep), description=source)


class BottleSpikes(Section):
    """How far a sample may lie outside what its neighbours in the cast allow."""

    temperature: DepthLimit = depth_limit(
        6.0, 0.05, "degC (upper: Argo spike test, from memory; deep: common practice)"
    )
    salinity: DepthLimit = depth_limit(
        0.9, 0.01, "(upper: Argo spike test, from memory; deep: common practice)"
    )
    oxygen: DepthLimit = depth_limit(
        30.0, 5.0, "umol/kg (deep: common practice; upper: our choice, no source)"
    )
    nitrate: DepthLimit = depth_limit(
        4.0, 0.5, "umol/kg (deep: common practice; upper: our choice, no source)"
    )
    phosphate: DepthLimit = depth_limit(
        0.3, 0.05, "umol/kg (deep: common practice; upper: our choice, no source)"
    )
    silicate: DepthLimit = depth_limit(
        12.0, 3.0, "umol/kg (deep: common practice; upper: our choice, no source)"
    )
    dic: DepthLimit = depth_limit(50.0, 15.0, "umol/kg (our choice, no source)")
    alkalinity: DepthLimit = depth_limit(50.0, 15.0, "umol/kg (our choice, no source)")


class CtdSpikes(Section):
    """How far a CTD level may lie outside what its neighbours allow (our choice, no source)."""

    temperature: DepthLimit = depth_limit(1.0, 0.02, "degC (our choice, no source)")
    salinity: DepthLimit = depth_limit(0.3, 0.01, "(our choice, no source)")
    oxygen: DepthLimit = depth_limit(20.0, 5.0, "umol/kg (our choice, no source)")


class Gradients(Section):
    """How much a quantity may change per dbar between neighbouring levels (our choice, no source)."""

    temperature: DepthLimit = depth_limit(5.0, 0.02, "degC per dbar (our choice, no source)")
    salinity: DepthLimit = depth_limit(5.0, 0.005, "per dbar (our choice, no source)")
    oxygen: DepthLimit = depth_limit(40.0, 0.5, "umol/kg per dbar (our choice, no source)")
    nitrate: DepthLimit = depth_limit(4.0, 0.05, "umol/kg per dbar (our choice, no source)")
    phosphate: DepthLimit = depth_limit(0.3, 0.005, "umol/kg per dbar (our choice, no source)")
    silicate: DepthLimit = depth_limit(10.0, 0.4, "umol/kg per dbar (our choice, no source)")


class RegionalRange(Section):
    """Where in the ocean which values are usual."""

    name: str = Field(description="the region, in words")
    pressure: Range = Field((0.0, 12_000.0), description="dbar")
    latitude: Range = Field((-90.0, 90.0), description="degrees north")
    longitude: Range = Field((-180.0, 180.0), description="degrees east, from west to east")
    usual: dict[Measured, Range] = Field(
        description="from a measured quantity to its usual range, in its unit"
    )


def floor(value: float, source: str) -> Any:
    """Return the field of a size below which a difference is no news."""
    return Field(value, gt=0, allow_inf_nan=False, description=source)


class NegativeNutrients(Section):
    """How far below zero the noise near the limit of detection may bring a nutrient (common practice, no source)."""

    nitrate: float = floor(0.1, "umol/kg (common practice, no source)")
    nitrate_plus_nitrite: float = floor(0.1, "umol/kg (common practice, no source)")
    nitrite: float = floor(0.05, "umol/kg (common practice, no source)")
    ammonium: float = floor(0.1, "umol/kg (common practice, no source)")
    phosphate: float = floor(0.03, "umol/kg (common practice, no source)")
    silicate: float = floor(0.5, "umol/kg (common practice, no source)")


class MisfitFloor(Section):
    """How far a value may be from what a sample's other properties imply, whatever the scatter."""

    bottle_oxygen: float = floor(5.0, "umol/kg (common practice for spikes of bottle casts, no source)")
    nitrate: float = floor(0.5, "umol/kg (common practice for spikes of bottle casts, no source)")
    nitrate_plus_nitrite: float = floor(0.5, "umol/kg (as nitrate)")
    phosphate: float = floor(0.05, "umol/kg (common practice for spikes of bottle casts, no source)")
    silicate: float = floor(3.0, "umol/kg (common practice for spikes of bottle casts, no source)")
    dic: float = floor(10.0, "umol/kg (our choice, no source)")
    alkalinity: float = floor(10.0, "umol/kg (our choice, no source)")


class CastOffset(Section):
    """By how much a quantity of a cast may differ from the deep water of casts around it (our choice, no source)."""

    nitrate: float = floor(0.03, "part of it (accuracy is 1 %, from memory)")
    nitrate_plus_nitrite: float = floor(0.03, "part of it (as nitrate)")
    phosphate: float = floor(0.04, "part of it (accuracy is 1 to 2 %, from memory)")
    silicate: float = floor(0.05, "part of it (accuracy is 1 to 3 %, from memory)")
    dic: float = floor(8.0, "umol/kg (twice the least adjustment of Lauvset et al. 2024)")
    alkalinity: float = floor(8.0, "umol/kg (twice the least adjustment of Lauvset et al. 2024)")


class DeltaDeparture(Section):
    """By how much an isotope ratio differs from all samples beside it where it is doubted (our choice, no source)."""

    delta_carbon_13: float = floor(0.3, "per mil (our choice, no source)")
    delta_carbon_14: float = floor(40.0, "per mil (our choice, no source)")
    delta_oxygen_18: float = floor(0.5, "per mil (our choice, no source)")


class WaterChecks(Section):
    """Limits of the checks of salinity, oxygen, nutrients, carbon and isotopes, and of whole columns."""

    bottle_ctd_salinity: Steps = Field(
        ((0.0, 0.02), (500.0, 0.01), (1000.0, 0.005)),
        description="from a pressure (dbar) on, most by which SALNTY and CTDSAL differ"
        " (common practice, no source)",
    )
    bottle_ctd_oxygen: Steps = Field(
        ((0.0, 10.0), (500.0, 5.0), (1000.0, 3.0)),
        description="from a pressure (dbar) on, most by which OXYGEN and CTDOXY differ, umol/kg"
        " (common practice, no source)",
    )
    bottle_ctd_reach: Positive = Field(
        15.0, description="dbar above or below the CTD from which a bottle may hold water (our choice)"
    )
    bottle_ctd_sigma: Positive = Field(
        5.0,
        description="robust standard deviations of a cruise's bottle - CTD differences that are no news"
        " (our choice)",
    )
    surface_saturation: Range = Field(
        (90.0, 115.0), description="oxygen at the surface, % of saturation (common practice, no source)"
    )
    supersaturation: Positive = Field(
        130.0, description="% of saturation above which oxygen is questionable (common practice, no source)"
    )
    negative_oxygen: Positive = Field(
        1.0, description="umol/kg below zero at which oxygen is wrong (common practice, no source)"
    )
    nitrate_to_phosphate: Range = Field(
        (12.0, 16.0), description="NO3/PO4 below 500 dbar (common practice, no source)"
    )
    n_star: Positive = Field(
        5.0, description="umol/kg of |N*| that is unusual outside known regions (common practice, no source)"
    )
    n_star_departure: Positive = Field(
        2.0, description="umol/kg by which N* differs from all neighbours where it is doubted (our choice)"
    )
    negative_nutrients: NegativeNutrients = Field(
        NegativeNutrients(), description="how far below zero noise may bring a nutrient, by quantity"
    )
    misfit_bands: Annotated[tuple[Finite, ...], Field(min_length=2)] = Field(
        (200.0, 500.0, 1000.0, 1500.0, 2500.0, 4000.0, 12_000.0),
        description="dbar, edges of the bands in which properties are compared with each other (our choice)",
    )
    misfit_sigma: Positive = Field(
        6.0, description="robust standard deviations from what the other properties imply (our choice)"
    )
    misfit_samples: int = Field(60, ge=10, description="fewest samples of a band to compare (our choice)")
    misfit_floor: MisfitFloor = Field(
        MisfitFloor(), description="misfits of a sample's properties that are no news, by quantity"
    )
    delta_carbon_13: Range = Field(
        (-1.5, 2.8), description="per mil in the open ocean (common practice, no source)"
    )
    deep_delta_carbon_13: Range = Field(
        (0.0, 1.2), description="per mil below 2000 dbar (common practice, no source)"
    )
    delta_departure: DeltaDeparture = Field(
        DeltaDeparture(), description="how isotopes differ from all neighbours where they are doubted"
    )
    whole_column: Fraction = Field(
        0.95, description="share of a column's values that fit another unit where it is doubted (our choice)"
    )
    whole_column_samples: int = Field(
        10, ge=3, description="fewest values by which a whole column or cruise is judged (our choice)"
    )
    cast_offset: CastOffset = Field(
        CastOffset(), description="offsets of a cast from the deep water of those around it that are no news"
    )
    cast_offset_sigma: Positive = Field(
        2.5, description="robust standard deviations of what casts of the cruise differ by (our choice)"
    )
    cast_offset_samples: int = Field(
        4, ge=3, description="fewest deep samples of a cast by which its offset is judged (our choice)"
    )
    surface_alkalinity: Positive = Field(
        60.0, description="umol/kg from 2300 S/35 at the surface (common practice, no source)"
    )
    alkalinity_less_dic: Range = Field(
        (50.0, 450.0), description="umol/kg of alkalinity less DIC (common practice, no source)"
    )
    nitrate_phosphate_slope: Range = Field(
        (14.0, 16.0), description="slope of deep nitrate against phosphate (common practice, no source)"
    )
    regions: tuple[RegionalRange, ...] = Field(
        (
            RegionalRange(
                name="the deep open ocean",
                pressure=(2000.0, 12_000.0),
                usual={
                    "temperature": (-2.0, 6.0),
                    "ctd_salinity": (34.0, 35.5),
                    "bottle_salinity": (34.0, 35.5),
                },
            ),
        ),
        description="usual ranges of regions and depths, the first that holds a sample taken"
        " (common practice, no source)",
    )
