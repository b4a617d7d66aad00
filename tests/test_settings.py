from __future__ import annotations

from typing import TYPE_CHECKING, get_args

import pytest

from pipeline.problems import SettingsProblem
from pipeline.settings import Settings, TracerSettings, read_settings
from pipeline.tracers.nutrients import N_STAR
from pipeline.tracers.oxygen import SOLUBILITY_FITS
from pipeline.tracers.stoichiometry import STOICHIOMETRIES

if TYPE_CHECKING:
    from pathlib import Path


def test_a_file_over_the_defaults_and_the_environment_over_the_file(tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_text("[mixing]\ntag_share = 0.6\ncondition_limit = 50.0\n", encoding="utf-8")
    settings = read_settings(
        path, {"SEAWHENCE_MIXING__TAG_SHARE": "0.7", "SEAWHENCE_USE__WATER_FLAGS": "[2]"}
    )
    assert settings.mixing.tag_share == 0.7
    assert settings.mixing.condition_limit == 50.0
    assert settings.use.water_flags == (2,)
    assert settings.checks == Settings().checks


def test_the_hash_follows_the_values_alone(tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_text("# nothing changed\n[mixing]\ntag_share = 0.5\n", encoding="utf-8")
    assert read_settings(path, {}).sha256 == Settings().sha256
    assert read_settings(None, {"SEAWHENCE_MIXING__TAG_SHARE": "0.6"}).sha256 != Settings().sha256


def test_every_fault_of_a_file_is_told_with_its_line(tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_text("[use]\nwater_flag = [2]\n\n[mixing]\ntag_share = 2.0\n", encoding="utf-8")
    with pytest.raises(SettingsProblem) as caught:
        read_settings(path, {})
    assert str(caught.value).splitlines() == [
        f"{path}, line 2: found the key 'use.water_flag', which is not known here; correct its spelling or remove it.",
        f"{path}, line 5: 'mixing.tag_share' is 2.0; expected less than or equal to 1; correct it.",
    ]


def test_the_choices_are_those_that_the_tracers_know() -> None:
    fields = TracerSettings.model_fields
    assert set(get_args(fields["stoichiometry"].annotation)) == {name.value for name in STOICHIOMETRIES}
    assert set(get_args(fields["oxygen_solubility"].annotation)) == {name.value for name in SOLUBILITY_FITS}
    assert set(get_args(fields["n_star"].annotation)) == {name.value for name in N_STAR}


def test_a_section_that_is_no_table_is_told_and_nothing_breaks(tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_text("mixing = 3\n", encoding="utf-8")
    with pytest.raises(SettingsProblem, match="line 1: 'mixing' is 3"):
        read_settings(path, {"SEAWHENCE_MIXING__TAG_SHARE": "0.6"})


def test_a_file_that_is_not_toml_or_not_there(tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    with pytest.raises(SettingsProblem, match="cannot be read"):
        read_settings(path, {})
    path.write_text("[mixing\n", encoding="utf-8")
    with pytest.raises(SettingsProblem, match="found text that is not TOML"):
        read_settings(path, {})
