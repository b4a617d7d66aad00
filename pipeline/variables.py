"""The one registry: every quantity's column name, unit, CF name, exchange names, range and uncertainty.

Everything else (schemas, reader maps, range checks, field metadata, plot labels) is derived from here.
A quantity is added by one entry. This module imports the form of its rows, and the rows
of carbon, of crossovers and of the census, and nothing else of ours; nothing registers into it.

Plausible ranges are those of the parameter list of the exchange format, version 1.2.0, where it has one;
``None`` where it has none. What is made of delivered values has theirs, made a little wider (our choice).
Usual measurement uncertainties carry their source in ``Uncertainty.source``.
CF standard names are from table v93 (2026-03-17); ``None`` means that table has no name for the quantity.
"""

from __future__ import annotations

from types import MappingProxyType
from typing import TYPE_CHECKING

from pipeline.carbon_variables import CARBONATE, EXTREMES, HORIZONS, STATION_CARBON
from pipeline.census_variables import CENSUS
from pipeline.crossover_variables import CROSSOVERS
from pipeline.isotope_variables import ANOMALIES, ISOTOPES, MIXED_CARBON, SAMPLE_CARBON
from pipeline.variable import FlagScheme, Kind, Uncertainty, Variable

if TYPE_CHECKING:
    from collections.abc import Mapping

# Passed on, beside all that is defined here.
__all__ = [
    "ANOMALIES", "CARBONATE", "EXTREMES", "HORIZONS", "ISOTOPES", "FlagScheme", "Kind", "Uncertainty", "Variable",
]  # fmt: skip


_GOSHIP = "McTaggart et al. 2010 (GO-SHIP manual)"
_CONSISTENCY = "consistency of the GLODAPv2.2023 product, Lauvset et al. 2024"

_TEOS = "TEOS-10: IOC, SCOR and IAPSO 2010, Manuals and Guides 56"

_IDENTITY = (
    Variable("expocode", "Cruise: platform code and departure date", "", None, Kind.TEXT, ("EXPOCODE",)),
    Variable("section", "Section or line", "", None, Kind.TEXT, ("SECT_ID", "SECT")),
    Variable("station", "Station", "", None, Kind.TEXT, ("STNNBR",)),
    Variable("cast", "Cast at the station", "", None, Kind.INTEGER, ("CASTNO",)),
    Variable("sample", "Sample number", "", None, Kind.TEXT, ("SAMPNO",)),
    Variable("bottle", "Bottle", "", None, Kind.TEXT, ("BTLNBR",), flags=FlagScheme.BOTTLE),
    Variable("date", "Date, UTC", "", None, Kind.DATE, ("DATE",)),
    Variable("time", "Instant, UTC; missing where only a date was given", "", "time", Kind.TIME, ("TIME",)),
    Variable("latitude", "Latitude", "degree_north", "latitude", exchange=("LATITUDE",), plausible=(-90, 90)),
    Variable("longitude", "Longitude", "degree_east", "longitude", exchange=("LONGITUDE",),
             plausible=(-180, 360)),
    Variable(
        "bottom_depth", "Depth of the sea floor", "m", "sea_floor_depth_below_sea_surface",
        exchange=("DEPTH",), exchange_unit="METERS", plausible=(0, 12000),
    ),
)  # fmt: skip

_LEDGER = (
    Variable("file", "Delivered file the row came from", "", None, Kind.TEXT),
    Variable("line", "Line of the row in the delivered file, counted from 1", "", None, Kind.INTEGER),
)

