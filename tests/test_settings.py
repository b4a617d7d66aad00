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
    with pytest.raises(SettingsProblem) as refusal:
        read_settings(path, {})
    assert str(refusal.value) == (
        f"{path}: the settings file cannot be read (No such file or directory); name a TOML file in UTF-8."
    )
    path.write_bytes(b"[mixing]\n# \xff\n")
    with pytest.raises(SettingsProblem, match=r"cannot be read \(it is not UTF-8 text\); name"):
        read_settings(path, {})
    path.write_bytes(b"\xef\xbb\xbf[mixing]\ntag_share = 0.6\n")
    assert read_settings(path, {}).mixing.tag_share == 0.6, "a byte order mark is no text"
    path.write_text("[mixing\n", encoding="utf-8")
    with pytest.raises(SettingsProblem, match="found text that is not TOML"):
        read_settings(path, {})


def test_the_tables_of_a_cruise_depend_on_no_uncertainty_of_another() -> None:
    own = {"ZZV120090214": {"nitrate": 0.3}}
    both = Settings.model_validate(
        {
            "mixing": {
                "cruise_uncertainty": {**own, "ZZV220210218": {"oxygen": 2.0}},
                "uncertainty": {"oxygen": 1.0},
            }
        }
    )
    one = Settings.model_validate({"mixing": {"cruise_uncertainty": own, "uncertainty": {"oxygen": 1.0}}})
    assert both.for_cruise("ZZV120090214").sha256 == one.for_cruise("ZZV120090214").sha256
    assert both.for_cruise("ZZV120090214").mixing.cruise_uncertainty == own
    assert both.for_cruise("ZZV120090306").mixing.cruise_uncertainty == {}
    assert both.for_cruise("ZZV120090306").mixing.uncertainty == {"oxygen": 1.0}
    assert both.for_cruise("ZZV220210218").sha256 != both.for_cruise("ZZV120090306").sha256


def test_a_fault_of_the_environment_names_the_variable(tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_text("[mixing]\ntag_share = 0.6\nmembers = -1\n", encoding="utf-8")
    environment = {
        "SEAWHENCE_MIXING__TAG_SHARE": "2.0",  # over a good value of the file
        "SEAWHENCE_MIXING__TAG_SHAR": "0.6",
        "SEAWHENCE_MIXNG__TAG_SHARE": "0.6",
        "SEAWHENCE_USE__WATER_FLAGS": '["two"]',
    }
    with pytest.raises(SettingsProblem) as caught:
        read_settings(path, environment)
    *of_the_environment, last = str(caught.value).splitlines()
    assert last.startswith(f"{path}, line 3: 'mixing.members' is -1;")
    told = {sentence.partition(":")[0] for sentence in of_the_environment}
    assert told == {f"the environment variable {name}" for name in environment}
    assert "found the key 'mixing.tag_shar', which is not known here" in str(caught.value)
