"""The carbonate system of tables: which values are used, what is told, and what bad input does."""

from __future__ import annotations

import io
import subprocess
import sys
from contextlib import redirect_stdout
from functools import cache
from typing import TYPE_CHECKING, Any

import numpy as np
import PyCO2SYS
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.carbonate_settings import CarbonateSettings
from pipeline.findings import Severity
from pipeline.process import process_cruise
from pipeline.problems import SettingsProblem
from pipeline.settings import Settings, read_settings
from pipeline.tracers.carbonate import system
from pipeline.checking.marks import findings_of
from pipeline.tracers.carbonate_consistency import disagreements
from pipeline.tracers.carbonate_findings import carbonate_findings
from pipeline.tracers.carbonate_marks import input_marks, system_marks
from pipeline.tracers.samples import sample_tracers
from pipeline.variables import CARBONATE, EXTREMES, HORIZONS
from tests.invented import EXPOCODE, bottle_file, read

from .carbon_cases import DEEP, ocean, rows

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

    from pipeline.findings import Finding

quick = settings(deadline=None, derandomize=True, max_examples=50)
CHOICE = CarbonateSettings()
CARBON = {"TCARBN": "UMOL/KG", "ALKALI": "UMOL/KG", "PH_TOT": "", "PH_TMP": "DEG C"}


def solved(samples: list[dict[str, Any]], **chosen: Any) -> Mapping[str, Any]:
    return system(rows(samples), CarbonateSettings.model_validate(chosen)).columns


def told(samples: list[dict[str, Any]], **chosen: Any) -> list[Finding]:
    choice = CarbonateSettings.model_validate(chosen)
    data = rows(samples)
    found = system(data, choice)
    marks = (
        *input_marks(data, choice),
        *system_marks(data, found, disagreements(data, found, choice), choice),
    )
    return [*findings_of(data, marks), *carbonate_findings(data, found, choice)]


def of(findings: list[Finding], check: str) -> list[Finding]:
    return [finding for finding in findings if finding.check == check]


@cache
def _laboratory() -> dict[str, float]:
    def at(temperature: float) -> dict[str, float]:
        return PyCO2SYS.sys(  # type: ignore[no-any-return]
            DEEP["dic"], DEEP["alkalinity"], 2, 1, salinity=DEEP["practical_salinity"], temperature=temperature,
            pressure=0.0, total_silicate=DEEP["silicate"], total_phosphate=DEEP["phosphate"], opt_k_carbonic=10,
            opt_k_bisulfate=1, opt_k_fluoride=2, opt_total_borate=2, opt_pH_scale=1, opt_gas_constant=3,
        )  # fmt: skip

    warm, mild = at(25.0), at(20.0)
    return {
        "ph_total": warm["pH_total"], "ph_seawater": warm["pH_sws"], "ph_temperature": 25.0,
        "fco2": mild["fCO2"], "fco2_temperature": 20.0, "pco2": mild["pCO2"], "pco2_temperature": 20.0,
    }  # fmt: skip


def laboratory(ph_shift: float = 0.0) -> dict[str, float]:
    """Return pH at 25 degC and the gas at 20 degC of the deep water, by PyCO2SYS's own solver."""
    shifts = {"ph_total": ph_shift, "ph_seawater": ph_shift}
    return {name: value + shifts.get(name, 0.0) for name, value in _laboratory().items()}


def without(*names: str) -> dict[str, float]:
    return {name: value for name, value in DEEP.items() if name not in names}


