"""Carbon anomalies: what leaves them as they are, what they add up to, and what bad input does."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.carbonate_settings import CarbonateSettings
from pipeline.problems import SettingsProblem
from pipeline.process import process_cruise
from pipeline.settings import Settings, TracerSettings, read_settings
from pipeline.tracers.anomalies import (
    alkalinity_per_nitrate,
    anomalies,
    anomaly_forms,
    dilution_findings,
    normalised_friis_2003,
    potential_alkalinity,
)
from pipeline.tracers.stoichiometry import STOICHIOMETRIES, Stoichiometry
from pipeline.variables import ANOMALIES
from tests.invented import EXPOCODE, bottle_file, read

from .carbon_cases import rows

if TYPE_CHECKING:
    from pathlib import Path

quick = settings(deadline=None, derandomize=True, max_examples=50)
SOLUBILITY = 330.0
WATER: dict[str, float] = {
    "practical_salinity": 34.9, "potential_temperature": 2.4, "oxygen": 250.0, "aou": SOLUBILITY - 250.0,
    "phosphate": 1.4, "nitrate": 20.0, "dic": 2175.0, "alkalinity": 2320.0,
}  # fmt: skip
RELATION = {"intercept": 300.0, "per_salinity": 56.0, "per_po": 0.08, "reference": "made up for this test"}
EVERY = pytest.mark.parametrize("ratios", list(STOICHIOMETRIES.values()), ids=lambda r: r.name)
ANYTHING = st.floats(allow_nan=True, allow_infinity=True)


def columns(*samples: dict[str, float], **chosen: Any) -> dict[str, Any]:
    return everything(*samples, **chosen)[0]


def everything(*samples: dict[str, float], **chosen: Any) -> tuple[dict[str, Any], dict[str, Any]]:
    """Return the anomalies and, by the same names, their standard uncertainties."""
    choice = TracerSettings.model_validate({"preformed_alkalinity": RELATION, **chosen})
    found = anomalies(rows(samples), choice, CarbonateSettings())
    names = [name for name in found if not name.endswith("_uncertainty")]
    return {n: found[n] for n in names}, {n: found[f"{n}_uncertainty"] for n in names}


def respired(
    water: dict[str, float], ratios: Stoichiometry, freed: float, per_nitrate: float = 1.0
) -> dict[str, float]:
    taken, nitrate = ratios.oxygen.value * freed, ratios.nitrogen.value * freed
    return {
        **water,
        "oxygen": water["oxygen"] - taken,
        "aou": water["aou"] + taken,
        "phosphate": water["phosphate"] + freed,
        "nitrate": water["nitrate"] + nitrate,
        "dic": water["dic"] + ratios.carbon.value * freed,
        "alkalinity": water["alkalinity"] - per_nitrate * nitrate,
    }


def dissolved(water: dict[str, float], amount: float) -> dict[str, float]:
    return {**water, "dic": water["dic"] + amount, "alkalinity": water["alkalinity"] + 2.0 * amount}


@EVERY
@pytest.mark.parametrize("form", ["brewer_1975", "carter_2014"])
@quick
@given(freed=st.floats(0, 1), amount=st.floats(-20, 60))
def test_respiration_and_dissolution_leave_preformed_carbon_as_it_was(
    ratios: Stoichiometry, form: str, freed: float, amount: float
) -> None:
    per_nitrate = alkalinity_per_nitrate(form)
    later = dissolved(respired(WATER, ratios, freed, per_nitrate), amount)
    before, after = (
        {name: values[i] for name, values in columns(
            WATER, later, stoichiometry=ratios.name.value, potential_alkalinity=form).items()}
        for i in range(2)
    )  # fmt: skip
    assert after["preformed_dic"] == pytest.approx(before["preformed_dic"], abs=1e-9)
    assert after["preformed_alkalinity"] == pytest.approx(before["preformed_alkalinity"], abs=1e-9)
    assert after["dic_calcium_carbonate"] - before["dic_calcium_carbonate"] == pytest.approx(amount, abs=1e-9)
    added = ratios.carbon.value * freed
    assert after["dic_soft_tissue"] - before["dic_soft_tissue"] == pytest.approx(added, abs=1e-9)
    in_alkalinity = 2.0 * amount * 35.0 / 34.9
    change = after["potential_alkalinity"] - before["potential_alkalinity"]
    assert change == pytest.approx(in_alkalinity, abs=1e-9)


@EVERY
@quick
@given(freed=st.floats(0, 1), amount=st.floats(-20, 60))
def test_c_star_does_not_know_respiration_or_dissolution(
    ratios: Stoichiometry, freed: float, amount: float
) -> None:
    found = columns(
        WATER, dissolved(respired(WATER, ratios, freed), amount), stoichiometry=ratios.name.value
    )["c_star"]
    assert found[1] == pytest.approx(found[0], abs=1e-9)


def test_c_star_of_another_set_of_ratios_drifts() -> None:
    other = STOICHIOMETRIES[next(iter(STOICHIOMETRIES))]
    found = columns(WATER, respired(WATER, other, 0.5))["c_star"]
    assert abs(found[1] - found[0]) > 1.0


@quick
@given(st.floats(0, 1))
def test_what_is_linear_mixes(share: float) -> None:
    other = {**WATER, "oxygen": 210.0, "aou": 100.0, "dic": 2250.0, "alkalinity": 2370.0, "phosphate": 2.2}
    mixed = {name: share * WATER[name] + (1 - share) * other[name] for name in WATER}
    found = columns(WATER, other, mixed)
    for name in (
        "c_star",
        "dic_soft_tissue",
        "preformed_alkalinity",
        "dic_calcium_carbonate",
        "preformed_dic",
    ):
        expected = share * found[name][0] + (1 - share) * found[name][1]
        assert found[name][2] == pytest.approx(expected, abs=1e-9)


@quick
@given(rain=st.floats(0, 0.3), river=st.sampled_from([0.0, 300.0, -50.0]))
def test_dilution_with_water_of_the_intercept_changes_nothing(rain: float, river: float) -> None:
    salinity, amount = 34.9 * (1 - rain), 2175.0 * (1 - rain) + river * rain
    found = normalised_friis_2003(np.array([2175.0, amount]), np.array([34.9, salinity]), 35.0, river)
    assert found[1] == pytest.approx(found[0], abs=1e-8)
    plain = normalised_friis_2003(np.array(2175.0), np.array(34.9), 35.0, 0.0)
    assert plain == 2175.0 * (35.0 / 34.9)


def test_rain_leaves_potential_alkalinity_as_it_was() -> None:
    half = potential_alkalinity(np.array(1160.0), np.array(10.0), np.array(17.45), 1.0, 35.0)
    assert half == pytest.approx(columns(WATER)["potential_alkalinity"][0], rel=1e-14)


def test_the_settings_say_what_dilutes_and_to_which_salinity() -> None:
    found = columns(WATER, dic_without_salt=300.0, alkalinity_without_salt=400.0, reference_salinity=34.0)
    assert found["dic_normalised"][0] == pytest.approx(1875.0 * 34.0 / 34.9 + 300.0)
    assert found["alkalinity_normalised"][0] == pytest.approx(1920.0 * 34.0 / 34.9 + 400.0)
    assert found["potential_alkalinity"][0] == pytest.approx(2340.0 * 34.0 / 34.9)


def test_parts_of_dic_add_up() -> None:
    found = columns(WATER)
    whole = found["preformed_dic"] + found["dic_soft_tissue"] + found["dic_calcium_carbonate"]
    assert whole[0] == pytest.approx(2175.0, abs=1e-9)
    preformed = 300.0 + 56.0 * 34.9 + 0.08 * (250.0 + 170.0 * 1.4)
    assert found["preformed_alkalinity"][0] == pytest.approx(preformed)
    assert found["dic_calcium_carbonate"][0] == pytest.approx(0.5 * (2320.0 - preformed + 80.0 * 16 / 170))


def test_without_a_relation_there_is_no_preformed_alkalinity_and_nothing_made_of_it() -> None:
    found = columns(WATER, preformed_alkalinity=None)
    without = {name for name, values in found.items() if np.isnan(values).all()}
    assert without == {"preformed_alkalinity", "dic_calcium_carbonate", "preformed_dic"}
    told = anomaly_forms(TracerSettings(), CarbonateSettings())
    assert told["preformed_dic"]["form"].endswith("preformed alkalinity no relation in the settings")
    with_one = TracerSettings.model_validate({"preformed_alkalinity": RELATION})
    forms = anomaly_forms(with_one, CarbonateSettings())
    assert "300 +56 S +0 theta +0.08 PO: made up" in forms["preformed_dic"]["form"]


def test_a_constant_is_a_relation() -> None:
    constant = {"intercept": 2300.0, "reference": "a constant"}
    found = columns(
        {**WATER, "potential_temperature": np.nan, "phosphate": np.nan}, preformed_alkalinity=constant
    )
    assert found["preformed_alkalinity"][0] == 2300.0
    absurd = {"intercept": 1e300, "per_salinity": 1e300, "reference": "rubbish"}
    assert np.isnan(columns(WATER, preformed_alkalinity=absurd)["preformed_dic"][0])


@pytest.mark.parametrize(
    ("missing", "lost"),
    [
        ("dic", {"dic_normalised", "c_star", "dic_soft_tissue", "preformed_dic"}),
        ("alkalinity", {"alkalinity_normalised", "potential_alkalinity", "c_star", "preformed_alkalinity",
                        "dic_calcium_carbonate", "preformed_dic"}),
        ("nitrate", {"potential_alkalinity"}),
        ("aou", {"dic_soft_tissue", "dic_calcium_carbonate", "preformed_dic"}),
        ("oxygen", {"c_star", "preformed_alkalinity", "dic_calcium_carbonate", "preformed_dic"}),
        ("potential_temperature", set()),
    ],
)  # fmt: skip
def test_a_missing_value_takes_with_it_what_is_made_of_it_and_nothing_else(
    missing: str, lost: set[str]
) -> None:
    for gap in (np.nan, np.inf, 1e300):
        found = columns(WATER, {**WATER, missing: gap})
        assert {name for name, values in found.items() if np.isnan(values[1])} == lost
        assert not any(np.isnan(values[0]) for values in found.values())


@pytest.mark.parametrize("form", ["brewer_1975", "carter_2014"])
def test_uncertainties_are_what_moving_every_input_by_its_own_makes(form: str) -> None:
    """Each measurement and each ratio up and down by its uncertainty: the squares of what changes, added."""
    ratios = STOICHIOMETRIES[next(name for name in STOICHIOMETRIES if name == "anderson_sarmiento_1994")]
    chosen = {"potential_alkalinity": form, "preformed_alkalinity": {**RELATION, "uncertainty": 5.0}}
    values, uncertainty = everything(WATER, **chosen)
    sizes = {"dic": 4.0, "alkalinity": 4.0, "oxygen": 2.5, "nitrate": 0.4, "phosphate": 0.028}
    squares = dict.fromkeys(values, 0.0)
    for name, size in sizes.items():
        up, down = (
            columns(
                {**WATER, name: WATER[name] + sign * size}
                | ({"aou": WATER["aou"] - sign * size} if name == "oxygen" else {}),
                **chosen,
            )
            for sign in (1, -1)
        )
        for column in squares:
            squares[column] += float((0.5 * (up[column][0] - down[column][0])) ** 2)
    for column in ("preformed_alkalinity", "dic_calcium_carbonate", "preformed_dic"):
        squares[column] += (5.0 if column == "preformed_alkalinity" else 2.5) ** 2
    carbon, per_nitrate = 117.0 / 170.0, alkalinity_per_nitrate(form)
    back, aou = 0.5 * per_nitrate * ratios.nitrogen_per_oxygen, WATER["aou"]
    squares["dic_soft_tissue"] += (carbon * aou * np.hypot(14 / 117, 10 / 170)) ** 2
    squares["dic_calcium_carbonate"] += (back * aou * np.hypot(1 / 16, 10 / 170)) ** 2
    squares["preformed_dic"] += (aou * carbon * 14 / 117) ** 2 + (aou * back / 16) ** 2
    squares["preformed_dic"] += (aou * (carbon + back) * 10 / 170) ** 2
    for column, square in squares.items():
        assert uncertainty[column][0] == pytest.approx(np.sqrt(square), rel=1e-6), column


def test_the_uncertainties_of_carbon_are_those_of_the_settings() -> None:
    sharp = anomalies(rows([WATER]), TracerSettings(), CarbonateSettings(uncertainty={"dic": 1.0}))
    assert sharp["dic_normalised_uncertainty"][0] == pytest.approx(35.0 / 34.9)
    assert (
        "dic 1 umol/kg"
        in anomaly_forms(TracerSettings(), CarbonateSettings(uncertainty={"dic": 1.0}))["c_star_uncertainty"][
            "uncertainty"
        ]
    )


def test_brackish_water_is_not_normalised_to_what_no_sea_has_and_that_is_told() -> None:
    brackish = {**WATER, "practical_salinity": 5.0, "dic": 1450.0, "alkalinity": 1500.0}
    found = columns(brackish, {**brackish, "practical_salinity": 12.0}, WATER)
    assert np.isnan(found["dic_normalised"][0])
    assert np.isnan(found["potential_alkalinity"][0])
    assert found["dic_normalised"][1] == pytest.approx(1450.0 * 35.0 / 12.0)
    (told,) = dilution_findings(rows([brackish, WATER]), TracerSettings())
    assert told.count == 1
    assert told.message.startswith("1 samples with TCARBN or ALKALI have a salinity below 17.5")
    assert not list(dilution_findings(rows([WATER]), TracerSettings()))


@pytest.mark.parametrize(
    "written", ["5.0", "{intercept = 5.0}", '{intercept = 5.0, slope = 2.0, reference = "x"}', '"brewer"']
)
def test_a_relation_that_is_none_is_refused_with_the_keys_it_has(written: str, tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_text(f"[tracers]\npreformed_alkalinity = {written}\n")
    with pytest.raises(SettingsProblem) as refused:
        read_settings(path, {})
    said = str(refused.value)
    assert "line 2: 'tracers.preformed_alkalinity' is" in said
    assert (
        "expected a table: intercept and reference, and per_salinity, per_potential_temperature, per_po"
        in said
    )
    assert "PreformedAlkalinity" not in said


def test_fresh_water_is_not_normalised() -> None:
    found = columns({**WATER, "practical_salinity": 0.02})
    assert np.isnan(
        [found[n][0] for n in ("dic_normalised", "alkalinity_normalised", "potential_alkalinity")]
    ).all()


@quick
@given(st.lists(st.fixed_dictionaries(dict.fromkeys(WATER, ANYTHING)), min_size=1, max_size=5))
def test_no_row_of_rubbish_raises_or_warns(samples: list[dict[str, float]]) -> None:
    assert not any(np.isinf(values).any() for values in columns(*samples).values())


def test_a_cruise_that_measured_carbon_has_the_columns_and_another_has_none() -> None:
    names = {v.name for v in ANOMALIES}
    bare = process_cruise(EXPOCODE, [read(bottle_file())], Settings()).tables["samples"]
    assert not names & set(bare.column_names)
    extra = {"TCARBN": "UMOL/KG", "ALKALI": "UMOL/KG"}
    delivered = bottle_file({"TCARBN": "2175.0", "ALKALI": "2320.0"}, extra=extra)
    samples = process_cruise(EXPOCODE, [read(delivered)], Settings()).tables["samples"]
    assert names <= set(samples.column_names)
    assert samples.column("c_star").null_count == 0
    assert samples.column("preformed_dic").null_count == 1
    form = samples.schema.field("c_star").metadata[b"form"].decode()
    assert (
        form
        == "DIC + 117/170 O2 - 1/2 (TA - 16/170 O2); ratios anderson_sarmiento_1994, P:N:C:-O2 1:16:117:170"
    )
    held = samples.schema.field("c_star_uncertainty").metadata[b"uncertainty"].decode()
    assert held == "dic 4 umol/kg, alkalinity 4 umol/kg, oxygen 1 %; ratios exact, as C* is defined by them"
    assert samples.column("c_star_uncertainty").null_count == 0
