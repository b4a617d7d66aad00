"""The settings of the census of a section: its density classes, and how far apart samples may be that fill it."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated, Literal

from pydantic import AfterValidator, Field

from pipeline.limits import Finite, Positive, Section

DENSITIES = ("sigma0", "sigma2", "sigma4")


def _rising(boundaries: tuple[float, ...]) -> tuple[float, ...]:
    if any(after <= before for before, after in pairwise(boundaries)):
        raise ValueError("densities from the lightest to the densest, each once, such as [36.7, 36.9]")
    return boundaries


class CensusSettings(Section):
    """How the area of a section is divided among source waters. No table of a cruise depends on it."""

    density: Literal["sigma0", "sigma2", "sigma4"] = Field(
        "sigma2", description="the column whose classes the section is divided into"
    )
    boundaries: Annotated[tuple[Finite, ...], AfterValidator(_rising)] = Field(
        (),
        description="kg/m3 between the classes; without any those at which sets of the catalogue begin and end",
    )
    depth_gap: Positive = Field(
        600.0,
        description="m between samples of a station across which its column is not filled; half of it above the first"
        " and below the last one (our choice, no source)",
    )
    station_gap: Positive = Field(
        200.0,
        description="km between stations across which the section is not filled (our choice, no source)",
    )
    apart: Positive = Field(
        100.0,
        description="km that a station of another cruise may lie off the section to be of it (our choice, no source)",
    )
    measurement_errors: Literal["common", "independent"] = Field(
        "common",
        description="whether the samples of a cruise have the error of a measurement in common, as the usual"
        " uncertainties mean it (accuracy, and consistency of whole cruises), or each its own, as the shares in the"
        " tables have it; that of the sources is common to all in any case",
    )
