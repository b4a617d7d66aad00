"""The table of what the tracers tell: complete, and true of the settings."""

from __future__ import annotations

import re
import subprocess
import sys
from operator import attrgetter
from pathlib import Path

import pytest

import pipeline.tracers
from pipeline.checking import CHECKS, CONCLUSIONS
from pipeline.settings import Settings
from pipeline.tracers.told import TOLD, Told

SOURCES = sorted(Path(pipeline.tracers.__file__).parent.glob("*.py"))


def test_every_finding_of_the_tracers_is_listed_and_nothing_else() -> None:
    text = "\n".join(path.read_text(encoding="utf-8") for path in SOURCES)
    told = set(re.findall(r"(?:Finding|Mark)\(\s*\"([a-z0-9-]+)\"", text))
    assert told == {one.name for one in TOLD}
    assert not told & {*CHECKS, *CONCLUSIONS}


@pytest.mark.parametrize("one", TOLD, ids=lambda one: one.name)
def test_the_settings_it_follows_exist(one: Told) -> None:
    for name in one.settings:
        assert attrgetter(name)(Settings()) is not ...


def test_it_is_printed() -> None:
    command = [sys.executable, "-m", "pipeline.tracers"]
    printed = subprocess.run(command, check=True, capture_output=True, text=True).stdout
    assert printed.startswith("| check | looks for | severity | settings |\n| --- |")
    assert printed.count("\n") == len(TOLD) + 2
