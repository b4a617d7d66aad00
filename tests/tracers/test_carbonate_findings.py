"""What is told of the carbonate system of a table, in which words, and what becomes of the values."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest

from pipeline.findings import Severity
from pipeline.problems import SettingsProblem
from pipeline.process import process_cruise
from pipeline.settings import Settings, read_settings
from tests.invented import EXPOCODE, bottle_file, read

from .carbon_cases import DEEP, laboratory, of, solved, told, without

if TYPE_CHECKING:
    from pathlib import Path

CARBON = {"TCARBN": "UMOL/KG", "ALKALI": "UMOL/KG", "PH_TOT": "", "PH_TMP": "DEG C"}


def test_ph_without_its_temperature_is_not_used_and_is_told_once() -> None:
    sample = {
        **without("alkalinity"),
        **laboratory(),
        "ph_temperature": np.nan,
        "fco2": np.nan,
        "pco2": np.nan,
    }
    assert solved([sample])["carbonate_pair"][0] is None
    (finding,) = of(told([sample, sample]), "carbon-temperature")[:1]
    assert finding.severity is Severity.NOTE
    assert finding.count == 2
    assert "PH_TOT has 2 values without the temperature they were measured at" in finding.message
    assert "[carbonate.assumed_temperature]" in finding.message
    chosen = {"assumed_temperature": {"ph_total": 25.0}}
    assert solved([sample], **chosen)["ph_in_situ"][0] == pytest.approx(7.93932, abs=5e-6)
    assert not [f for f in of(told([sample], **chosen), "carbon-temperature") if f.variable == "ph_total"]


@pytest.mark.parametrize("degrees", [-300.0, 77.0, 1e300, -np.inf])
def test_a_temperature_of_measurement_that_is_none_is_told_and_not_used(degrees: float) -> None:
    sample = {
        **without("alkalinity"),
        **laboratory(),
        "ph_temperature": degrees,
        "fco2": np.nan,
        "pco2": np.nan,
    }
    assert solved([sample])["carbonate_pair"][0] is None
    (finding,) = of(told([sample]), "carbon-range")
    assert finding.variable == "ph_temperature"
    assert finding.message.startswith("a_hy1.csv, line 4: PH_TMP is ")


def test_a_ph_that_no_sea_has_is_told_and_not_used() -> None:
    sample = {**DEEP, **laboratory(), "ph_total": 25.0, "ph_seawater": np.nan}
    columns = solved([sample])
    assert columns["carbonate_pair"][0] == "dic+alkalinity"
    assert np.isnan(columns["ph_residual"][0])
    (finding,) = of(told([sample]), "carbon-range")
    assert finding.message == "a_hy1.csv, line 4: PH_TOT is 25; expected 6.5 to 9."


def test_alkalinity_far_below_dic_gives_a_sentence_and_nothing_computed() -> None:
    sample = {**DEEP, "alkalinity": 1500.0}
    columns = solved([sample, DEEP])
    assert np.isnan(columns["carbonate"][0])
    assert columns["carbonate_pair"][0] is None
    assert columns["carbonate_pair"][1] == "dic+alkalinity"
    (finding,) = of(told([sample, DEEP]), "carbon-unsolvable")
    assert finding.message == (
        "a_hy1.csv, line 4: TCARBN and ALKALI do not fit together: 2175 and 1500; expected two values that sea water of"
        " a pH between 6.5 and 9 can have."
    )
    assert finding.line == 4


def test_both_of_a_pair_that_no_sea_water_has_are_doubted() -> None:
    delivered = bottle_file(
        {"TCARBN": "2175", "ALKALI": "1500", "PH_TOT": "-9", "PH_TMP": "-9"}, extra=CARBON
    )
    samples = process_cruise(EXPOCODE, [read(delivered)], Settings()).tables["samples"]
    assert [samples[f"{name}_check"].to_pylist() for name in ("dic", "alkalinity")] == [[3], [3]]


def test_a_third_quantity_that_contradicts_the_pair_is_told_with_its_line() -> None:
    good, off = {**DEEP, **laboratory()}, {**DEEP, **laboratory(0.1)}
    columns = solved([good, off])
    assert columns["ph_residual"] == pytest.approx([0.0, 0.1], abs=1e-8)
    assert columns["fco2_residual"] == pytest.approx([0.0, 0.0], abs=1e-5)
    doubts = [f for f in of(told([good, off]), "carbon-consistency") if f.severity is Severity.DOUBT]
    assert [(f.line, f.variable) for f in doubts] == [(5, "ph_total")]
    assert doubts[0].message == (
        "a_hy1.csv, line 5: PH_TOT disagrees with TCARBN and ALKALI: 7.8234 is 0.1 above what they give, with which"
        " FCO2 agrees; the three disagree by 6 times their combined uncertainty (0.017); expected at most 3 times"
        " (carbonate.consistency of the settings)."
    )
    (note,) = (f for f in of(told([good] * 3), "carbon-consistency") if f.variable == "ph_residual")
    assert note.severity is Severity.NOTE
    assert note.count == 3
    assert not [f for f in told([good]) if f.severity is Severity.DOUBT]


def test_the_limit_of_consistency_is_in_combined_uncertainties() -> None:
    off = {**DEEP, **laboratory(0.1)}
    columns = solved([off])
    ratio = 0.1 / columns["ph_residual_uncertainty"][0]
    for limit, expected in ((0.99 * ratio, 1), (1.01 * ratio, 0)):
        found = of(told([off], consistency=limit), "carbon-consistency")
        assert sum(f.severity is Severity.DOUBT for f in found) == expected


@pytest.mark.parametrize("few", [True, False])
def test_the_summary_of_a_third_quantity_is_of_values_that_samples_have(few: bool) -> None:
    n = 10 if few else 40
    samples = [{**DEEP, **laboratory(0.1 * (i == 0) + 7e-6)} for i in range(n)]
    (note,) = (
        f
        for f in of(told(samples), "carbon-consistency")
        if f.variable == "ph_residual" and f.severity is Severity.NOTE
    )
    span = "they lie within 0.000 to +0.1" if few else "nine of ten lie within 0.000 to 0.000"
    assert (
        f"measured PH_TOT less what the other measured carbon gives, in {n} samples that have both: 0.000 in the"
        in (note.message)
    )
    assert span in note.message


def test_the_summary_names_the_gas_that_was_delivered_and_its_unit() -> None:
    gas = laboratory()
    samples = [{**DEEP, "pco2": gas["pco2"] * 1.4, "pco2_temperature": 20.0}]
    (note,) = (f for f in of(told(samples), "carbon-consistency") if f.severity is Severity.NOTE)
    assert "measured PCO2 less what" in note.message
    assert " uatm in the median" in note.message
    (doubt,) = (f for f in of(told(samples), "carbon-consistency") if f.severity is Severity.DOUBT)
    assert doubt.message.startswith("a_hy1.csv, line 4: PCO2 disagrees with TCARBN and ALKALI by ")
    assert " uatm against " in doubt.message


def test_samples_that_constants_cannot_be_had_for_are_told() -> None:
    found = of(
        told([DEEP, {**DEEP, "practical_salinity": 0.5}, {**DEEP, "temperature": np.nan}]), "carbon-inputs"
    )
    assert [(f.variable, f.count) for f in found] == [("practical_salinity", 1), ("temperature", 1)]
    assert found[0].message == (
        "1 sample with two measured quantities of the carbonate system has a practical salinity for which constants are"
        " not computed; expected 1 to 50; their carbonate system was left out."
    )
    assert "has no temperature that may be used; expected CTDTMP beside them" in found[1].message
    assert not of(told([DEEP]), "carbon-inputs")


@pytest.mark.parametrize("name", ["PH", "PH_NBS", "PH_TOT_INSITU", "pH_free", "PHTS25"])
def test_a_ph_of_unknown_scale_is_told_even_without_another_quantity(name: str) -> None:
    delivered = bottle_file({name: "7.6"}, extra={name: "", "ALKALI": "UMOL/KG"})
    found = of(list(process_cruise(EXPOCODE, [read(delivered)], Settings()).findings), "carbon-unknown-scale")
    assert [f.severity for f in found] == [Severity.NOTE]
    assert f"{name} has the name of a pH" in found[0].message
    assert "expected PH_TOT (total scale) or PH_SWS (seawater scale)" in found[0].message


@pytest.mark.parametrize("name", ["PHAEO", "PHOTOSYNTHESIS", "PH_FLAG_W", "PHYTOPLANKTON", "PHI"])
def test_what_only_begins_like_ph_is_none(name: str) -> None:
    delivered = bottle_file({name: "7.6"}, extra={name: ""})
    assert not of(
        list(process_cruise(EXPOCODE, [read(delivered)], Settings()).findings), "carbon-unknown-scale"
    )


@pytest.mark.parametrize("degrees", [298.0, -5.0, 1e9])
def test_an_assumed_temperature_that_is_none_is_refused(degrees: float, tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_text(f"[carbonate.assumed_temperature]\nph_total = {degrees}\n")
    with pytest.raises(SettingsProblem, match=r"line 2: 'carbonate.assumed_temperature.ph_total' is"):
        read_settings(path, {})


def test_of_constants_that_do_not_reach_the_samples_the_ones_that_do_are_named() -> None:
    (found, _) = of(told([{**DEEP, "practical_salinity": 6.0, "temperature": 10.0}] * 3), "carbon-validity")
    assert found.message.endswith(
        'carbonate.carbonic = "roy_1993" in the settings was measured for all of them.'
    )
    (found, _) = of(told([{**DEEP, "practical_salinity": 4.0, "temperature": 9.5}]), "carbon-validity")[:2]
    assert "no other constants of carbonic acid here were measured for more of them" in found.message


def test_constants_used_where_nobody_measured_them_are_told_once_a_cruise() -> None:
    found = of(told([{**DEEP, "temperature": 1.0}] * 5), "carbon-validity")
    assert {f.count for f in found} == {5}
    assert [("Lueker" in f.message, "Perez" in f.message) for f in found] == [(True, False), (False, True)]
    assert all(f.severity is Severity.NOTE for f in found)
    assert not of(told([{**DEEP, "temperature": 15.0}]), "carbon-validity")
    cold = {"carbonic": "roy_1993", "fluoride": "dickson_riley_1979"}
    assert not of(told([{**DEEP, "temperature": 1.0}], **cold), "carbon-validity")
