"""Rows of the registry: the columns of the table that a census of a section gives."""

from __future__ import annotations

from pipeline.variable import Kind, Variable

_AREA = "trapezoid rule between bottles and between stations, along the track and down to the sea floor"
_MEMBERS = "standard deviation over ensemble members, the same perturbed sources for all samples"

CENSUS: tuple[Variable, ...] = (
    Variable("census_part", "What the row tells of: source, unresolved or change", "", None, Kind.TEXT),
    Variable("density_column", "Column of samples by which a section is divided into classes", "", None, Kind.TEXT),
    Variable("density_from", "Density from which the class reaches; missing for all and for the lightest", "kg m-3"),
    Variable("density_below", "Density that the class stays below; missing for all and for the densest", "kg m-3"),
    Variable("density_class", "Class of the section: all, none (no density), or its number from the lightest", "",
             None, Kind.TEXT),
    Variable("area", "Area of the section; missing where it has no width", "km2", source=_AREA),
    Variable("area_uncertainty", "Area: standard uncertainty", "km2", source=_MEMBERS),
    Variable("area_share", "Part of the area: of what is resolved, or for unresolved of all there is", "1",
             source=_AREA),
    Variable("area_share_uncertainty", "Part of the area: standard uncertainty", "1", source=_MEMBERS),
    Variable("other_area_share", "Part of the common area in the section of the other cruise", "1", source=_AREA),
    Variable("area_share_change", "Other cruise's part of the common area less that of the cruise", "1", source=_AREA),
    Variable("area_share_change_uncertainty", "Change of the part of the area: standard uncertainty", "1",
             source=f"{_MEMBERS} and both cruises"),
    Variable("unresolved_reason", "Why a part of the section is not resolved, by name", "", None, Kind.TEXT),
    Variable("unresolved_samples", "Samples that are not resolved for the reason", "", None, Kind.INTEGER),
)  # fmt: skip
