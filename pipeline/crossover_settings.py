"""The settings of secondary quality control: how cruises are compared, and the corrections they are given."""

from __future__ import annotations

import difflib
from typing import Annotated, Literal

from pydantic import AfterValidator, Field, model_validator

from pipeline.limits import Fraction, Positive, Section
from pipeline.variables import CORRECTABLE


class CrossoverSettings(Section):
    """How cruises are compared with each other. No table of a cruise depends on it."""

    reference: tuple[str, ...] = Field(
        (),
        description="cruises that are taken as right: they are never corrected, all others are towards them",
    )
    values: Literal["delivered", "corrected"] = Field(
        "delivered",
        description="compare values as delivered, or with the corrections that the archive was made with",
    )
    distance: Positive = Field(
        2.0, le=90, description="degrees of arc within which two stations are compared (Lauvset et al. 2024)"
    )
    pressure: Positive = Field(
        1500.0,
        description="dbar from which values are compared; 2000 where convection is deep (Lauvset et al. 2024)",
    )
    gap: Positive = Field(
        800.0,
        description="dbar between samples across which no profile is interpolated (our choice, no source)",
    )
    least_levels: int = Field(
        3, ge=1, description="levels that a pair of stations must have in common (our choice, no source)"
    )
    density_span: Positive = Field(
        0.05,
        description="kg/m3 of sigma4 that two profiles must share; with less they are compared at equal pressure"
        " (ten times what a salinity error of 0.005 shifts it; our choice, no source)",
    )
    temperature_span: Positive = Field(
        0.10,
        description="degrees that two profiles must share for salinities to be compared at equal potential"
        " temperature; with less they are compared at equal pressure (our choice, no source)",
    )
    partners: int = Field(
        3,
        ge=1,
        description="nearest stations of another cruise that a station is compared with, at most; more say little that"
        " is new, and bring in what the water differs by from place to place (our choice, no source)",
    )
    between_stations: Fraction = Field(
        0.5,
        description="standard deviation from one cast to the next, as a part of the quantity's limit: what is"
        " presumed, and counts as two observations of it beside the data (our choice, no source)",
    )
    between_places: Fraction = Field(
        0.5,
        description="standard deviation of what the ocean itself differs by in one place between two visits, as a"
        " part of the quantity's limit; the data may say more, never less (our choice, no source)",
    )
    prior: Positive = Field(
        1.0,
        description="standard deviation of a cruise's error before any crossover, as a multiple of the quantity's"
        " limit: what the inversion is damped with (our choice, no source)",
    )
    certainty: Positive = Field(
        2.0,
        description="a correction is proposed when larger than its standard uncertainty times this, and than its limit"
        " (our choice, no source)",
    )


class Correction(Section):
    """What is done to every value of one quantity of one cruise: a factor, or what is added in its unit."""

    factor: Positive | None = None
    add: Annotated[float, Field(allow_inf_nan=False)] | None = None
    reason: str = Field(min_length=1, description="why, and on whose word; kept beside the corrected values")

    @model_validator(mode="after")
    def _is_one(self) -> Correction:
        if (self.factor is None) == (self.add is None):
            raise ValueError("either 'factor' or 'add', and not both")
        return self


def _known_quantity(name: str) -> str:
    if name not in CORRECTABLE:
        near = difflib.get_close_matches(name, CORRECTABLE, n=1)
        raise ValueError(
            f"a measured quantity by its column, {f'such as {near[0]}' if near else 'such as bottle_oxygen'}"
        )
    return name


Quantity = Annotated[str, AfterValidator(_known_quantity)]
