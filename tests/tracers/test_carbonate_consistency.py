"""Which of three quantities is blamed where they contradict each other, by what stands above and below."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pytest

from pipeline.carbonate_settings import CarbonateSettings
from pipeline.findings import Severity
from pipeline.settings import Settings
from pipeline.tables import with_columns
from pipeline.tracers.carbonate import system
from pipeline.tracers.carbonate_consistency import UNDECIDED, disagreements
from pipeline.tracers.carbonate_pairs import QUANTITIES, state
from pipeline.tracers.equilibria import equilibria
from pipeline.tracers.samples import sample_tracers
from pipeline.usable import Rows

from .carbon_cases import rows

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pipeline.findings import Finding

CHOICE = CarbonateSettings()
PRESSURES = (10.0, 150.0, 300.0, 500.0, 700.0, 1000.0, 1400.0, 1900.0, 2500.0, 3200.0)
AT = 5  # the sample that is spoiled: 1000 dbar
MEASURED = ("dic", "alkalinity", "ph_total", "fco2")


def cast(
    *spoiled: tuple[int, str, float], noise: float = 0.0, seed: int = 0, gas: bool = False
) -> list[dict[str, Any]]:
    """Return a cast of an invented ocean whose pH (25 degC) and gas (20 degC) agree with its DIC and alkalinity."""
    p = np.array(PRESSURES)
    salinity = 34.6 + 0.9 * np.exp(-p / 250.0) - 0.3 * np.exp(-(((p - 900.0) / 350.0) ** 2))
    water = {
        "practical_salinity": salinity,
        "temperature": 1.8 + 17.0 * np.exp(-p / 420.0),
        "pressure": p,
        "depth": 0.985 * p,
        "dic": 2030.0 + 230.0 * (1.0 - np.exp(-p / 500.0)),
        "alkalinity": 2290.0 * salinity / 35.0 + 0.03 * p,
        "silicate": 1.0 + 100.0 * (1.0 - np.exp(-p / 900.0)),
        "phosphate": 0.2 + 2.2 * (1.0 - np.exp(-p / 500.0)),
    }
    nutrients = {name: water[name] for name in ("silicate", "phosphate")}
    warm, mild = (
        equilibria(salinity, np.full(len(p), degrees), np.zeros(len(p)), CHOICE, **nutrients)
        for degrees in (25.0, 20.0)
    )
    chance = np.random.default_rng(seed)
    water["ph_total"] = state(water["dic"], water["alkalinity"], warm).ph
    water["ph_temperature"] = np.full(len(p), 25.0)
    if gas:
        water["fco2"] = state(water["dic"], water["alkalinity"], mild).fco2
        water["fco2_temperature"] = np.full(len(p), 20.0)
    for name, size in (("dic", 2.0), ("alkalinity", 2.0), ("ph_total", 0.003)):
        water[name] = water[name] + noise * size * chance.standard_normal(len(p))
    samples = [{name: float(values[i]) for name, values in water.items()} for i in range(len(p))]
    for i, name, by in spoiled:
        samples[i][name] += by
    return samples


def blamed(samples: list[dict[str, Any]]) -> dict[int, str | None]:
    """Return by row what was found at fault, None where nothing was."""
    data = rows(samples)
    found = disagreements(data, system(data, CHOICE), CHOICE)
    return {
        int(row): None if fault == UNDECIDED else QUANTITIES[fault]
        for one in found
        for row, fault in zip(one.rows, one.fault, strict=True)
    }


def checked(samples: list[dict[str, Any]]) -> tuple[Mapping[str, Any], list[Finding]]:
    """Return the columns of samples that passed the checks as good, and the doubts of consistency."""
    table = rows(samples).table
    good = {
        f"{name}_check": pa.array(np.ones(len(samples), dtype=np.int64))
        for name in MEASURED
        if name in table.column_names
    }
    made = sample_tracers(Rows(with_columns(table, good), Settings().use), Settings())
    doubts = [f for f in made.findings if f.check == "carbon-consistency" and f.severity is Severity.DOUBT]
    return made.columns, doubts


@pytest.mark.parametrize("sign", [1.0, -1.0])
@pytest.mark.parametrize(("name", "by"), [("dic", 60.0), ("alkalinity", 65.0), ("ph_total", 0.15)])
def test_the_one_that_is_unlike_its_neighbours_is_at_fault(name: str, by: float, sign: float) -> None:
    found = blamed(cast((AT, name, sign * by)))
    assert found == {AT: "ph" if name == "ph_total" else name}


def test_an_honest_cast_has_no_disagreement() -> None:
    assert blamed(cast(noise=1.0, gas=True)) == {}


def test_what_is_at_fault_is_doubted_and_nothing_else_and_the_sample_is_solved_from_the_other_two() -> None:
    columns, (doubt,) = checked(cast((AT, "dic", 60.0)))
    expected, _ = checked(cast())
    for name in ("dic", "alkalinity", "ph_total"):
        assert list(np.flatnonzero(columns.get(f"{name}_check", np.ones(10)) == 3)) == [AT] * (name == "dic")
    assert columns["carbonate_pair"][AT] == "alkalinity+ph_total"
    assert columns["carbonate_pair"][AT - 1] == "dic+alkalinity"
    assert columns["carbonate"][AT] == pytest.approx(expected["carbonate"][AT], abs=1e-3)
    assert columns["dic_computed"][AT] == pytest.approx(cast()[AT]["dic"], abs=1e-3)
    assert np.isnan(columns["dic_normalised"][AT])
    assert np.isnan(columns["ph_residual"][AT])
    assert doubt.variable == "dic"
    assert doubt.message.startswith(f"a_hy1.csv, line {AT + 4}: TCARBN disagrees with ALKALI and PH_TOT: 22")
    assert (
        " is 60 umol/kg above what they give, and off the line between the samples above and below it, on which ALKALI"
        " and PH_TOT lie; the three disagree by "
    ) in doubt.message
    assert doubt.message.endswith("; expected at most 3 times (carbonate.consistency of the settings).")


def test_a_ph_at_fault_leaves_the_carbonate_system_and_its_residual() -> None:
    columns, (doubt,) = checked(cast((AT, "ph_total", 0.15)))
    assert columns["ph_residual"][AT] == pytest.approx(0.15)
    assert columns["carbonate_pair"][AT] == "dic+alkalinity"
    assert list(np.flatnonzero(columns["ph_total_check"] == 3)) == [AT]
    assert "PH_TOT disagrees with TCARBN and ALKALI: " in doubt.message
    assert " is 0.15 above what they give, and off the line " in doubt.message


def test_where_nothing_tells_the_third_is_doubted_and_the_words_say_that_nothing_does() -> None:
    samples = [one for one in cast() for _ in (0,)]
    for sample in samples:
        sample["ph_total"] += 0.08
    columns, (doubt,) = checked(samples)
    assert (columns["ph_total_check"] == 3).all()
    assert set(columns["carbonate_pair"]) == {"dic+alkalinity"}
    assert doubt.count == 10
    assert "PH_TOT disagrees with TCARBN and ALKALI by up to " in doubt.message
    assert doubt.message.endswith(
        "which of the three is at fault, the samples beside do not tell: look at all of them."
    )


@pytest.mark.parametrize("which", [0, len(PRESSURES) - 1])
def test_at_the_end_of_a_cast_nothing_is_blamed(which: int) -> None:
    _, (doubt,) = checked(cast((which, "dic", 60.0)))
    assert doubt.variable == "ph_total"
    assert "which of the three is at fault, the samples beside do not tell" in doubt.message


def test_ph_measured_at_another_temperature_is_not_held_against_its_neighbours() -> None:
    samples = cast((AT, "ph_total", 0.15))
    samples[AT]["ph_temperature"] = 20.0
    assert blamed(samples) == {AT: None}


def test_where_a_fourth_agrees_with_the_pair_the_third_is_at_fault() -> None:
    samples = cast(gas=True)
    for sample in samples:
        sample["fco2"] *= 1.4
    columns, doubts = checked(samples)
    assert {doubt.variable for doubt in doubts} == {"fco2"}
    assert all(", with which PH_TOT agrees; the three disagree by " in doubt.message for doubt in doubts)
    assert "ph_total_check" not in columns
    assert (columns["fco2_check"] == 3).all()


def test_a_dic_that_both_ph_and_gas_contradict_is_told_once() -> None:
    columns, doubts = checked(cast((AT, "dic", 60.0), gas=True))
    assert [(doubt.variable, doubt.line) for doubt in doubts] == [("dic", AT + 4)]
    assert list(np.flatnonzero(columns["dic_check"] == 3)) == [AT]
    assert columns["carbonate_pair"][AT] == "alkalinity+ph_total"


def test_neighbours_that_disagree_themselves_are_no_witnesses() -> None:
    assert blamed(cast((AT, "dic", 60.0), (AT + 1, "dic", 70.0))) == {AT: "dic", AT + 1: "dic"}


def test_hardly_ever_is_the_wrong_one_blamed() -> None:
    """A hundred noisy casts, each with an error in one of the three, from the smallest that is noticed on."""
    chance = np.random.default_rng(7)
    right = wrong = 0
    for seed in range(100):
        name, size = [("dic", 25.0), ("alkalinity", 28.0), ("ph_total", 0.06)][seed % 3]
        by = chance.choice([-1.0, 1.0]) * chance.uniform(1.5, 4.0) * size
        for fault in blamed(cast((int(chance.integers(2, 9)), name, by), noise=1.0, seed=seed)).values():
            right += fault == name.removesuffix("_total")
            wrong += fault not in {name.removesuffix("_total"), None}
    assert right > 60
    assert wrong <= 2
