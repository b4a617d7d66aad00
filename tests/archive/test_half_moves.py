"""Publication that is cut short between the two halves of a move, as in a bucket: a copy, then a removal."""

from __future__ import annotations

import os
import shutil
from typing import TYPE_CHECKING

import pytest

from pipeline.archive import Disk, open_archive, publish, read_cruise
from pipeline.problems import ArchiveProblem

from .invented import Dying, Killed, assert_promise, digests, provenance, tables

if TYPE_CHECKING:
    from pathlib import Path

CRUISE = "77XX20260101"


class Copying(Dying):
    """A store whose moves are two steps; it can end between them."""

    def move(self, key: str, target: str) -> None:
        def copy() -> None:
            (self.root / target).parent.mkdir(parents=True, exist_ok=True)
            shutil.copyfile(self.root / key, self.root / target)

        self._step(f"copy {key}", copy)
        self.remove(key)


def publish_seed(store: Disk, seed: int) -> int:
    return publish(store, provenance(CRUISE, seed), tables(CRUISE, seed))


@pytest.fixture(autouse=True)
def _no_sync(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(os, "fsync", lambda _: None)


@pytest.mark.parametrize("before", [0, 1, 2])
def test_killed_anywhere_nothing_is_mixed_and_the_next_run_ends_the_same(tmp_path: Path, before: int) -> None:
    start = open_archive(tmp_path / "start", create=True)
    for seed in range(before):
        publish_seed(start, seed)
    undisturbed = Copying(shutil.copytree(start.root, tmp_path / "undisturbed"))
    publish_seed(undisturbed, before)
    wanted = digests(undisturbed.root)
    for fatal in range(len(undisturbed.steps)):
        for moment in ("before", "after"):
            work = tmp_path / "work"
            shutil.rmtree(work, ignore_errors=True)
            store = Copying(shutil.copytree(start.root, work), fatal, moment)
            with pytest.raises(Killed):
                publish_seed(store, before)
            assert_promise(store, CRUISE, range(1, before + 1))
            again = Copying(work)
            assert publish_seed(again, before) == before + 1
            assert digests(work) == wanted, f"killed {moment} {store.steps[-1]}"


@pytest.mark.parametrize("before", [1, 2])
def test_refused_anywhere_the_last_revision_stands_or_nothing_is_mixed(tmp_path: Path, before: int) -> None:
    start = open_archive(tmp_path / "start", create=True)
    for seed in range(before):
        publish_seed(start, seed)
    for fatal in range(40):
        work = tmp_path / "work"
        shutil.rmtree(work, ignore_errors=True)
        store = Copying(shutil.copytree(start.root, work), fatal, "after", ArchiveProblem("overloaded"))
        try:
            publish_seed(store, before)
        except ArchiveProblem:
            assert_promise(store, CRUISE, range(1, before + 1))
            found = read_cruise(store, CRUISE)
            assert found.is_whole
            assert found.provenance is not None
            assert found.provenance.revision in {before, before + 1}
        else:
            break
    assert fatal > 15
