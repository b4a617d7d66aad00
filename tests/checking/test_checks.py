from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest

from pipeline.checking import check
from pipeline.checking.track import nautical_miles
from pipeline.findings import Severity
from pipeline.settings import Settings
from tests.invented import bottle_file, cast_file, read

if TYPE_CHECKING:
    from pipeline.checking import Checked
    from pipeline.findings import Finding

SETTINGS = Settings()


def checked(*rows: dict[str, str], extra: dict[str, str] | None = None) -> Checked:
    return check(read(bottle_file(*rows, extra=extra)).table, SETTINGS)


def only(result: Checked) -> Finding:
    (finding,) = result.findings
    return finding


def test_a_clean_cruise_raises_nothing() -> None:
    result = checked({}, {}, {"NITRAT": "-999", "NITRAT_FLAG_W": "9"})
    assert not result.findings
    assert result.flags["nitrate_check"].tolist() == [1, 1, 9]


# Each check on a row where it must speak: what changes, the check, the variable, its flag, and the sentence.
SPEAKING = [
    (
        {"SALNTY": "12623", "SALNTY_FLAG_W": "2"}, "gross-range", "bottle_salinity", 4,
        "cruise_hy1.csv, line 5: SALNTY is 12623, off by more than the whole range of sea water; expected 0 to 42.",
    ),
    (
        {"OXYGEN": "-7934", "OXYGEN_FLAG_W": "2"}, "gross-range", "bottle_oxygen", 4,
        "cruise_hy1.csv, line 5: OXYGEN is -7934, off by more than the whole range of sea water; expected 0 to 500"
        " umol/kg.",
    ),
    (
        {"NITRAT": "-999", "NITRAT_FLAG_W": "2"}, "flag-without-value", "nitrate", 9,
        "cruise_hy1.csv, line 5: NITRAT is missing under the good flag 2; expected a value, or flag 9 where none was"
        " sampled.",
    ),
    (
        {"NITRAT_FLAG_W": "9"}, "value-under-missing-flag", "nitrate", 3,
        "cruise_hy1.csv, line 5: NITRAT is 30 under a flag that says there is no value; expected no value, or another"
        " flag; it is not used.",
    ),
    (
        {"NITRAT_FLAG_W": "65"}, "unknown-flag", "nitrate", 3,
        "cruise_hy1.csv, line 5: NITRAT has flag 65; expected a WHP water-sample flag, 1 to 9; values under it are"
        " not used.",
    ),
    (
        {"SAMPNO": "1"}, "duplicate-sample", "sample", None,
        "cruise_hy1.csv, line 5: SAMPNO 1 stands already on line 4 of this cast, and the two rows differ in BTLNBR;"
        " expected each sample number once in a cast; both rows are kept and used: take one out, or give it the number"
        " that it has.",
    ),
]  # fmt: skip


@pytest.mark.parametrize(("changed", "name", "variable", "flag", "sentence"), SPEAKING)
def test_where_a_check_must_speak(
    changed: dict[str, str], name: str, variable: str, flag: int | None, sentence: str
) -> None:
    result = checked({}, changed)
    finding = only(result)
    assert (finding.check, finding.variable, finding.message) == (name, variable, sentence)
    assert (finding.station, finding.line) == ("1", 5)
    if flag is not None:
        assert result.flags[f"{variable}_check"].tolist() == [1, flag]


def test_a_cell_that_held_no_number_is_told_of_once() -> None:
    delivery = read(bottle_file({"NITRAT": "3o.1"}, {"NITRAT": "-999"}))
    assert [finding.check for finding in delivery.findings] == ["not-a-number"]
    (finding,) = check(delivery.table, SETTINGS, delivery.findings).findings
    assert (finding.check, finding.line) == ("flag-without-value", 5)


def test_garbage_that_the_group_flagged_itself_is_no_news() -> None:
    assert not checked({}, {"SALNTY": "12623", "SALNTY_FLAG_W": "4"}).findings


def test_an_extreme_that_may_be_honest_is_a_doubt() -> None:
    result = checked({"OXYGEN": "512.0"})
    assert only(result).severity is Severity.DOUBT
    assert result.flags["bottle_oxygen_check"].tolist() == [3]


def test_flags_of_the_igoss_scheme_are_heeded() -> None:
    extra = {"DOC": "UMOL/KG", "DOC_FLAG_I": ""}
    result = checked(*[{"DOC": "45.0", "DOC_FLAG_I": flag} for flag in ("1", "3", "4")], extra=extra)
    assert [(f.check, f.severity, f.line) for f in result.findings] == [
        ("igoss-flag", Severity.FAULT, 6), ("igoss-flag", Severity.DOUBT, 5),
    ]  # fmt: skip
    assert result.flags["dissolved_organic_carbon_check"].tolist() == [1, 3, 4]


