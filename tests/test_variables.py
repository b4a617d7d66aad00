from __future__ import annotations

import re

from pipeline import tables
from pipeline.variables import BASE, EXCHANGE_NAMES, MEASURED, REGISTRY, Kind, check_name, flag_name

# The parameter list of the exchange format, version 1.2.0, and the columns that stand beside it in files.
LISTED = """
CTDPRS CTDTMP CTDSAL SALNTY CTDOXY OXYGEN SILCAT NITRAT NITRIT NO2+NO3 PHSPHT NH4 TCARBN ALKALI PH_TOT PH_SWS
PH_TMP PCO2 PCO2TMP FCO2 FCO2TMP CFC-11 CFC-12 CFC113 CCL4 SF6 HELIUM NEON DELHE3 TRITUM DELC13 C13ERR DELC14
C14ERR DELO18 DOC TDN CHLORA REFTMP REVTMP REVPRS CTDRAW FLUOR XMISS EXPOCODE SECT_ID STNNBR CASTNO SAMPNO BTLNBR
DATE TIME LATITUDE LONGITUDE DEPTH
""".split()

# Units that UDUNITS reads, or that stand for no unit.
UNITS = {
    "", "1", "1e-3", "degree_C", "degree_north", "degree_east", "dbar", "m", "s-2", "kg m-3", "g kg-1", "percent",
    "umol kg-1", "nmol kg-1", "pmol kg-1", "fmol kg-1", "ug kg-1", "mg m-3", "uatm", "tritium_unit", "year", "km2",
}  # fmt: skip

# CF table v93 has no name for these, and none may be invented.
NAMELESS = (
    "cfc12 delta_carbon_13 delta_carbon_14 preformed_phosphate preformed_nitrate oxygen_solubility broecker_no"
    " broecker_po po4_star n_star si_star share spiciness0"
).split()


def test_names_are_unique_snake_case() -> None:
    names = [variable.name for variable in BASE]
    assert len(names) == len(set(names))
    assert all(re.fullmatch(r"[a-z][a-z0-9]*(_[a-z0-9]+)*", name) for name in REGISTRY)


def test_every_listed_exchange_quantity_is_there() -> None:
    assert set(LISTED) <= set(EXCHANGE_NAMES)


def test_exchange_names_mean_one_quantity() -> None:
    names = [name for variable in BASE for name in variable.exchange]
    assert len(names) == len(set(names))


def test_units_are_known_ones() -> None:
    assert {variable.unit for variable in REGISTRY.values()} <= UNITS


def test_names_that_cf_does_not_have_are_not_invented() -> None:
    assert all(REGISTRY[name].standard_name is None for name in NAMELESS)


def test_ranges_are_in_order() -> None:
    assert all(v.plausible is None or v.plausible[0] < v.plausible[1] for v in BASE)


def test_every_flagged_quantity_has_its_flag_and_check_columns() -> None:
    for name in MEASURED:
        if REGISTRY[name].flags is not None:
            assert REGISTRY[flag_name(name)].kind is Kind.FLAG
            assert REGISTRY[check_name(name)].kind is Kind.FLAG


def test_every_table_is_a_list_of_registry_names() -> None:
    for listed in (tables.SAMPLES_CORE, tables.CASTS_CORE, tables.MIXTURES, tables.FINDINGS, tables.REJECTS):
        assert set(listed) <= set(REGISTRY)