# fmt: off
_CTD = (
    Variable("pressure", "Sea pressure, above one atmosphere", "dbar", "sea_water_pressure_due_to_sea_water",
             exchange=("CTDPRS",), exchange_unit="DBAR", flags=FlagScheme.CTD, plausible=(0, 10000),
             uncertainty=Uncertainty(3.0, 0.0, _GOSHIP)),
    Variable("temperature", "Temperature in situ, ITS-90", "degree_C", "sea_water_temperature",
             exchange=("CTDTMP",), exchange_unit="ITS-90", flags=FlagScheme.CTD, plausible=(-2, 35),
             uncertainty=Uncertainty(0.002, 0.0, _GOSHIP)),
    Variable("ctd_salinity", "Practical salinity from the CTD", "1", "sea_water_practical_salinity",
             exchange=("CTDSAL",), exchange_unit="PSS-78", flags=FlagScheme.CTD, plausible=(0, 42),
             uncertainty=Uncertainty(0.002, 0.0, _GOSHIP)),
    Variable("ctd_oxygen", "Dissolved oxygen from the CTD", "umol kg-1",
             "moles_of_oxygen_per_unit_mass_in_sea_water",
             exchange=("CTDOXY",), exchange_unit="UMOL/KG", flags=FlagScheme.CTD, plausible=(0, 500),
             uncertainty=Uncertainty(0.0, 0.01, "GO-SHIP cruise reports P02W 2022, A20 2021")),
    Variable("transmission", "Beam transmission", "percent", None,
             exchange=("XMISS",), exchange_unit="%TRANS", flags=FlagScheme.CTD, plausible=(0, 100)),
    Variable("fluorescence", "Fluorescence", "mg m-3", None,
             exchange=("FLUOR",), exchange_unit="MG/M^3", flags=FlagScheme.CTD, plausible=(0, 50)),
    Variable("raw_pressure", "Pressure before calibration", "dbar", None,
             exchange=("CTDRAW",), exchange_unit="DBAR", flags=FlagScheme.CTD, plausible=(0, 11000)),
)

