from __future__ import annotations

import pytest

from pipeline.problems import SettingsProblem
from pipeline.settings import TracerSettings
from pipeline.tracers.stoichiometry import STOICHIOMETRIES, Stoichiometry, StoichiometryName, stoichiometry


def test_every_name_has_its_set_and_every_set_its_citation() -> None:
    assert set(STOICHIOMETRIES) == set(StoichiometryName)
    for name, ratios in STOICHIOMETRIES.items():
        assert ratios.name is name
        year = name.rpartition("_")[2]
        assert year in ratios.citation


@pytest.mark.parametrize("ratios", STOICHIOMETRIES.values(), ids=lambda r: r.name)
def test_ratios_are_those_of_plankton_within_reason(ratios: Stoichiometry) -> None:
    assert 10 < ratios.nitrogen.value < 20
    assert 95 < ratios.carbon.value < 130
    assert 130 < ratios.oxygen.value < 180
    assert 0.09 < ratios.nitrogen_per_oxygen < 0.12


def test_the_default_exists() -> None:
    assert stoichiometry(TracerSettings().stoichiometry).name is StoichiometryName.ANDERSON_SARMIENTO_1994


def test_an_unknown_name_is_refused_with_the_names_that_exist() -> None:
    with pytest.raises(
        SettingsProblem, match="found 'redfield', expected one of redfield_1963, takahashi_1985"
    ):
        stoichiometry("redfield")
