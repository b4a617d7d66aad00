"""What the registry says of the carbonate system, its saturation horizons and the extremes of a station."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pipeline.variable import Kind, Variable

if TYPE_CHECKING:
    from collections.abc import Iterator

_SOURCE = (
    "Dickson, Sabine and Christian 2007, PICES Special Publication 3; constants by PyCO2SYS, Humphreys et al. 2022,"
    " GMD 15:15"
)
_PROPAGATED = (
    "first order, from the uncertainties of the measured pair; their sizes, and which others are in it: see"
    " 'uncertainty'"
)


def _with_uncertainty(
    name: str,
    long_name: str,
    unit: str,
    standard_name: str | None = None,
    source: str = _SOURCE,
    propagated: str = _PROPAGATED,
) -> Iterator[Variable]:
    """Yield a computed quantity and the column of its standard uncertainty."""
    yield Variable(name, long_name, unit, standard_name, source=source)
    yield Variable(f"{name}_uncertainty", f"{long_name}: standard uncertainty", unit, source=propagated)


_HORIZON = "deepest crossing of one from above, linear in depth between two bottles of a station"
_HORIZON_PROPAGATED = (
    "half the distance between the horizons of the profile with saturation lower and higher by its uncertainty at all"
    " bottles, which are taken to be off alike; missing where one of the two has none"
)
_EXTREME = (
    "the sample with the least (most) of the station's profile, where it rises (falls) on both sides by more than"
    " 'form' says"
)
_GAS = f"{_SOURCE}; the acids at the pressure in situ, the solubility of the gas at that of the surface"

CARBONATE_STATE: tuple[Variable, ...] = (
    *_with_uncertainty("ph_in_situ", "pH on the total scale, in situ", "1", "sea_water_ph_reported_on_total_scale"),
    *_with_uncertainty("fco2_in_situ", "Fugacity of carbon dioxide at the temperature in situ", "uatm",
                       "fugacity_of_carbon_dioxide_in_sea_water", source=_GAS),
    *_with_uncertainty("pco2_in_situ", "Partial pressure of carbon dioxide at the temperature in situ", "uatm",
                       "partial_pressure_of_carbon_dioxide_in_sea_water", source=_GAS),
    *_with_uncertainty("aqueous_co2", "Aqueous carbon dioxide, with carbonic acid", "umol kg-1"),
    *_with_uncertainty("bicarbonate", "Bicarbonate ion", "umol kg-1"),
    *_with_uncertainty("carbonate", "Carbonate ion", "umol kg-1"),
    *_with_uncertainty("aqueous_co2_fraction", "Aqueous carbon dioxide as a part of DIC", "1"),
    *_with_uncertainty("bicarbonate_fraction", "Bicarbonate ion as a part of DIC", "1"),
    *_with_uncertainty("carbonate_fraction", "Carbonate ion as a part of DIC", "1"),
    *_with_uncertainty("calcite_saturation", "Saturation state of calcite", "1",
                       source=f"{_SOURCE}; solubility of Mucci 1983, calcium of Riley and Tongudai 1967"),
    *_with_uncertainty("aragonite_saturation", "Saturation state of aragonite", "1",
                       source=f"{_SOURCE}; solubility of Mucci 1983, calcium of Riley and Tongudai 1967"),
    *_with_uncertainty("revelle_factor", "Revelle factor, at temperature and pressure in situ", "1"),
)  # fmt: skip

CARBONATE_RESIDUALS: tuple[Variable, ...] = (
    *_with_uncertainty("ph_residual", "pH as measured less pH from the pair used, both as measured", "1"),
    *_with_uncertainty("fco2_residual", "Fugacity of carbon dioxide as measured less that from the pair used", "uatm"),
)  # fmt: skip

CARBONATE: tuple[Variable, ...] = (
    Variable("carbonate_pair", "Which two measured quantities the carbonate system was solved from", "", None,
             Kind.TEXT),
    Variable("carbonate_nutrients", "Which nutrients alkalinity was corrected for; the others were taken as none", "",
             None, Kind.TEXT),
    *_with_uncertainty("dic_computed", "Dissolved inorganic carbon, from a pair that does not hold it", "umol kg-1"),
    *_with_uncertainty("alkalinity_computed", "Total alkalinity, from a pair that does not hold it", "umol kg-1"),
    *CARBONATE_STATE,
    *CARBONATE_RESIDUALS,
)  # fmt: skip

HORIZONS: tuple[Variable, ...] = (
    *_with_uncertainty("calcite_saturation_depth", "Depth of the calcite saturation horizon of the station", "m",
                       source=_HORIZON, propagated=_HORIZON_PROPAGATED),
    *_with_uncertainty("aragonite_saturation_depth", "Depth of the aragonite saturation horizon of the station", "m",
                       source=_HORIZON, propagated=_HORIZON_PROPAGATED),
)  # fmt: skip

EXTREMES: tuple[Variable, ...] = (
    Variable("oxygen_minimum", "Oxygen at the oxygen minimum of the station", "umol kg-1", source=_EXTREME),
    Variable("oxygen_minimum_depth", "Depth of the oxygen minimum of the station", "m", source=_EXTREME),
    Variable("oxygen_minimum_thickness", "Thickness of the layer around the oxygen minimum with less than a limit",
             "m", source="linear in depth between bottles; the limit is in the field metadata"),
    Variable("phosphate_maximum", "Phosphate at the phosphate maximum of the station", "umol kg-1", source=_EXTREME),
    Variable("phosphate_maximum_depth", "Depth of the phosphate maximum of the station", "m", source=_EXTREME),
    Variable("delta_carbon_13_minimum", "Carbon-13 of DIC at its minimum of the station", "1e-3", source=_EXTREME),
    Variable("delta_carbon_13_minimum_depth", "Depth of the minimum of carbon-13 of DIC of the station", "m",
             source=_EXTREME),
)  # fmt: skip

STATION_CARBON: tuple[Variable, ...] = (*CARBONATE, *HORIZONS, *EXTREMES)
