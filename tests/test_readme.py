"""What the README says is run as it stands there."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import pytest

from pipeline.mixing import read_catalogue
from pipeline.mixing.rules import parse_rules
from pipeline.mixing.tags import tag_table
from pipeline.tables import TABLE_NAMES
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


def test_the_catalogue_shown_can_be_read(tmp_path: Path) -> None:
    shown, rules = re.findall(r"```toml\n(.*?)```", TEXT, re.DOTALL)
    assert parse_rules(rules, "README.md").rules.source[0].code == "OVF"
    (tmp_path / "sources.toml").write_text(shown, encoding="utf-8")
    assert read_catalogue(tmp_path / "sources.toml").title == "Source waters of an invented sea"


def test_there_are_examples_for_each_reader() -> None:
    assert [re.findall(r"import (pandas|polars|duckdb|pyarrow)", text)[0] for text in EXAMPLES] == [
        "pandas", "polars", "duckdb", "pyarrow",
    ]  # fmt: skip


def test_every_table_is_described() -> None:
    assert all(f"| `{name}` |" in TEXT for name in TABLE_NAMES)


def test_the_tags_are_those_of_the_code() -> None:
    shown = re.search(r"\| tag \| means \|\n\|---\|---\|\n((?:\|.*\|\n)+)", TEXT)
    assert shown
    rows = [tuple(cell.strip() for cell in line.strip("|").split(" | ")) for line in shown[1].splitlines()]
    (leading, words), *reasons = tag_table()
    assert rows == [(leading, words), *((f"`{tag}`", words) for tag, words in reasons)]