def test_flag_eight_is_a_water_flag_and_no_ctd_flag() -> None:
    assert not checked({"NITRAT_FLAG_W": "8"}).findings
    assert only(checked({"CTDSAL_FLAG_W": "8"})).check == "unknown-flag"


def test_a_whole_parameter_flagged_bad_is_told_once() -> None:
    finding = only(checked(*[{"NITRAT_FLAG_W": "4"}] * 12))
    assert (finding.check, finding.severity) == ("all-flagged-bad", Severity.NOTE)
    assert "has 12 values and none under a good flag (all have flag 4)" in finding.message


def test_a_part_of_a_parameter_under_another_flag_is_most_of_it() -> None:
    finding = only(checked(*[{"NITRAT_FLAG_W": "4"}] * 11, {"NITRAT_FLAG_W": "3"}))
    assert "has 12 values and none under a good flag (most have flag 4)" in finding.message


def test_what_is_said_of_many_rows_is_said_once() -> None:
    finding = only(checked({}, *[{"NITRAT_FLAG_W": "0"}] * 70))
    assert (finding.count, finding.line, finding.sample) == (70, 5, None)
    assert finding.message == (
        "cruise_hy1.csv, lines 5 to 74: NITRAT has flag 0 in 70 rows; expected a WHP water-sample flag, 1 to 9; values"
        " under it are not used."
    )


def test_flags_that_make_a_whole_parameter_useless_are_told_once() -> None:
    assert only(checked(*[{"NITRAT_FLAG_W": "0"}] * 12)).check == "unknown-flag"


def test_many_findings_of_one_kind_end_in_one_sentence() -> None:
    findings = checked({}, *[{"OXYGEN": f"{600 + i}"} for i in range(70)]).findings
    assert len(findings) == 51
    assert sum(finding.count for finding in findings) == 70
    assert "lines 55 to 74: OXYGEN is 650 (and 19 more rows)" in findings[-1].message


@pytest.mark.parametrize("code", ["-9", "-99.0", "99.99", "9999"])
def test_a_code_for_missing_is_called_that(code: str) -> None:
    finding = only(checked({}, {"NITRAT": code}))
    assert (finding.check, finding.severity) == ("gross-range", Severity.FAULT)
    assert finding.message == (
        f"cruise_hy1.csv, line 5: NITRAT is {float(code):g}, which looks like a code for a missing value; expected -0.1"
        " to 47 umol/kg, or a missing value under flag 9."
    )


def test_a_pressure_that_no_sea_has_is_told_with_the_sea_floor() -> None:
    finding = only(checked({}, {"CTDPRS": "15964"}))
    assert "CTDPRS is 15964 where the sea floor is at 4100 m; expected 0 to 10000 dbar." in finding.message


def test_rows_that_are_the_same_are_called_that() -> None:
    finding = only(checked({}, {"SAMPNO": "1", "BTLNBR": "1"}))
    assert (
        "stands already on line 4 of this cast, and the two rows are the same in all columns"
        in finding.message
    )


def test_a_wrong_year_is_told_once() -> None:
    rows = [
        {"STNNBR": str(i), "LATITUDE": f"{-35 - i / 60:.4f}", "DATE": f"201902{10 + i}"} for i in range(9)
    ]
    finding = only(checked(*rows))
    assert (finding.check, finding.count) == ("departure-date", 9)
    assert finding.message.startswith("cruise_hy1.csv, lines 4 to 12: TIME lies 3648 days after")
    assert "in 9 casts; expected" in finding.message


def test_a_wrong_time_of_a_cast_is_told_once() -> None:
    near = [{"STNNBR": str(i), "LATITUDE": f"{-35.5 - i}", "DATE": f"2009021{i}"} for i in range(4, 9)]
    late = {**near[2], "DATE": "20090219"}
    findings = checked(*near[:3], late, *near[3:]).findings
    assert [(f.check, f.severity, f.line) for f in findings] == [("cast-time", Severity.DOUBT, 6)]


def test_a_time_that_fits_neither_the_list_nor_the_ship_is_a_doubt_told_once() -> None:
    rows = [{"STNNBR": str(i), "LATITUDE": f"{-30.0 - i}", "DATE": f"200902{14 + i}"} for i in range(8)]
    rows[5] = {**rows[5], "DATE": "20090215", "TIME": "1000"}
    (finding,) = checked(*rows).findings
    assert (finding.check, finding.severity, finding.station) == ("clock-order", Severity.DOUBT, "5")


def test_a_station_name_used_at_two_places() -> None:
    finding = only(checked({}, {"STNNBR": "1", "LATITUDE": "-36.5000", "CASTNO": "2", "DATE": "20090220"}))
    assert (finding.check, finding.variable) == ("repeated-station", "station")
    assert "STNNBR 1 is 60 nautical miles from where the same station was before" in finding.message


