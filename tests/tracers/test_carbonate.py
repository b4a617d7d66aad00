"""The carbonate system of tables: which values are used, what is told, and what bad input does."""

from __future__ import annotations

import io
import subprocess
import sys
from contextlib import redirect_stdout
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.carbonate_settings import CarbonateSettings
from pipeline.findings import Severity
from pipeline.process import process_cruise
from pipeline.settings import Settings
from pipeline.tracers.carbonate import system
from pipeline.tracers.samples import sample_tracers
from pipeline.variables import CARBONATE, EXTREMES, HORIZONS
from tests.invented import EXPOCODE, bottle_file, read

from .carbon_cases import DEEP, laboratory, ocean, of, rows, solved, told, without

quick = settings(deadline=None, derandomize=True, max_examples=50)
CHOICE = CarbonateSettings()
CARBON = {"TCARBN": "UMOL/KG", "ALKALI": "UMOL/KG", "PH_TOT": "", "PH_TMP": "DEG C"}


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


def test_dic_in_another_unit_is_doubted_by_the_checks_and_not_computed_with() -> None:
    delivered = bottle_file(
        {"TCARBN": "0.002175", "ALKALI": "2320.0", "PH_TOT": "7.6", "PH_TMP": "25"}, extra=CARBON
    )
    made = process_cruise(EXPOCODE, [read(delivered)], Settings())
    assert any(f.variable == "dic" and f.severity is not Severity.NOTE for f in made.findings)
    assert made.tables["samples"]["carbonate_pair"].to_pylist() == ["alkalinity+ph_total"]


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


def test_missing_nutrients_are_taken_as_none_and_recorded() -> None:
    bare = without("silicate", "phosphate")
    columns = solved([DEEP, without("silicate"), without("phosphate"), bare])
    assert list(columns["carbonate_nutrients"]) == ["silicate+phosphate", "phosphate", "silicate", "none"]
    assert (np.diff(columns["ph_in_situ"][[0, 1, 3]]) > 0).all()
    found = of(told([DEEP, bare]), "carbon-nutrients")
    assert [(f.variable, f.count) for f in found] == [("silicate", 1), ("phosphate", 1)]
    assert not of(told([DEEP]), "carbon-nutrients")


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
