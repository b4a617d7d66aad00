from __future__ import annotations

from importlib.resources import files
from typing import Any
from xml.etree import ElementTree as ET

import numpy as np
import pytest

from pipeline.reading import read_delivery
from pipeline.reading.cf_flags import scheme_of
from pipeline.reading.cf_names import STANDARD_NAMES
from pipeline.reading.description import ColumnEntry, Description
from pipeline.reading.netcdf_bytes import StoredVariable
from pipeline.reading.schemes import Scheme, mapping_words
from pipeline.settings import Settings
from pipeline.usable import usable
from pipeline.variables import FlagScheme
from tests.invented import LIMITS, checks, one
from tests.reading.netcdf_files import Plan, netcdf_bytes, rows

IODE = {1: "good", 2: "not_evaluated", 3: "questionable", 4: "bad", 9: "missing"}
QARTOD = {1: "PASS", 2: "NOT_EVALUATED", 3: "SUSPECT", 4: "FAIL", 9: "MISSING"}
ARGO = {
    0: "no_qc_performed", 1: "good_data", 2: "probably_good_data", 3: "bad_data_that_are_potentially_correctable",
    4: "bad_data", 5: "value_changed", 8: "interpolated_value", 9: "missing_value",
}  # fmt: skip
BACKWARD = {0: "not_evaluated", 1: "bad", 2: "suspect", 3: "good", 9: "missing"}
WATER = {2: "acceptable", 3: "questionable", 4: "bad", 6: "mean_of_replicates", 9: "not_sampled"}
CTD = {1: "not_calibrated", 2: "acceptable", 3: "questionable", 6: "interpolated", 7: "despiked"}


def flags(values: list[int], meanings: str, **more: Any) -> StoredVariable:
    attributes = {"flag_values": np.array(values, dtype="i1"), "flag_meanings": meanings, **more}
    return StoredVariable("x_qc", ("n",), np.array(values, dtype="i1"), attributes)


@pytest.mark.parametrize(
    ("words", "table", "scheme"),
    [
        (IODE, FlagScheme.WATER, Scheme.IODE),
        (QARTOD, FlagScheme.CTD, Scheme.IODE),  # the same numbers
        (ARGO, FlagScheme.CTD, Scheme.ARGO),
        (WATER, FlagScheme.WATER, Scheme.WHP),
        (WATER, FlagScheme.CTD, None),  # no mean of replicates there
        (CTD, FlagScheme.CTD, Scheme.WHP),
        (BACKWARD, FlagScheme.WATER, None),
        ({0: "green", 1: "red"}, FlagScheme.WATER, None),
        ({1: "good", 4: "bad"}, FlagScheme.WATER, Scheme.IODE),  # in every scheme that has these
    ],
)
def test_a_scheme_is_known_by_what_its_numbers_mean(
    words: dict[int, str], table: FlagScheme, scheme: Scheme | None
) -> None:
    assert scheme_of(flags(list(words), " ".join(words.values())), table) is scheme


def test_flags_that_do_not_add_up_are_of_no_scheme() -> None:
    assert scheme_of(flags([1, 2], "good"), FlagScheme.WATER) is None
    assert scheme_of(flags([1, 2], "good bad", flag_masks=np.array([1, 2])), FlagScheme.WATER) is None


def test_a_scheme_may_be_named() -> None:
    argo = StoredVariable("x_qc", ("n",), np.array([b"1"]), {"conventions": "Argo reference table 2"})
    assert scheme_of(argo, FlagScheme.CTD) is Scheme.ARGO
    assert scheme_of(StoredVariable("x_qc", ("n",), np.array([1])), FlagScheme.CTD) is None
    assert (
        scheme_of(StoredVariable("OXYGEN_FLAG_W", ("n",), np.array([1])), FlagScheme.CTD, exchange=True)
        is Scheme.WHP
    )


TO_IODE = {2: 1, 3: 3, 5: 2, 9: 9}


def test_iode_flags_become_whp_flags_and_stay_as_delivered_beside_them() -> None:
    data = netcdf_bytes(rows(), Plan(meanings=IODE, flag=lambda whp: TO_IODE[int(whp)]))
    delivery = read_delivery("x.nc", data, LIMITS)
    table = delivery.table
    assert table.column("bottle_oxygen_flag").to_pylist()[:3] == [2, 3, 2]
    assert table.column("oxygen_qc").to_pylist()[:3] == [1.0, 3.0, 1.0]
    assert table.column("nitrate_flag").to_pylist()[:3] == [2, 2, None]  # not evaluated: no flag in WHP
    words = table.schema.field("nitrate_flag").metadata[b"conversion"].decode()
    assert words == mapping_words(Scheme.IODE, FlagScheme.WATER)
    assert not delivery.findings


