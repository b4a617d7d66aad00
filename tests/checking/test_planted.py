"""Every check finds what was planted for it, is silent about what only looks alike, and does not cry wolf."""

from __future__ import annotations

from functools import cache

import pytest

from pipeline.checking import CHECKS
from tests.checking.cases import Case, marks_of
from tests.checking.planted import cases, clean_tables, wolf
from tests.checking.planted_profiles import sensitivity

MOST_DOUBTED = 0.005  # of clean samples


@cache
def cases_of() -> dict[str, list[Case]]:
    found: dict[str, list[Case]] = {name: [] for name in CHECKS}
    for case in cases():
        found[case.check].append(case)
    return found


@pytest.mark.parametrize("name", CHECKS)
def test_each_check_does_what_its_cases_say(name: str) -> None:
    mine = cases_of()[name]
    assert [case.label for case in mine if not case.passes()] == []
    assert any(case.must_speak for case in mine)


@pytest.mark.parametrize("name", CHECKS)
def test_marks_are_as_the_check_is_listed(name: str) -> None:
    for case in cases_of()[name][:40]:
        for mark in marks_of(name, case.table):
            assert mark.check == name
            assert mark.severity in CHECKS[name].severities
            assert len(mark.rows) > 0
            assert len(mark.values) == (1 if mark.together else len(mark.rows))
            assert isinstance(mark.limit, str) or len(mark.limit) == len(mark.rows)


@pytest.mark.parametrize("kind", ["samples", "levels"])
def test_hardly_any_clean_row_is_doubted(kind: str) -> None:
    tables = clean_tables()[kind]
    counts = [wolf(name, tables) for name in CHECKS]
    assert sum(doubted for doubted, _ in counts) < MOST_DOUBTED * counts[0][1]


def test_spikes_are_found_the_better_the_larger_they_are() -> None:
    shares = sensitivity(factors=(1.5, 10.0), count=12)
    assert all(large >= small for small, large in shares.values())
    assert min(large for _, large in shares.values()) >= 0.75