def test_a_cruise_without_carbon_has_no_carbon_columns_and_loads_no_library() -> None:
    code = (
        "import sys\nfrom tests.invented import read, bottle_file, EXPOCODE\n"
        "from pipeline.process import process_cruise\nfrom pipeline.settings import Settings\n"
        "made = process_cruise(EXPOCODE, [read(bottle_file())], Settings())\n"
        "names = made.tables['samples'].column_names\n"
        "assert 'carbonate_pair' not in names and 'oxygen_minimum' in names, names\n"
        "assert not {'PyCO2SYS', 'autograd', 'matplotlib'} & set(sys.modules)\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True)


def test_a_cruise_with_carbon_has_every_column_and_a_cast_has_none() -> None:
    delivered = bottle_file(
        {"TCARBN": "2175.0", "ALKALI": "2320.0", "PH_TOT": "7.6", "PH_TMP": "25.0"}, extra=CARBON
    )
    made = process_cruise(EXPOCODE, [read(delivered)], Settings())
    samples = made.tables["samples"]
    wanted = {v.name for v in (*CARBONATE, *HORIZONS, *EXTREMES)}
    assert wanted <= set(samples.column_names)
    assert not wanted & set(made.tables["casts"].column_names)
    assert samples["carbonate_pair"].to_pylist() == ["dic+alkalinity"]
    metadata = samples.schema.field("carbonate").metadata
    assert metadata[b"form"].startswith(b"constants lueker_2000, boron lee_2010")
    assert samples.schema.field("carbonate_uncertainty").metadata[b"uncertainty"].decode() == (
        "measurements, one standard uncertainty each: dic 4 umol/kg, alkalinity 4 umol/kg, ph_total 0.01; without the"
        " constants, which all samples share"
    )
    assert samples.schema.field("carbonate_pair").metadata[b"form"].decode() == (
        "the first that may be used of dic+alkalinity, dic+ph, alkalinity+ph, dic+fco2, alkalinity+fco2, ph+fco2"
    )
    assert any(f.check == "carbon-consistency" for f in made.findings)
    assert [samples[f"{name}_check"].to_pylist() for name in ("ph_total", "dic", "alkalinity")] == [
        [3],
        [1],
        [1],
    ]


def test_a_sample_with_one_quantity_has_no_carbonate_system() -> None:
    columns = solved([DEEP, without("alkalinity"), without("temperature"), {**DEEP, "pressure": np.nan}])
    assert list(columns["carbonate_pair"]) == ["dic+alkalinity", None, None, None]
    for name, values in columns.items():
        if name not in {"carbonate_pair", "carbonate_nutrients"}:
            assert np.isnan(values[1:]).all()


@pytest.mark.parametrize(
    ("names", "pair"),
    [
        (("ph_total", "ph_temperature", "fco2", "fco2_temperature"), "dic+alkalinity"),
        (("ph_total", "ph_temperature"), "dic+ph_total"),
        (("ph_seawater", "ph_temperature"), "dic+ph_seawater"),
        (("fco2", "fco2_temperature"), "dic+fco2"),
        (("pco2", "pco2_temperature"), "dic+pco2"),
    ],
)
def test_a_pair_is_named_by_its_columns_and_all_give_one_state(names: tuple[str, ...], pair: str) -> None:
    beside = {name: value for name, value in laboratory().items() if name in names}
    base = DEEP if pair == "dic+alkalinity" else without("alkalinity")
    columns = solved([{**base, **beside}])
    assert columns["carbonate_pair"][0] == pair
    assert columns["ph_in_situ"][0] == pytest.approx(7.93932, abs=5e-6)
    assert columns["carbonate"][0] == pytest.approx(100.58172, abs=2e-3)
    assert columns["carbonate_uncertainty"][0] > 1.0


def test_ph_at_25_degrees_is_no_ph_in_situ() -> None:
    columns = solved([{**without("alkalinity"), **laboratory()}])
    assert columns["ph_in_situ"][0] - laboratory()["ph_total"] > 0.2


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


def test_dic_in_another_unit_is_doubted_by_the_checks_and_not_computed_with() -> None:
    delivered = bottle_file(
        {"TCARBN": "0.002175", "ALKALI": "2320.0", "PH_TOT": "7.6", "PH_TMP": "25"}, extra=CARBON
    )
    made = process_cruise(EXPOCODE, [read(delivered)], Settings())
    assert any(f.variable == "dic" and f.severity is not Severity.NOTE for f in made.findings)
    assert made.tables["samples"]["carbonate_pair"].to_pylist() == ["alkalinity+ph_total"]


def test_a_third_quantity_that_contradicts_the_pair_is_told_with_its_line() -> None:
    good, off = {**DEEP, **laboratory()}, {**DEEP, **laboratory(0.1)}
    columns = solved([good, off])
    assert columns["ph_residual"] == pytest.approx([0.0, 0.1], abs=1e-8)
    assert columns["fco2_residual"] == pytest.approx([0.0, 0.0], abs=1e-5)
    doubts = [f for f in of(told([good, off]), "carbon-consistency") if f.severity is Severity.DOUBT]
    assert [(f.line, f.variable) for f in doubts] == [(5, "ph_total")]
    assert doubts[0].message == (
        "a_hy1.csv, line 5: PH_TOT disagrees with TCARBN and ALKALI: 7.8234 is 0.1 above what they give, with which FCO2"
        " agrees; the three disagree by 6 times their combined uncertainty (0.017); expected at most 3 times"
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


def test_dic_and_alkalinity_are_given_where_the_pair_does_not_hold_them() -> None:
    measured = laboratory()
    samples = [DEEP, {**without("alkalinity"), **measured}, {**without("dic"), **measured}]
    found = solved([*samples, {**without("dic", "alkalinity"), **measured}])
    assert found["alkalinity_computed"] == pytest.approx(
        [np.nan, 2320.0, np.nan, 2320.0], abs=1.0, nan_ok=True
    )
    assert found["dic_computed"] == pytest.approx([np.nan, np.nan, 2175.0, 2175.0], abs=1.0, nan_ok=True)
    assert found["alkalinity_computed"][1] == pytest.approx(2320.0, abs=2e-3)
    assert found["dic_computed"][2] == pytest.approx(2175.0, abs=2e-3)
    known = ~np.isnan(found["dic_computed"])
    assert (found["dic_computed_uncertainty"][known] > 2.0).all()
    whole = solved(samples, constants_uncertainty="orr_2018")
    assert whole["dic_computed_uncertainty"][2] > found["dic_computed_uncertainty"][2]


def test_the_uncertainty_of_computed_dic_is_what_moving_the_measurements_makes() -> None:
    sample = {**without("dic"), **laboratory()}
    at = solved([sample])["dic_computed_uncertainty"][0]
    squares = 0.0
    for name, size in (("alkalinity", 4.0), ("ph_total", 0.01)):
        up, down = (
            solved([{**sample, name: sample[name] + sign * size}])["dic_computed"][0] for sign in (1, -1)
        )
        squares += (0.5 * (up - down)) ** 2
    assert at == pytest.approx(np.sqrt(squares), rel=1e-3)


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


def test_missing_nutrients_are_taken_as_none_and_recorded() -> None:
    bare = without("silicate", "phosphate")
    columns = solved([DEEP, without("silicate"), without("phosphate"), bare])
    assert list(columns["carbonate_nutrients"]) == ["silicate+phosphate", "phosphate", "silicate", "none"]
    assert (np.diff(columns["ph_in_situ"][[0, 1, 3]]) > 0).all()
    found = of(told([DEEP, bare]), "carbon-nutrients")
    assert [(f.variable, f.count) for f in found] == [("silicate", 1), ("phosphate", 1)]
    assert not of(told([DEEP]), "carbon-nutrients")


def test_constants_used_where_nobody_measured_them_are_told_once_a_cruise() -> None:
    found = of(told([{**DEEP, "temperature": 1.0}] * 5), "carbon-validity")
    assert {f.count for f in found} == {5}
    assert [("Lueker" in f.message, "Perez" in f.message) for f in found] == [(True, False), (False, True)]
    assert all(f.severity is Severity.NOTE for f in found)
    assert not of(told([{**DEEP, "temperature": 15.0}]), "carbon-validity")
    cold = {"carbonic": "roy_1993", "fluoride": "dickson_riley_1979"}
    assert not of(told([{**DEEP, "temperature": 1.0}], **cold), "carbon-validity")


def test_uncertainties_follow_the_settings() -> None:
    usual, sharp = solved([DEEP]), solved([DEEP], uncertainty={"dic": 2.0, "alkalinity": 2.0})
    whole = solved([DEEP], constants_uncertainty="orr_2018")
    for name in ("ph_in_situ", "carbonate", "aragonite_saturation", "revelle_factor"):
        assert sharp[f"{name}_uncertainty"] == pytest.approx(usual[f"{name}_uncertainty"] / 2, rel=1e-12)
        assert whole[f"{name}_uncertainty"][0] > usual[f"{name}_uncertainty"][0]
        assert whole[name] == usual[name]


def test_other_inputs_are_so_certain_that_their_uncertainty_is_left_out() -> None:
    """Salinity, temperature, pressure and phosphate, moved by theirs, move little beside DIC and alkalinity."""
    base = solved([DEEP])
    for name, size in (
        ("practical_salinity", 0.002),
        ("temperature", 0.002),
        ("pressure", 3.0),
        ("phosphate", 0.03),
    ):
        moved = solved([{**DEEP, name: DEEP[name] + size}])
        for quantity in ("carbonate", "ph_in_situ"):
            assert abs(moved[quantity][0] - base[quantity][0]) < 0.015 * base[f"{quantity}_uncertainty"][0]


@pytest.mark.parametrize("chunk", [1, 7, 64])
def test_neither_chunks_nor_order_change_a_bit(chunk: int) -> None:
    water = ocean(50, seed=3)
    random = np.random.default_rng(1)
    samples: list[dict[str, Any]] = []
    for i in range(50):
        sample = {
            "practical_salinity": water["salinity"][i],
            **{name: water[name][i] for name in ("temperature", "pressure", "silicate", "phosphate", "dic")},
            "alkalinity": water["alkalinity"][i],
            **laboratory(random.normal(0.0, 0.02)),
        }
        dropped = random.choice(["dic", "alkalinity", "ph_total", "fco2", "silicate"], random.integers(0, 3))
        samples.append({name: value for name, value in sample.items() if name not in dropped})
    whole = system(rows(samples), CHOICE).columns
    order = random.permutation(50)
    shuffled = system(rows([samples[i] for i in order]), CHOICE, chunk).columns
    parted = system(rows(samples), CHOICE, chunk).columns
    assert len(set(whole["carbonate_pair"])) > 4
    for name, values in whole.items():
        np.testing.assert_array_equal(parted[name], values, err_msg=name)
        np.testing.assert_array_equal(shuffled[name], values[order], err_msg=name)


ANYTHING = st.one_of(
    st.floats(allow_nan=True, allow_infinity=True), st.sampled_from([0.0, -5.0, 1e-3, 2e3, 8.0, 25.0])
)
COLUMNS = (
    "practical_salinity", "temperature", "pressure", "depth", "dic", "alkalinity", "ph_total", "ph_seawater",
    "ph_temperature", "pco2", "pco2_temperature", "fco2", "fco2_temperature", "silicate", "phosphate", "oxygen",
    "delta_carbon_13",
)  # fmt: skip


@quick
@given(st.lists(st.dictionaries(st.sampled_from(COLUMNS), ANYTHING), min_size=1, max_size=5))
def test_rubbish_neither_raises_nor_warns_nor_prints_nor_is_computed_with(
    broken: list[dict[str, float]],
) -> None:
    printed = io.StringIO()
    with redirect_stdout(printed):
        found = sample_tracers(rows([{**DEEP, **laboratory(), **sample} for sample in broken]), Settings())
    assert not printed.getvalue()
    for name, values in found.columns.items():
        if values.dtype == object:
            continue
        assert not np.isinf(values).any(), name
        if name.endswith("fraction"):
            assert np.all(np.isnan(values) | ((values > 0) & (values < 1)))
        if name.startswith("ph_in_situ") and not name.endswith("uncertainty"):
            assert np.all(np.isnan(values) | ((values > 6.5) & (values < 9.0)))
    assert all(finding.message.endswith(".") for finding in found.findings)