def test_a_station_that_the_ship_could_not_reach() -> None:
    near = {"STNNBR": "2", "LATITUDE": "-35.6000", "TIME": "1400"}
    far = {"STNNBR": "3", "LATITUDE": "-45.6000", "TIME": "2000"}
    assert not checked({}, near).findings
    finding = only(checked({}, near, far))
    assert (finding.check, finding.station) == ("station-speed", "3")
    assert "STNNBR 3 lies 600 nautical miles from the cast before, 100 knots" in finding.message


def test_the_date_line_is_no_distance() -> None:
    east = {"STNNBR": "1", "LATITUDE": "0.0", "LONGITUDE": "179.9500"}
    west = {"STNNBR": "2", "LATITUDE": "0.0", "LONGITUDE": "-179.9500", "TIME": "1203"}
    assert not checked(east, west).findings


def test_a_degree_of_latitude_is_sixty_miles() -> None:
    zero = np.zeros(1)
    assert nautical_miles(zero, zero, zero + 1, zero)[0] == pytest.approx(60.0)
    assert nautical_miles(zero + 60, zero, zero + 60, zero + 2)[0] == pytest.approx(60.0, rel=1e-3)


@pytest.mark.parametrize(
    ("later", "severity"),
    [({"TIME": "0110", "DATE": "20090215"}, Severity.NOTE), ({"DATE": "20090222"}, Severity.DOUBT)],
)
def test_time_that_changes_within_a_cast(later: dict[str, str], severity: Severity) -> None:
    finding = only(checked({"TIME": "2350"}, later))
    assert (finding.check, finding.severity) == ("cast-time", severity)


def test_ctd_levels_that_stand_twice_or_turn_back() -> None:
    levels = [f"{p:.1f},2,20.0,2,35.5,2" for p in (0, 10, 20, 20, 15, 30)]
    result = check(read(cast_file(levels), "cast_ct1.csv").table, SETTINGS)
    assert [finding.check for finding in result.findings] == ["duplicate-pressure", "pressure-order"]
    assert result.flags["pressure_check"].tolist() == [1, 1, 1, 3, 1, 1]
    assert "CTDPRS turns back at 15 dbar" in result.findings[1].message


@pytest.mark.parametrize("order", [(0, 10, 20), (20, 10, 0)])
def test_a_cast_that_goes_one_way_is_in_order(order: tuple[int, ...]) -> None:
    levels = [f"{p:.1f},2,20.0,2,35.5,2" for p in order]
    assert not check(read(cast_file(levels), "cast_ct1.csv").table, SETTINGS).findings


def test_ctd_findings_of_one_cast_are_told_together() -> None:
    levels = [f"{p:.1f},2,{100 + p / 100},2,35.5,2" for p in range(0, 400, 10)]
    finding = only(check(read(cast_file(levels), "cast_ct1.csv").table, SETTINGS))
    assert (finding.check, finding.count) == ("gross-range", 40)
    assert finding.message.startswith(
        "cast_ct1.csv, lines 14 to 53: CTDTMP is 100, off by more than the whole range of sea water (and 39 more rows);"
    )


def test_a_station_out_of_the_way_is_told_and_not_the_one_after_it() -> None:
    places = ("-35.5000", "-35.6000", "-45.6000", "-35.8000", "-35.9000")
    rows = [
        {"STNNBR": str(i + 1), "LATITUDE": latitude, "TIME": f"{8 + 3 * i:02d}00"}
        for i, latitude in enumerate(places)
    ]
    findings = [finding for finding in checked(*rows).findings if finding.check == "station-speed"]
    assert [finding.station for finding in findings] == ["3"]


def test_two_fast_legs_are_told_where_the_way_past_is_no_slower() -> None:
    rows = [
        {"STNNBR": str(i + 1), "LATITUDE": f"{-35.5 - 5 * i}", "TIME": f"{8 + 3 * i:02d}00"} for i in range(3)
    ]
    findings = [finding for finding in checked(*rows).findings if finding.check == "station-speed"]
    assert [finding.station for finding in findings] == ["2", "3"]


def test_the_sentence_of_a_sea_floor_above_a_sample() -> None:
    finding = only(checked({}, {"CTDPRS": "4300.0"}, {"CTDPRS": "4100.0"}))
    assert (finding.check, finding.line) == ("bottom-depth", 5)
    assert (
        "DEPTH is 4100 m, and the sample at CTDPRS 4300 of the cast would lie at 4226 m; expected a sea floor below"
        in finding.message
    )


def test_noise_below_zero_is_no_doubt_of_a_nutrient() -> None:
    result = checked({}, {"PHSPHT": "-0.02"}, {"PHSPHT": "-0.04"})
    assert [(finding.check, finding.line) for finding in result.findings] == [("gross-range", 6)]
    assert result.flags["phosphate_check"].tolist() == [1, 1, 3]
