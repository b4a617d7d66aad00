from __future__ import annotations

import dataclasses
from typing import TYPE_CHECKING

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline import tracers
from pipeline.problems import SettingsProblem
from pipeline.settings import TracerSettings
from pipeline.tracers import nutrients
from pipeline.tracers.oxygen import SolubilityName
from pipeline.tracers.stoichiometry import STOICHIOMETRIES, Stoichiometry
from pipeline.variables import TRACERS

if TYPE_CHECKING:
    from pipeline.tables import FloatArray

quick = settings(deadline=None, derandomize=True, max_examples=60)

INPUTS = (
    "practical_salinity", "potential_temperature", "sigma0", "oxygen", "nitrate", "phosphate", "silicate",
)  # fmt: skip
WATER = {
    "practical_salinity": 34.7, "potential_temperature": 2.0, "sigma0": 27.7, "oxygen": 200.0,
    "nitrate": 30.0, "phosphate": 2.0, "silicate": 100.0,
}  # fmt: skip
ANYTHING = st.floats(allow_nan=True, allow_infinity=True)
SETS = pytest.mark.parametrize("ratios", STOICHIOMETRIES.values(), ids=lambda r: str(r.name))


def columns(rows: list[dict[str, float]], chosen: TracerSettings | None = None) -> dict[str, FloatArray]:
    values = {name: np.array([row[name] for row in rows], dtype=np.float64) for name in INPUTS}
    return tracers.columns(values.__getitem__, chosen or TracerSettings())


def respired(ratios: Stoichiometry, freed: float) -> dict[str, float]:
    return WATER | {
        "oxygen": WATER["oxygen"] - ratios.oxygen.value * freed,
        "nitrate": WATER["nitrate"] + ratios.nitrogen.value * freed,
        "phosphate": WATER["phosphate"] + freed,
    }


def test_gives_every_tracer_of_the_registry_and_no_other() -> None:
    found = columns([WATER, WATER])
    assert set(found) == set(TRACERS)
    assert all(values.shape == (2,) and np.isfinite(values).all() for values in found.values())


@SETS
@quick
@given(freed=st.floats(0, 1))
def test_respiration_leaves_preformed_nutrients_as_they_were(ratios: Stoichiometry, freed: float) -> None:
    found = columns([WATER, respired(ratios, freed)], TracerSettings(stoichiometry=ratios.name))
    for name in ("preformed_phosphate", "preformed_nitrate"):
        assert found[name][1] == pytest.approx(found[name][0], abs=1e-12)
    assert found["aou"][1] - found["aou"][0] == pytest.approx(ratios.oxygen.value * freed, abs=1e-10)


@SETS
@quick
@given(freed=st.floats(0.1, 1))
def test_another_set_of_ratios_does_not_leave_them_so(ratios: Stoichiometry, freed: float) -> None:
    other = next(r for r in STOICHIOMETRIES.values() if r.oxygen.value != ratios.oxygen.value)
    found = columns([WATER, respired(other, freed)], TracerSettings(stoichiometry=ratios.name))
    assert abs(found["preformed_phosphate"][1] - found["preformed_phosphate"][0]) > 1e-4


@pytest.mark.parametrize("form", list(nutrients.NStarForm))
@quick
@given(freed=st.floats(0, 1))
def test_respiration_at_sixteen_leaves_n_star_as_it_was(form: nutrients.NStarForm, freed: float) -> None:
    ratios = STOICHIOMETRIES[next(iter(STOICHIOMETRIES))]
    assert ratios.nitrogen.value == 16
    found = columns([WATER, respired(ratios, freed)], TracerSettings.model_validate({"n_star": form.value}))
    assert found["n_star"][1] == pytest.approx(found["n_star"][0], abs=1e-12)


@quick
@given(freed=st.floats(0, 1))
def test_respiration_at_their_own_ratios_leaves_no_po_and_po4_star_as_they_were(freed: float) -> None:
    before = columns([WATER])
    by_phosphate = WATER | {"phosphate": WATER["phosphate"] + freed, "oxygen": WATER["oxygen"] - 175 * freed}
    assert columns([by_phosphate])["po4_star"][0] == pytest.approx(before["po4_star"][0], abs=1e-12)
    by_phosphate |= {"oxygen": WATER["oxygen"] - 135 * freed}
    assert columns([by_phosphate])["broecker_po"][0] == pytest.approx(before["broecker_po"][0], abs=1e-10)
    by_nitrate = WATER | {"nitrate": WATER["nitrate"] + freed, "oxygen": WATER["oxygen"] - 9 * freed}
    assert columns([by_nitrate])["broecker_no"][0] == pytest.approx(before["broecker_no"][0], abs=1e-10)