_WATER = (
    Variable("bottle_salinity", "Practical salinity of the bottle", "1", "sea_water_practical_salinity",
             exchange=("SALNTY",), exchange_unit="PSS-78", flags=FlagScheme.WATER, plausible=(0, 42),
             uncertainty=Uncertainty(0.002, 0.0, _GOSHIP)),
    Variable("bottle_oxygen", "Dissolved oxygen of the bottle", "umol kg-1",
             "moles_of_oxygen_per_unit_mass_in_sea_water",
             exchange=("OXYGEN",), exchange_unit="UMOL/KG", flags=FlagScheme.WATER, plausible=(0, 500),
             uncertainty=Uncertainty(0.0, 0.01, _CONSISTENCY)),
    Variable("silicate", "Silicic acid", "umol kg-1", "moles_of_silicate_per_unit_mass_in_sea_water",
             exchange=("SILCAT",), exchange_unit="UMOL/KG", flags=FlagScheme.WATER, plausible=(0, 250),
             uncertainty=Uncertainty(0.0, 0.02, _CONSISTENCY)),
    Variable("nitrate", "Nitrate", "umol kg-1", "moles_of_nitrate_per_unit_mass_in_sea_water",
             exchange=("NITRAT",), exchange_unit="UMOL/KG", flags=FlagScheme.WATER, plausible=(-0.1, 47),
             uncertainty=Uncertainty(0.0, 0.02, _CONSISTENCY)),
    Variable("nitrite", "Nitrite", "umol kg-1", "moles_of_nitrite_per_unit_mass_in_sea_water",
             exchange=("NITRIT",), exchange_unit="UMOL/KG", flags=FlagScheme.WATER, plausible=(-0.1, 15)),
    Variable("nitrate_plus_nitrite", "Nitrate and nitrite together", "umol kg-1",
             "moles_of_nitrate_and_nitrite_per_unit_mass_in_sea_water",
             exchange=("NO2+NO3", "NO3+NO2"), exchange_unit="UMOL/KG", flags=FlagScheme.WATER),
    Variable("phosphate", "Phosphate", "umol kg-1", "moles_of_phosphate_per_unit_mass_in_sea_water",
             exchange=("PHSPHT",), exchange_unit="UMOL/KG", flags=FlagScheme.WATER, plausible=(0, 5),
             uncertainty=Uncertainty(0.0, 0.02, _CONSISTENCY)),
    Variable("ammonium", "Ammonium", "umol kg-1", "moles_of_ammonium_per_unit_mass_in_sea_water",
             exchange=("NH4",), exchange_unit="UMOL/KG", flags=FlagScheme.WATER),
    Variable("dic", "Dissolved inorganic carbon", "umol kg-1",
             "moles_of_dissolved_inorganic_carbon_per_unit_mass_in_sea_water",
             exchange=("TCARBN",), exchange_unit="UMOL/KG", flags=FlagScheme.WATER, plausible=(1100, 2600),
             uncertainty=Uncertainty(4.0, 0.0, _CONSISTENCY)),
    Variable("alkalinity", "Total alkalinity", "umol kg-1",
             "sea_water_alkalinity_per_unit_mass_expressed_as_mole_equivalent",
             exchange=("ALKALI",), exchange_unit="UMOL/KG", flags=FlagScheme.WATER, plausible=(100, 2800),
             uncertainty=Uncertainty(4.0, 0.0, _CONSISTENCY)),
    Variable("ph_total", "pH on the total scale, at the temperature of measurement", "1",
             "sea_water_ph_reported_on_total_scale",
             exchange=("PH_TOT",), flags=FlagScheme.WATER,
             uncertainty=Uncertainty(0.01, 0.0, _CONSISTENCY)),
    Variable("ph_seawater", "pH on the seawater scale, at the temperature of measurement", "1", None,
             exchange=("PH_SWS",), flags=FlagScheme.WATER),
    Variable("ph_temperature", "Temperature at which pH was measured", "degree_C", None,
             exchange=("PH_TMP",), exchange_unit="DEG C", flags=FlagScheme.WATER),
    Variable("pco2", "Partial pressure of carbon dioxide", "uatm",
             "partial_pressure_of_carbon_dioxide_in_sea_water",
             exchange=("PCO2",), exchange_unit="UATM", flags=FlagScheme.WATER, plausible=(50, 2000)),
    Variable("pco2_temperature", "Temperature at which pCO2 was measured", "degree_C", None,
             exchange=("PCO2TMP",), exchange_unit="DEG C", flags=FlagScheme.WATER),
    Variable("fco2", "Fugacity of carbon dioxide", "uatm", "fugacity_of_carbon_dioxide_in_sea_water",
             exchange=("FCO2",), exchange_unit="UATM", flags=FlagScheme.WATER),
    Variable("fco2_temperature", "Temperature at which fCO2 was measured", "degree_C", None,
             exchange=("FCO2TMP",), exchange_unit="DEG C", flags=FlagScheme.WATER),
    Variable("cfc11", "CFC-11", "pmol kg-1", "moles_of_cfc11_per_unit_mass_in_sea_water",
             exchange=("CFC-11",), exchange_unit="PMOL/KG", flags=FlagScheme.WATER, plausible=(-0.1, 15)),
    Variable("cfc12", "CFC-12", "pmol kg-1", None,
             exchange=("CFC-12",), exchange_unit="PMOL/KG", flags=FlagScheme.WATER, plausible=(-0.1, 15)),
    Variable("cfc113", "CFC-113", "pmol kg-1", None,
             exchange=("CFC113", "CFC-113"), exchange_unit="PMOL/KG", flags=FlagScheme.WATER, plausible=(-0.1, 1.5)),
    Variable("carbon_tetrachloride", "Carbon tetrachloride", "pmol kg-1", None,
             exchange=("CCL4",), exchange_unit="PMOL/KG", flags=FlagScheme.WATER, plausible=(-0.1, 20)),
    Variable("sulfur_hexafluoride", "Sulfur hexafluoride", "fmol kg-1",
             "moles_of_sulfur_hexafluoride_per_unit_mass_in_sea_water",
             exchange=("SF6",), exchange_unit="FMOL/KG", flags=FlagScheme.WATER),
    Variable("helium", "Helium", "nmol kg-1", None,
             exchange=("HELIUM",), exchange_unit="NMOL/KG", flags=FlagScheme.WATER, plausible=(1, 3)),
    Variable("helium_error", "Standard uncertainty of helium, as delivered", "nmol kg-1", None,
             exchange=("HELIER",), exchange_unit="NMOL/KG"),
    Variable("neon", "Neon", "nmol kg-1", None,
             exchange=("NEON",), exchange_unit="NMOL/KG", flags=FlagScheme.WATER, plausible=(0, 10)),
    Variable("neon_error", "Standard uncertainty of neon, as delivered", "nmol kg-1", None,
             exchange=("NEONER",), exchange_unit="NMOL/KG"),
    Variable("delta_helium_3", "Helium-3 anomaly", "percent", None,
             exchange=("DELHE3",), exchange_unit="PERCNT", flags=FlagScheme.WATER, plausible=(-10, 100)),
    Variable("delta_helium_3_error", "Standard uncertainty of the helium-3 anomaly, as delivered", "percent",
             None, exchange=("DELHER",), exchange_unit="PERCNT"),
    Variable("tritium", "Tritium", "tritium_unit", None,
             exchange=("TRITUM",), exchange_unit="TU", flags=FlagScheme.WATER, plausible=(-1, 100)),
    Variable("tritium_error", "Standard uncertainty of tritium, as delivered", "tritium_unit", None,
             exchange=("TRITER",), exchange_unit="TU"),
    Variable("delta_carbon_13", "Carbon-13 of dissolved inorganic carbon", "1e-3", None,
             exchange=("DELC13",), exchange_unit="/MILLE", flags=FlagScheme.WATER, plausible=(-5, 5),
             uncertainty=Uncertainty(0.03, 0.0, "Quay 2003, as reported in Becker et al. 2016")),
    Variable("delta_carbon_13_error", "Standard uncertainty of carbon-13, as delivered", "1e-3", None,
             exchange=("C13ERR",), exchange_unit="/MILLE"),
    Variable("delta_carbon_14", "Carbon-14 of dissolved inorganic carbon", "1e-3", None,
             exchange=("DELC14",), exchange_unit="/MILLE", flags=FlagScheme.WATER, plausible=(-300, 250)),
    Variable("delta_carbon_14_error", "Standard uncertainty of carbon-14, as delivered", "1e-3", None,
             exchange=("C14ERR",), exchange_unit="/MILLE"),
    Variable("delta_oxygen_18", "Oxygen-18 of water", "1e-3", None,
             exchange=("DELO18",), exchange_unit="/MILLE", flags=FlagScheme.WATER, plausible=(-6, 5)),
    Variable("dissolved_organic_carbon", "Dissolved organic carbon", "umol kg-1",
             "moles_of_dissolved_organic_carbon_per_unit_mass_in_sea_water",
             exchange=("DOC",), exchange_unit="UMOL/KG", flags=FlagScheme.WATER, plausible=(30, 80)),
    Variable("total_dissolved_nitrogen", "Total dissolved nitrogen", "umol kg-1", None,
             exchange=("TDN",), exchange_unit="UMOL/KG", flags=FlagScheme.WATER, plausible=(3, 20)),
    Variable("particulate_organic_carbon", "Particulate organic carbon", "ug kg-1", None,
             exchange=("POC",), exchange_unit="UG/KG", flags=FlagScheme.WATER),
    Variable("particulate_organic_nitrogen", "Particulate organic nitrogen", "ug kg-1", None,
             exchange=("PON",), exchange_unit="UG/KG", flags=FlagScheme.WATER),
    Variable("phaeopigments", "Phaeopigments", "ug kg-1", None,
             exchange=("PPHYTN",), exchange_unit="UG/KG", flags=FlagScheme.WATER),
    Variable("chlorophyll_a", "Chlorophyll a", "ug kg-1", None,
             exchange=("CHLORA",), exchange_unit="UG/KG", flags=FlagScheme.WATER, plausible=(0, 9)),
    Variable("reference_temperature", "Temperature of the reference thermometer", "degree_C", None,
             exchange=("REFTMP",), exchange_unit="DEG C", flags=FlagScheme.WATER, plausible=(-3, 35)),
    Variable("reversing_temperature", "Temperature of the reversing thermometer, ITS-90", "degree_C", None,
             exchange=("REVTMP",), exchange_unit="ITS-90", flags=FlagScheme.WATER, plausible=(-2, 35)),
    Variable("reversing_pressure", "Pressure of the reversing meter", "dbar", None,
             exchange=("REVPRS",), exchange_unit="DBAR", flags=FlagScheme.WATER, plausible=(0, 11000)),
    Variable("delivered_potential_temperature", "Potential temperature, as delivered", "degree_C", None,
             exchange=("THETA",), exchange_unit="DEG C"),
    Variable("draw_temperature", "Temperature of the water when its oxygen sample was drawn", "degree_C", None,
             plausible=(-2, 35)),
    Variable("laboratory_temperature", "Temperature at which amounts per volume were measured", "degree_C", None,
             plausible=(0, 40)),
)

