"""The table of checks is made from the code and leaves none out."""

from __future__ import annotations

import subprocess
import sys

import pytest

from pipeline.checking import CHECKS, CONCLUSIONS
from pipeline.checking.table import CheckEntry, ConclusionEntry, described_limit, markdown
from pipeline.settings import CheckSettings

EVERY: dict[str, CheckEntry | ConclusionEntry] = {**CHECKS, **CONCLUSIONS}


@pytest.mark.parametrize("entry", EVERY.values(), ids=lambda entry: entry.name)
def test_each_check_is_listed_with_what_it_takes(entry: CheckEntry | ConclusionEntry) -> None:
    assert EVERY[entry.name] is entry
    assert entry.name == entry.name.lower().replace("_", "-")
    assert entry.looks_for
    assert entry.severities
    assert set(entry.limits) <= set(CheckSettings.model_fields)
    assert all(described_limit(name) for name in entry.limits)


def test_every_limit_of_the_settings_is_used_by_a_check() -> None:
    used = {name for entry in CHECKS.values() for name in entry.limits}
    assert set(CheckSettings.model_fields) - used == set()


def test_every_limit_is_described_with_its_source() -> None:
    for name, field in CheckSettings.model_fields.items():
        assert field.description, name


def test_the_table_holds_every_check() -> None:
    lines = markdown(EVERY.values()).splitlines()
    assert len(lines) == 2 + len(CHECKS) + len(CONCLUSIONS)
    assert [line.split("`")[1] for line in lines[2:]] == sorted(EVERY)
    assert all(line.count(" | ") == 3 for line in lines)


def test_a_limit_stands_there_with_its_default() -> None:
    assert described_limit("station_speed") == "`station_speed` 15"
    assert described_limit("inversion_bottle") == "`inversion_bottle`: upper 0.05, deep 0.02"
    with pytest.raises(AttributeError):
        described_limit("no_such_limit")


def test_the_command_prints_the_table() -> None:
    command = [sys.executable, "-m", "pipeline.checking"]
    printed = subprocess.run(command, check=True, capture_output=True, text=True).stdout
    assert printed == markdown(EVERY.values()) + "\n"
