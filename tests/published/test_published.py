from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from .check import Check, Status
from .table import TABLE


@pytest.mark.parametrize("check", TABLE, ids=str)
def test_agrees_with_the_outside_world(check: Check) -> None:
    computed = check.computed()
    assert check.holds(computed), (
        f"{check}: found {computed:.15g}, expected {check.expected} within {check.tolerance:g} ({check.source})"
    )


def test_every_row_names_its_source_and_is_there_once() -> None:
    assert all(check.source.strip() and check.quantity.strip() for check in TABLE)
    keys = [(str(check), check.expected) for check in TABLE]
    assert len(set(keys)) == len(keys)
    published = [c for c in TABLE if c.status in {Status.VERIFIED, Status.FROM_MEMORY}]
    assert len(published) >= 100


def test_a_stated_tolerance_is_far_below_the_value() -> None:
    """A wide tolerance would make a row pass whatever the code does."""
    for check in TABLE:
        if float(check.expected) != 0.0:
            assert check.tolerance <= 0.2 * abs(float(check.expected)), str(check)


@pytest.mark.parametrize(
    ("expected", "tolerance"), [("274.610", 5e-4), ("-0.2703", 5e-5), ("9.8130210e-6", 5e-14), ("3", 0.5)]
)
def test_tolerance_is_half_a_unit_of_the_last_printed_digit(expected: str, tolerance: float) -> None:
    check = Check("q", {}, lambda: 0.0, expected, "none", Status.EXACT)
    assert check.tolerance == pytest.approx(tolerance, rel=1e-12)
    assert check.holds(float(expected) + 0.9 * tolerance)
    assert not check.holds(float(expected) + 1.1 * tolerance)
    assert not check.holds(float("nan"))


def test_the_command_prints_the_table() -> None:
    root = Path(__file__).parents[2]
    done = subprocess.run(
        [sys.executable, "-m", "tests.published"], cwd=root, capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stdout + done.stderr
    lines = done.stdout.splitlines()
    assert sum(line.startswith("pass") for line in lines) == len(TABLE)
    assert lines[-1].endswith("0 failed")