_SEAWATER = (
    Variable("practical_salinity", "Practical salinity used: the bottle's where good, else the CTD's", "1",
             "sea_water_practical_salinity", source="PSS-78; choice recorded in practical_salinity_source",
             plausible=(0, 42), uncertainty=Uncertainty(0.002, 0.0, _GOSHIP)),
    Variable("practical_salinity_source", "Where the salinity used came from", "", None, Kind.TEXT),
    Variable("oxygen", "Dissolved oxygen used: the bottle's where good, else the CTD's", "umol kg-1",
             "moles_of_oxygen_per_unit_mass_in_sea_water", source="choice recorded in oxygen_source",
             plausible=(0, 500), uncertainty=Uncertainty(0.0, 0.01, _CONSISTENCY)),
    Variable("oxygen_source", "Where the oxygen used came from", "", None, Kind.TEXT),
    Variable("absolute_salinity", "Absolute Salinity", "g kg-1", "sea_water_absolute_salinity",
             source=f"{_TEOS}; gsw.SA_from_SP", plausible=(0, 43), uncertainty=Uncertainty(0.002, 0.0, _GOSHIP)),
    Variable("preformed_salinity", "Preformed Salinity", "g kg-1", "sea_water_preformed_salinity",
             source=f"{_TEOS}; gsw.Sstar_from_SP", plausible=(0, 43), uncertainty=Uncertainty(0.002, 0.0, _GOSHIP)),
    Variable("conservative_temperature", "Conservative Temperature", "degree_C",
             "sea_water_conservative_temperature", source=f"{_TEOS}; gsw.CT_from_t",
             plausible=(-3, 36), uncertainty=Uncertainty(0.002, 0.0, _GOSHIP)),
    Variable("potential_temperature", "Potential temperature referred to the surface", "degree_C",
             "sea_water_potential_temperature", source=f"{_TEOS}; gsw.pt0_from_t",
             plausible=(-3, 36), uncertainty=Uncertainty(0.002, 0.0, _GOSHIP)),
    Variable("depth", "Depth below the surface", "m", "depth",
             source=f"{_TEOS}; gsw.z_from_p, positive down"),
    Variable("sigma0", "Potential density anomaly referred to 0 dbar", "kg m-3", "sea_water_sigma_theta",
             source=f"{_TEOS}; gsw.sigma0"),
    Variable("sigma2", "Potential density anomaly referred to 2000 dbar", "kg m-3", "sea_water_sigma_theta",
             source=f"{_TEOS}; gsw.sigma2"),
    Variable("sigma4", "Potential density anomaly referred to 4000 dbar", "kg m-3", "sea_water_sigma_theta",
             source=f"{_TEOS}; gsw.sigma4"),
    Variable("spiciness0", "Spiciness referred to 0 dbar", "kg m-3", None,
             source="McDougall and Krzysik 2015; gsw.spiciness0"),
    Variable("buoyancy_frequency_squared", "Square of the buoyancy frequency, from here to the next level",
             "s-2", "square_of_brunt_vaisala_frequency_in_sea_water", source=f"{_TEOS}; gsw.Nsquared"),
)