@quick
@given(st.floats(0, 1))
def test_mixing_mixes_every_tracer_made_of_concentrations(share: float) -> None:
    """A tracer can only trace when it mixes in proportion, as those that are linear do."""
    north = WATER | {"oxygen": 260.0, "nitrate": 18.0, "phosphate": 1.2, "silicate": 15.0}
    mixed = {name: share * north[name] + (1 - share) * WATER[name] for name in INPUTS}
    found = columns([north, WATER, mixed])
    for name in ("broecker_no", "broecker_po", "po4_star", "n_star", "si_star"):
        expected = share * found[name][0] + (1 - share) * found[name][1]
        assert found[name][2] == pytest.approx(expected, abs=1e-10)


def test_the_two_forms_of_n_star_differ_by_their_scale() -> None:
    later = columns([WATER])["n_star"][0]
    first = columns([WATER], TracerSettings(n_star="gruber_sarmiento_1997"))["n_star"][0]
    assert later == pytest.approx(30 - 32 + 2.9, abs=1e-12)
    assert first == pytest.approx(0.87 * later, abs=1e-12)


@pytest.mark.parametrize("name", list(SolubilityName))
def test_the_chosen_solubility_is_used(name: SolubilityName) -> None:
    found = columns([WATER], TracerSettings(oxygen_solubility=name.value))
    assert found["oxygen_solubility"][0] == pytest.approx(331.2, rel=3e-3)
    assert found["aou"][0] == found["oxygen_solubility"][0] - 200.0
    others = {
        float(columns([WATER], TracerSettings(oxygen_solubility=other.value))["oxygen_solubility"][0])
        for other in SolubilityName
    }
    assert len(others) == len(SolubilityName)


@pytest.mark.parametrize(
    ("missing", "lost"),
    [
        ("silicate", {"si_star"}),
        ("phosphate", {"preformed_phosphate", "broecker_po", "po4_star", "n_star"}),
        ("nitrate", {"preformed_nitrate", "broecker_no", "n_star", "si_star"}),
        ("oxygen", {"aou", "oxygen_saturation", "preformed_phosphate", "preformed_nitrate", "broecker_no",
                    "broecker_po", "po4_star"}),
        ("potential_temperature", {"oxygen_solubility", "aou", "oxygen_saturation", "preformed_phosphate",
                                   "preformed_nitrate"}),
        ("sigma0", set()),
    ],
)  # fmt: skip
def test_a_missing_value_takes_with_it_what_is_made_of_it_and_nothing_else(
    missing: str, lost: set[str]
) -> None:
    for gap in (np.nan, np.inf, 1e300):
        found = columns([WATER, WATER | {missing: gap}])
        assert {name for name, values in found.items() if np.isnan(values[1])} == lost
        assert not any(np.isnan(values[0]) for values in found.values())


def test_an_infinite_density_gives_no_solubility() -> None:
    row = {**WATER, "sigma0": np.inf, "oxygen": 0.0}
    found = columns([row], TracerSettings(oxygen_solubility="benson_krause_ml_l"))
    assert np.isnan(found["oxygen_solubility"]).all()


@pytest.mark.parametrize("name", list(SolubilityName))
@quick
@given(rows=st.lists(st.fixed_dictionaries(dict.fromkeys(INPUTS, ANYTHING)), min_size=1, max_size=6))
def test_no_row_of_rubbish_raises_or_warns(name: SolubilityName, rows: list[dict[str, float]]) -> None:
    found = columns(rows, TracerSettings(oxygen_solubility=name.value))
    assert not any(np.isinf(values).any() for values in found.values())


@quick
@given(
    st.lists(st.fixed_dictionaries(dict.fromkeys(INPUTS, ANYTHING)), min_size=1, max_size=6),
    st.integers(0, 9),
)
def test_order_and_size_of_a_batch_change_no_answer(rows: list[dict[str, float]], seed: int) -> None:
    order = np.random.default_rng(seed).permutation(len(rows))
    together, shuffled = columns(rows), columns([rows[i] for i in order])
    single = [columns([row]) for row in rows]
    for name, values in together.items():
        np.testing.assert_array_equal(shuffled[name], values[order])
        np.testing.assert_array_equal(np.concatenate([one[name] for one in single]), values)


def test_a_name_that_does_not_exist_is_refused_before_anything_is_computed() -> None:
    for field in ("stoichiometry", "oxygen_solubility"):
        wrong = TracerSettings.model_construct(**{**TracerSettings().model_dump(), field: "mine"})
        with pytest.raises(SettingsProblem, match=f"tracers.{field}: found 'mine'"):
            columns([WATER], wrong)


def test_ratio_sets_cannot_be_changed() -> None:
    ratios = STOICHIOMETRIES[next(iter(STOICHIOMETRIES))]
    with pytest.raises(dataclasses.FrozenInstanceError):
        ratios.citation = "mine"  # type: ignore[misc]
