"""Rows of the registry: the columns of the tables that tell how cruises compare."""

from __future__ import annotations

from pipeline.variable import Kind, Variable

_CROSSOVERS = "crossovers: Johnson, Robbins and Hufford 2001; Tanhua et al. 2010, ESSD 2:35-49"
_INVERSION = "damped weighted least squares over all crossovers: Johnson, Robbins and Hufford 2001"

# fmt: off
# Differences are in the unit that difference_unit names; offsets and corrections too where the kind is
# additive, and else are parts of the value (offsets) and factors (corrections).
CROSSOVERS: tuple[Variable, ...] = (
    Variable("other_expocode", "Cruise that is compared with", "", None, Kind.TEXT),
    Variable("kind", "additive or multiplicative", "", None, Kind.TEXT),
    Variable("surface", "What was compared at equal values of", "", None, Kind.TEXT),
    Variable("stations", "Stations of the cruise that took part", "", None, Kind.INTEGER),
    Variable("other_stations", "Stations of the other cruise that took part", "", None, Kind.INTEGER),
    Variable("station_pairs", "Pairs of stations compared", "", None, Kind.INTEGER),
    Variable("places", "Places that the pairs of stations lie in", "", None, Kind.INTEGER),
    Variable("levels", "Levels compared, of all pairs of stations", "", None, Kind.INTEGER),
    Variable("years_apart", "Time from the other cruise to the cruise", "year", None),
    Variable("offset", "Cruise less other cruise, or as a part of the value", "", None, source=_CROSSOVERS),
    Variable("offset_uncertainty", "Standard uncertainty of the offset", "", None, source=_CROSSOVERS),
    Variable("offset_remaining", "Offset with the corrections in force", "", None, source=_CROSSOVERS),
    Variable("offset_remaining_uncertainty", "Its standard uncertainty", "", None, source=_CROSSOVERS),
    Variable("mean_difference", "Cruise less other cruise, in the variable's unit", "", None, source=_CROSSOVERS),
    Variable("mean_difference_uncertainty", "Its standard uncertainty", "", None, source=_CROSSOVERS),
    Variable("difference_unit", "Unit of the variable", "", None, Kind.TEXT),
    Variable("between_places", "Standard deviation of the offset between places", "", None, source=_CROSSOVERS),
    Variable("depth_contrast", "Offset of the lower half of the levels less that of the upper", "", None),
    Variable("depth_contrast_uncertainty", "Standard uncertainty of the contrast", "", None),
    Variable("correction", "Least-squares correction: what is added, or the factor", "", None, source=_INVERSION),
    Variable("correction_uncertainty", "Standard uncertainty of the correction", "", None, source=_INVERSION),
    Variable("correction_in_force", "Correction the archive was made with", "", None, Kind.TEXT),
    Variable("correction_remaining", "What is asked for beside that in force", "", None, source=_INVERSION),
    Variable("correction_remaining_uncertainty", "Its standard uncertainty", "", None, source=_INVERSION),
    Variable("correction_limit", "Least correction that is proposed, from none", "", None),
    Variable("crossovers", "Crossovers with other cruises", "", None, Kind.INTEGER),
    Variable("group", "Group of cruises that crossovers connect, counted from 1", "", None, Kind.INTEGER),
    Variable("proposed", "yes or no", "", None, Kind.TEXT),
    Variable("why_not", "Why no correction is proposed", "", None, Kind.TEXT),
)
# fmt: on