_TRACERS = (
    Variable("oxygen_solubility", "Oxygen at equilibrium with one atmosphere", "umol kg-1", None,
             source="Garcia and Gordon 1992, eq. 8"),
    Variable("aou", "Apparent oxygen utilization", "umol kg-1", "apparent_oxygen_utilization",
             source="solubility minus oxygen, Broecker and Peng 1982"),
    Variable("oxygen_saturation", "Oxygen as a fraction of its solubility", "1",
             "fractional_saturation_of_oxygen_in_sea_water", source="oxygen over solubility"),
    Variable("preformed_phosphate", "Preformed phosphate", "umol kg-1", None,
             source="Redfield 1942; ratio of the chosen stoichiometry"),
    Variable("preformed_nitrate", "Preformed nitrate", "umol kg-1", None,
             source="Redfield 1942; ratio of the chosen stoichiometry"),
    Variable("broecker_no", "NO: oxygen and nine times nitrate", "umol kg-1", None,
             source="Broecker 1974, EPSL 23:100-107"),
    Variable("broecker_po", "PO: oxygen and 135 times phosphate", "umol kg-1", None,
             source="Broecker 1974, EPSL 23:100-107"),
    Variable("po4_star", "PO4*: phosphate and oxygen over 175, less 1.95", "umol kg-1", None,
             source="Broecker et al. 1991, GBC 5:87"),
    Variable("n_star", "N*: nitrate in excess of 16 times phosphate", "umol kg-1", None,
             source="Gruber and Sarmiento 1997, GBC 11:235; Deutsch et al. 2001"),
    Variable("si_star", "Si*: silicic acid less nitrate", "umol kg-1", None,
             source="Sarmiento et al. 2004, Nature 427:56"),
)

