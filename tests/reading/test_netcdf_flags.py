from __future__ import annotations

from importlib.resources import files
from typing import Any
from xml.etree import ElementTree as ET

import numpy as np
import pyarrow as pa
import pytest

from pipeline.checking import check
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
        ' "nitrate_qc", flags = "..." }, with one of whp, iode, qartod, argo in place of the dots, or leave flag and'
        " flags out to use the values without flags."
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


NOT_CALIBRATED = "not_calibrated acceptable questionable bad not_reported not_sampled"


@pytest.mark.parametrize(
    ("values", "meanings"),
    [
        ([1, 2, 3, 4, 5, 9], NOT_CALIBRATED),
        ([1, 2, 3, 4, 5, 9], NOT_CALIBRATED.title()),
        (
            [2, 3, 4, 5, 9],
            "acceptable_measurement questionable_measurement bad_measurement not_reported not_sampled",
        ),
        (
            [1, 2, 3, 4, 5, 6, 9],
            "sample_drawn_but_analysis_not_received acceptable questionable bad not_reported"
            " mean_of_replicate_measurements sample_not_drawn",
        ),
        ([1, 2, 3, 4, 5, 9], "uncalibrated good_data suspect_data bad_data unreported missing"),
        ([2, 3, 4, 9], "no_problems_noted leaking did_not_trip_correctly samples_not_drawn"),
    ],
)
def test_whp_flags_are_known_by_the_words_that_files_have_for_them(values: list[int], meanings: str) -> None:
    assert scheme_of(flags(values, meanings), FlagScheme.WATER) is Scheme.WHP


def test_numbers_that_differ_between_the_whp_tables_are_not_mixed() -> None:
    assert scheme_of(flags([1, 2, 6], "not_calibrated acceptable interpolated"), FlagScheme.WATER) is None


def test_a_long_name_may_name_the_scheme() -> None:
    named = StoredVariable("x_qc", ("n",), np.array([2]), {"long_name": "WHP flag of oxygen"})
    assert scheme_of(named, FlagScheme.WATER) is Scheme.WHP
    odd = flags([2, 3], "splendid poor", long_name="WOCE quality flag")
    assert scheme_of(odd, FlagScheme.WATER) is None, "its own words say nothing that is known"
    partly = flags([2, 3, 7], "good doubtful_value spiky", comment="WOCE flags")
    assert scheme_of(partly, FlagScheme.WATER) is Scheme.WHP, "named, and good is what it calls good"


@pytest.mark.parametrize(
    ("meanings", "delivered", "advice"),
    [
        ({1: "murky", 2: "good", 3: "odd"}, 2, 'flags = "whp" }'),
        ({1: "good", 2: "odd"}, 1, 'flags = "iode" }'),
        ({0: "odd", 1: "good", 8: "odd"}, 1, 'flags = "argo" }'),
        ({2: "green", 4: "red"}, 2, 'flags = "whp" }'),
        (
            {0: "green", 70: "red"},
            70,
            'flags = "..." }, with one of whp, iode, qartod, argo in place of the dots,',
        ),
    ],
)
def test_the_advice_names_the_scheme_that_fits(meanings: dict[int, str], delivered: int, advice: str) -> None:
    data = netcdf_bytes(rows(), Plan(meanings=meanings, flag=lambda _: delivered))
    told = [f for f in read_delivery("x.nc", data, LIMITS).findings if f.variable == "nitrate"]
    assert advice in told[0].message
    assert "cruise.toml" not in told[0].to_group
    assert "what do its values mean?" in told[0].to_group


def test_the_flags_of_a_page_and_of_a_check_are_those_that_were_delivered() -> None:
    data = netcdf_bytes(rows(), Plan(meanings={0: "green", 1: "red"}, flag=lambda _: 0))
    table = read_delivery("x.nc", data, LIMITS).table
    assert table.schema.field("nitrate_flag").metadata[b"delivered_name"] == b"nitrate_qc"
    found = check(pa.concat_tables([table] * 3), Settings()).findings
    (told,) = [f for f in found if f.check == "all-flagged-bad" and f.variable == "nitrate"]
    assert "none under a good flag (all have flag 0 in nitrate_qc)" in told.message
