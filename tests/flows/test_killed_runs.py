"""Whole runs that are killed at random moments; ``python -m tests.bench kills`` kills more."""

from __future__ import annotations

from typing import TYPE_CHECKING

from tests.flows.killing import kill_direct_runs, make_scene

if TYPE_CHECKING:
    from pathlib import Path


def test_a_killed_run_leaves_the_archive_whole_and_the_next_ends_as_if_it_had_not_been(
    tmp_path: Path,
) -> None:
    assert kill_direct_runs(make_scene(tmp_path), 10, seed=6) >= 2