def test_a_flag_outside_its_scheme_is_told_and_is_not_good() -> None:
    def spoil(file: Any) -> None:
        file["oxygen_qc"][0] = 77

    data = netcdf_bytes(rows(), Plan(meanings=IODE, flag=lambda whp: TO_IODE[int(whp)], spoil=spoil))
    delivery = read_delivery("x.nc", data, LIMITS)
    assert one(delivery, "bottle_oxygen_flag") == 3
    assert checks(delivery) == ["unknown-flag"]
    assert delivery.findings[0].message.startswith("x.nc, record 1: the flag oxygen_qc is '77'")


def test_values_under_flags_that_cannot_be_read_are_not_used_until_somebody_says_what_they_are() -> None:
    data = netcdf_bytes(rows(), Plan(meanings={0: "green", 1: "red"}, flag=lambda _: 0))
    delivery = read_delivery("x.nc", data, LIMITS)
    assert set(checks(delivery)) == {"unknown-flag-scheme"}
    told = {finding.variable: finding.message for finding in delivery.findings}
    assert set(told) == {"ctd_salinity", "bottle_salinity", "bottle_oxygen", "nitrate", "phosphate"}
    assert told["nitrate"] == (
        "x.nc: nitrate_qc holds the flags of nitrate, but its flag_meanings are 'green red'; expected the flags of a"
        " scheme that is known (whp, iode, qartod, argo); every value of nitrate counts as questionable, and nitrate_qc"
        ' is kept as delivered; say in cruise.toml what they are: "nitrate" = { quantity = "nitrate", flag ='
        ' "nitrate_qc", flags = "iode" }, or leave flag and flags out to use the values without flags.'
    )
    assert delivery.table.column("nitrate_flag").to_pylist()[:3] == [3, 3, 9]
    assert np.isnan(usable(delivery.table, "nitrate", Settings().use)).all()
    described = Description("x.nc", columns=(ColumnEntry("nitrate", "nitrate"),))
    without = read_delivery("x.nc", data, LIMITS, described)
    assert "nitrate_flag" not in without.table.column_names
    assert np.isfinite(usable(without.table, "nitrate", Settings().use)[:2]).all()
    assert "nitrate" not in {finding.variable for finding in without.findings}


def test_flags_that_only_their_name_gives_away_are_doubted_too() -> None:
    def spoil(file: Any) -> None:
        file["nitrate"].delncattr("ancillary_variables")
        for name in ("standard_name", "flag_values", "flag_meanings"):
            file["nitrate_qc"].delncattr(name)

    delivery = read_delivery("x.nc", netcdf_bytes(rows(), Plan(spoil=spoil)), LIMITS)
    (finding,) = delivery.findings
    assert (
        "nitrate_qc holds the flags of nitrate, but nothing in the file says what its values mean"
        in finding.message
    )
    assert one(delivery, "nitrate_flag") == 3
    assert one(delivery, "nitrate_qc") == 2.0


def test_flags_that_a_description_gives_are_read_by_its_scheme() -> None:
    entry = ColumnEntry("nitrate", "nitrate", flag="nitrate_qc", flag_scheme=Scheme.ARGO)
    data = netcdf_bytes(rows(), Plan(meanings={0: "green", 1: "red"}, flag=lambda _: 1))
    delivery = read_delivery("x.nc", data, LIMITS, Description("x.nc", columns=(entry,)))
    assert one(delivery, "nitrate_flag") == 2
    assert one(delivery, "nitrate_qc") == 1.0
    assert "nitrate" not in {finding.variable for finding in delivery.findings}


# Not in the table any more, but in files.
OLD_NAMES = {"sea_floor_depth_below_sea_level", "sea_floor_depth"}


def test_standard_names_are_those_of_the_table() -> None:
    table = files("compliance_checker") / "data" / "cf-standard-name-table.xml"
    root = ET.fromstring(table.read_text(encoding="utf-8"))  # noqa: S314 - the checker's own file
    known = {entry.attrib["id"] for entry in root if "id" in entry.attrib}
    assert set(STANDARD_NAMES) - known <= OLD_NAMES