_MIXING_SOURCE = "Tomczak 1981; Mackas et al. 1987; Karstensen and Tomczak 1998"
_SPREAD = (
    "standard deviation over ensemble members, perturbed sources and measurements; without members of first order, "
    "and then missing where a bound holds the value"
)
_PERCENTILE = "ensemble members, perturbed sources and measurements; the share itself is the unperturbed best fit"
_MIXING = (
    Variable("tag", "Leading source, or the reason why there is none", "", None, Kind.TEXT),
    Variable("leading_source", "Source with the largest share", "", None, Kind.TEXT),
    Variable("leading_share", "Share of the leading source", "1", None, source=_MIXING_SOURCE),
    Variable("leading_share_uncertainty", "Standard uncertainty of the leading share", "1", None,
             source=_SPREAD),
    Variable("leading_probability", "Probability that the leading source leads", "1", None,
             source="part of the ensemble members, perturbed sources and measurements"),
    Variable("respiration", "Phosphate released by respiration since the sources mixed", "umol kg-1", None,
             source=_MIXING_SOURCE),
    Variable("reduced_chi_square", "Weighted squared misfit per degree of freedom; missing where none is left", "1",
             None, source="misfits over the uncertainties of measurement and sources joined: below one is usual"),
    Variable("degrees_of_freedom", "Equations less unknowns that no bound holds", "1", None, Kind.INTEGER,
             source="properties and the sum of the shares, less shares and respiration that take part"),
    Variable("condition_number", "Condition number of the weighted properties that the sample has", "1", None,
             source="largest over smallest singular value where the sum of the shares is kept"),
    Variable("hull_distance", "Distance outside what the sources can mix to, in standard uncertainties", "1", None,
             source="chi-square that the bounds add, square root; Wollan and Dykstra 1986"),
    Variable("mixing_set", "Source set the sample was solved with", "", None, Kind.TEXT),
    Variable("mixing_status", "Whether the sample was solved, else why not", "", None, Kind.TEXT),
    Variable("source", "Source water", "", None, Kind.TEXT),
    Variable("share", "Share of the source in the sample; exactly 0 where its bound holds it", "1", None,
             source=_MIXING_SOURCE),
    Variable("share_uncertainty", "Standard uncertainty of the share", "1", None, source=_SPREAD),
    Variable("share_p16", "Share: 16th percentile of the ensemble", "1", None, source=_PERCENTILE),
    Variable("share_p50", "Share: median of the ensemble", "1", None, source=_PERCENTILE),
    Variable("share_p84", "Share: 84th percentile of the ensemble", "1", None, source=_PERCENTILE),
    Variable("respiration_uncertainty", "Standard uncertainty of the phosphate released", "umol kg-1", None,
             source=_SPREAD),
    Variable("pseudo_age", "Oxygen consumed over a given utilisation rate: an age only in name", "year", None,
             source="Karstensen and Tomczak 1998; rate from the settings"),
    *(
        Variable(f"{name}_{part}{suffix}", f"{quantity} {words}{of}", "umol kg-1", None,
                 source=_SPREAD if suffix else _MIXING_SOURCE)
        for name, quantity in (("phosphate", "Phosphate"), ("nitrate", "Nitrate"), ("silicate", "Silicic acid"),
                               ("oxygen", "Oxygen"), ("dic", "Dissolved inorganic carbon"),
                               ("alkalinity", "Total alkalinity"))
        for part, words in (("from_sources", "that came with the source waters"),
                            ("from_respiration", "that respiration added (negative: took away)"))
        for suffix, of in (("", ""), ("_uncertainty", ": standard uncertainty"))
    ),
)

