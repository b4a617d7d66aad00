"""What the README says is run as it stands there."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any, Literal, get_args, get_origin

import pytest
from pydantic import BaseModel

from pipeline.carbon_tracer_settings import PreformedAlkalinity
from pipeline.carbonate_settings import CarbonateSettings, ProfileSettings
from pipeline.mixing import read_catalogue
from pipeline.mixing.entries import SourceSet
from pipeline.mixing.rules import parse_rules
from pipeline.mixing.tags import tag_table
from pipeline.reading import read_cruise_file
from pipeline.settings import MixingSettings, TracerSettings, read_settings
from pipeline.tables import MIXING, MIXTURES, TABLE_NAMES
from tests.flows.conftest import FIXTURES, ROOT, call

if TYPE_CHECKING:
    from pathlib import Path

TEXT = (ROOT / "README.md").read_text(encoding="utf-8")
EXAMPLES = re.findall(r"```python\n(.*?)```", TEXT, re.DOTALL)


@pytest.fixture(scope="module")
def where_the_readme_is_followed(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Run the README's first command, less the set-up, in an empty folder."""
    folder = tmp_path_factory.mktemp("readme")
    command = re.search(r"seawhence (run fixtures/inbox .*)\n", TEXT)
    assert command
    arguments = command[1].replace("fixtures/", f"{FIXTURES}/").split()
    with pytest.MonkeyPatch.context() as patch:
        patch.chdir(folder)
        assert call(*arguments).status == 0
    return folder


@pytest.mark.parametrize("example", EXAMPLES, ids=lambda text: text.split()[1].rstrip(","))
def test_reading_examples(
    example: str,
    where_the_readme_is_followed: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.chdir(where_the_readme_is_followed)
    exec(compile(example, "README.md", "exec"), {})  # noqa: S102 - the README's own words
    said = capsys.readouterr().out
    assert any(word in said for word in ("OVF", "ZZV120090306", "overflow", "umol kg-1"))


def test_the_cruise_file_and_the_correction_shown_can_be_read(tmp_path: Path) -> None:
    described, corrected = re.findall(r"```toml\n(.*?)```", TEXT, re.DOTALL)[:2]
    said = read_cruise_file("README.md", described.encode())
    assert said.of("nutrients.xlsx") is not None
    assert said.stands == ("bottles_2_hy1.csv",)
    (tmp_path / "settings.toml").write_text(corrected, encoding="utf-8")
    assert read_settings(tmp_path / "settings.toml").corrections["ZZV220210218"]["bottle_oxygen"].add == -3.0


def test_the_catalogue_shown_can_be_read(tmp_path: Path) -> None:
    shown, rules = re.findall(r"```toml\n(.*?)```", TEXT, re.DOTALL)[2:]
    assert parse_rules(rules, "README.md").rules.source[0].code == "OVF"
    (tmp_path / "sources.toml").write_text(shown, encoding="utf-8")
    assert read_catalogue(tmp_path / "sources.toml").title == "Source waters of an invented sea"


def test_there_are_examples_for_each_reader() -> None:
    assert [re.findall(r"import (pandas|polars|duckdb|pyarrow|pipeline)", text)[0] for text in EXAMPLES] == [
        "pandas", "polars", "duckdb", "pyarrow", "pipeline",
    ]  # fmt: skip


def test_every_table_is_described() -> None:
    assert all(f"| `{name}` |" in TEXT for name in TABLE_NAMES)


def test_the_defaults_are_those_of_the_code() -> None:
    shown = re.search(r"\| setting `mixing.` \| default \| \|\n\|---\|---\|---\|\n((?:\|.*\|\n)+)", TEXT)
    assert shown
    rows = [[cell.strip() for cell in line.strip("|").split(" | ")][:2] for line in shown[1].splitlines()]
    stated = {
        name: value
        for names, values in rows
        if values != "the registry's"
        for name, value in zip(re.findall(r"`(\w+)`", names), values.split(", "), strict=True)
    }
    assert set(stated) == {
        "tag_share", "tag_probability", "unexplained_chi_square", "condition_limit", "members", "seed",
    }  # fmt: skip
    assert {name: float(value) for name, value in stated.items()} == {
        name: getattr(MixingSettings(), name) for name in stated
    }


def _written(value: Any) -> str:
    """Return a default as it stands in a settings file."""
    match value:
        case None:
            return "none"
        case BaseModel():
            return _written({name: getattr(value, name) for name in type(value).model_fields})
        case dict():
            return "{" + ", ".join(f"{key} = {_written(own)}" for key, own in value.items()) + "}"
        case str():
            return f'"{value}"'
        case _:
            return str(value)


def _literals(annotation: Any) -> set[str]:
    """Return the words that a setting may be, or the keys of its table."""
    if get_origin(annotation) is Literal:
        return {str(choice) for choice in get_args(annotation)}
    return {choice for part in get_args(annotation) for choice in _literals(part)}


def test_the_keys_of_carbon_are_told_with_their_defaults_and_choices() -> None:
    shown = re.search(
        r"\| setting \| default \| choices, or what it is \|\n\|---\|---\|---\|\n((?:\|.*\|\n)+)", TEXT
    )
    assert shown
    stated = {}
    for line in shown[1].splitlines():
        names, defaults, words = (cell.strip() for cell in line.strip("|").split(" | "))
        values = re.findall(r"`([^`]+)`", defaults) or [defaults]
        for name, value in zip(re.findall(r"`([\w.]+)`", names), values, strict=True):
            stated[name] = (value, f"{defaults} {words}")
    sections: dict[str, type[BaseModel]] = {
        "carbonate": CarbonateSettings,
        "tracers": TracerSettings,
        "profiles": ProfileSettings,
    }
    fields = {
        f"{section}.{name}": field
        for section, own in sections.items()
        for name, field in own.model_fields.items()
    }
    assert list(stated) == [name for name in stated if name in fields]
    assert set(stated) == set(fields)
    assert {name: value for name, (value, _) in stated.items()} == {
        name: _written(field.default) for name, field in fields.items()
    }
    for name, field in fields.items():
        for choice in _literals(field.annotation):
            assert re.search(rf'`"?{choice}"?`', stated[name][1]), (name, choice)
    for key in PreformedAlkalinity.model_fields:
        assert re.search(rf"\b{key}\b", stated["tracers.preformed_alkalinity"][1]), key


def test_every_key_of_a_set_is_told_with_its_choices() -> None:
    section = TEXT[TEXT.index("## Source waters") : TEXT.index("## Settings")]
    for name, field in SourceSet.model_fields.items():
        assert re.search(rf"`{name}|\b{name} = |\[set\.{name}\]", section), name
        for choice in get_args(field.annotation):
            if isinstance(choice, str):
                assert f'`"{choice}"`' in section, (name, choice)
    for name in (*MIXING, *MIXTURES[7:]):
        assert f"`{name}`" in TEXT or name.endswith("_uncertainty"), name


def test_the_tags_are_those_of_the_code() -> None:
    shown = re.search(r"\| tag \| means \|\n\|---\|---\|\n((?:\|.*\|\n)+)", TEXT)
    assert shown
    rows = [tuple(cell.strip() for cell in line.strip("|").split(" | ")) for line in shown[1].splitlines()]
    (leading, words), *reasons = tag_table()
    assert rows == [(leading, words), *((f"`{tag}`", words) for tag, words in reasons)]