_NOTICES = (
    Variable("variable", "Variable concerned", "", None, Kind.TEXT),
    Variable("check", "Check that noticed it", "", None, Kind.TEXT),
    Variable("severity", "note, doubt or fault", "", None, Kind.TEXT),
    Variable("count", "Rows that the finding speaks for", "", None, Kind.INTEGER),
    Variable("value", "What was found", "", None, Kind.TEXT),
    Variable("limit", "What was expected", "", None, Kind.TEXT),
    Variable("message", "The finding in words", "", None, Kind.TEXT),
    Variable("raw", "The delivered text", "", None, Kind.TEXT),
    Variable("reason", "Why the row cannot be used, by name", "", None, Kind.TEXT),
    Variable("table", "Table of the archive that the change is in", "", None, Kind.TEXT),
    Variable("change", "What happened between two revisions, by name", "", None, Kind.TEXT),
    Variable("occurrence", "Which of several rows of the same key, counted from 1", "", None, Kind.INTEGER),
    Variable("before", "Value in the earlier revision, as text", "", None, Kind.TEXT),
    Variable("after", "Value in the later revision, as text", "", None, Kind.TEXT),
    Variable("difference", "Later number less the earlier one, in the unit of the variable concerned", ""),
)
# fmt: on

BASE: tuple[Variable, ...] = (
    *_IDENTITY, *_CTD, *_WATER, *_SEAWATER, *_TRACERS, *STATION_CARBON, *SAMPLE_CARBON, *_MIXING, *MIXED_CARBON,
    *_NOTICES, *CROSSOVERS, *CENSUS, *_LEDGER,
)  # fmt: skip

MEASURED: tuple[str, ...] = tuple(v.name for v in (*_CTD, *_WATER))
# Measured columns that carry flags of their own are checked; uncertainties that came with them are not.
CHECKED: tuple[str, ...] = tuple(v.name for v in (*_CTD, *_WATER) if v.flags is not None)
# What a cruise measured may be off as a whole, and is corrected by a factor or by what is added.
CORRECTABLE: tuple[str, ...] = tuple(
    v.name for v in (*_CTD, *_WATER) if v.flags is not None and v.unit not in {"dbar", "degree_C"}
)
IDENTITY: tuple[str, ...] = tuple(v.name for v in _IDENTITY)
SEAWATER: tuple[str, ...] = tuple(v.name for v in _SEAWATER)
TRACERS: tuple[str, ...] = tuple(v.name for v in _TRACERS)

RESIDUAL_PREFIX = "residual_"


def flag_name(name: str) -> str:
    """Return the column that holds the delivered flags of ``name``."""
    return f"{name}_flag"


def check_name(name: str) -> str:
    """Return the column that holds our own check flags of ``name``."""
    return f"{name}_check"


def corrected_name(name: str) -> str:
    """Return the column that holds the values of ``name`` with the settings' correction of the cruise."""
    return f"{name}_corrected"


def residual_name(name: str) -> str:
    """Return the column that holds the mixing residual of property ``name``."""
    return f"{RESIDUAL_PREFIX}{name}"


def _companions(variable: Variable) -> list[Variable]:
    """Return the columns that stand beside a base variable."""
    beside = []
    if variable.flags is not None:
        scheme = f"WHP {variable.flags} flags; Joyce and Corry 1994"
        beside.append(
            Variable(flag_name(variable.name), f"{variable.long_name}: flag as delivered", "",
                     "quality_flag", Kind.FLAG, source=scheme)
        )  # fmt: skip
    if variable.name in CHECKED:
        beside.append(
            Variable(check_name(variable.name), f"{variable.long_name}: result of our checks", "",
                     "quality_flag", Kind.FLAG,
                     source="IODE primary flags, IOC MG 54, vol. 3; what came flagged as bad is not judged")
        )  # fmt: skip
    if variable.name in CORRECTABLE:
        beside.append(
            Variable(corrected_name(variable.name), f"{variable.long_name}: with the settings' correction",
                     variable.unit, variable.standard_name, source="the correction is in the field metadata")
        )  # fmt: skip
    if variable.kind is Kind.NUMBER and variable.name in {*MEASURED, *SEAWATER, *TRACERS}:
        beside.append(
            Variable(residual_name(variable.name), f"{variable.long_name}: fitted less observed",
                     variable.unit, None, source=_MIXING_SOURCE)
        )  # fmt: skip
    return beside


REGISTRY: Mapping[str, Variable] = MappingProxyType(
    {v.name: v for base in BASE for v in (base, *_companions(base))}
)

EXCHANGE_NAMES: Mapping[str, Variable] = MappingProxyType({name: v for v in BASE for name in v.exchange})
