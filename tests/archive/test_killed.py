"""Publication that is cut short at every one of its steps, by an exception and by SIGKILL."""

from __future__ import annotations

import errno
import os
import random
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from pipeline.archive import Disk, clean_staging, locked, open_archive, publish, read_cruise, revisions
from pipeline.problems import ArchiveProblem

from .invented import Dying, Killed, assert_promise, digests, leftovers, provenance, tables

CRUISE = "77XX20260101"
MOMENTS = ("before", "amid", "after")


def publish_seed(store: Disk, seed: int) -> int:
    return publish(store, provenance(CRUISE, seed), tables(CRUISE, seed))


@pytest.fixture(autouse=True)
def _no_sync(monkeypatch: pytest.MonkeyPatch) -> None:
    """Whether bytes survive a loss of power cannot be tested here, and waiting for the disk is slow."""
    monkeypatch.setattr(os, "fsync", lambda _: None)


class Scene:
    """An archive with ``before`` revisions of the cruise, and what it is after one more, undisturbed."""

    def __init__(self, place: Path, before: int) -> None:
        self.place, self.before = place, before
        self.start = open_archive(place / "start", create=True)
        for seed in range(before):
            publish_seed(self.start, seed)
        self.undisturbed = open_archive(shutil.copytree(place / "start", place / "undisturbed"))
        counting = Dying(self.undisturbed.root)
        publish_seed(counting, before)
        self.steps = len(counting.steps)
        self.wanted = digests(self.undisturbed.root)

    def copy(self) -> Path:
        work = self.place / "work"
        shutil.rmtree(work, ignore_errors=True)
        shutil.copytree(self.start.root, work)
        return work


@pytest.fixture(params=[0, 1, 2])
def scene(request: pytest.FixtureRequest, tmp_path: Path) -> Scene:
    return Scene(tmp_path, request.param)


@pytest.mark.parametrize("moment", MOMENTS)
def test_killed_anywhere_the_promise_holds_and_the_next_run_ends_the_same(scene: Scene, moment: str) -> None:
    for fatal in range(scene.steps):
        store = Dying(scene.copy(), fatal, moment)
        with pytest.raises(Killed):
            publish_seed(store, scene.before)
        assert_promise(store, CRUISE, range(1, scene.before + 1))
        again = Disk(store.root)
        assert publish_seed(again, scene.before) == scene.before + 1
        assert digests(again.root) == scene.wanted, f"killed {moment} {store.steps[-1]}"
        clean_staging(again)
        assert leftovers(again.root) == []


def test_killed_twice_the_promise_still_holds(scene: Scene) -> None:
    for first in range(0, scene.steps, 4):
        for second in range(30):
            store = Dying(scene.copy(), first, MOMENTS[second % 3])
            with pytest.raises(Killed):
                publish_seed(store, scene.before)
            store = Dying(store.root, second, MOMENTS[first // 4 % 3])
            try:
                publish_seed(store, scene.before)
            except Killed:
                assert_promise(store, CRUISE, range(1, scene.before + 1))
            publish_seed(Disk(store.root), scene.before)
            assert digests(store.root) == scene.wanted
            if second >= len(store.steps):
                break


def test_killed_and_other_content_wanted_then_is_never_mixed_with_it(tmp_path: Path) -> None:
    scene = Scene(tmp_path, 1)
    other = open_archive(shutil.copytree(scene.start.root, tmp_path / "other"))
    publish_seed(other, 7)
    wanted = digests(other.root)
    for first in range(scene.steps - 5, scene.steps):
        for second in range(30):
            store = Dying(scene.copy(), first)
            with pytest.raises(Killed):
                publish_seed(store, 1)
            store = Dying(store.root, second)
            try:
                publish_seed(store, 7)
            except Killed:
                assert_promise(store, CRUISE, [1])
            assert publish_seed(Disk(store.root), 7) == 2
            assert digests(store.root) == wanted
            if second >= len(store.steps):
                break


def test_killed_and_the_old_content_wanted_again_the_old_revision_is_put_back(tmp_path: Path) -> None:
    scene = Scene(tmp_path, 2)
    start = digests(scene.start.root)
    for fatal in range(scene.steps - 1):
        store = Dying(scene.copy(), fatal)
        with pytest.raises(Killed):
            publish_seed(store, 2)
        assert publish_seed(Disk(store.root), 1) == 2
        assert digests(store.root) == start, store.steps[-1]


def test_killed_while_the_old_revision_is_put_back(tmp_path: Path) -> None:
    scene = Scene(tmp_path, 1)
    for second in range(12):
        store = Dying(scene.copy(), scene.steps - 3)
        with pytest.raises(Killed):
            publish_seed(store, 1)
        store = Dying(store.root, second)
        try:
            publish_seed(store, 0)
        except Killed:
            assert_promise(store, CRUISE, [1])
        assert publish_seed(Disk(store.root), 0) == 1
        assert digests(store.root) == digests(scene.start.root)


@pytest.mark.parametrize("moment", MOMENTS)
def test_a_refused_operation_leaves_the_old_revision_published(scene: Scene, moment: str) -> None:
    start = digests(scene.start.root)
    for fatal in range(scene.steps):
        refusal = ArchiveProblem("the disk is full")
        store = Dying(scene.copy(), fatal, moment, refusal)
        with pytest.raises(ArchiveProblem) as caught:
            publish_seed(store, scene.before)
        assert caught.value is refusal
        if fatal == scene.steps - 1 and moment == "after":
            continue  # everything was done by then
        assert digests(store.root) == start, f"refused {moment} {store.steps[fatal]}"
        assert leftovers(store.root) == []
        publish_seed(Disk(store.root), scene.before)
        assert digests(store.root) == scene.wanted


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="needs a device that is always full")
def test_a_full_disk_is_told_and_hurts_nothing(tmp_path: Path) -> None:
    scene = Scene(tmp_path, 1)
    store = Disk(scene.copy())
    staged = store.root / ".staging" / CRUISE / "mixtures.parquet"
    staged.parent.mkdir()
    staged.symlink_to("/dev/full")
    with pytest.raises(ArchiveProblem) as caught:
        publish_seed(store, 1)
    assert str(caught.value) == (
        f"{staged}: cannot write this, no space is left; free some space and run again."
    )
    assert isinstance(caught.value.__cause__, OSError)
    assert caught.value.__cause__.errno == errno.ENOSPC
    assert digests(store.root) == digests(scene.start.root)
    assert leftovers(store.root) == []


RUN = """
import sys
from tests.archive.invented import provenance, tables
from pipeline.archive import clean_staging, locked, open_archive, publish

store = open_archive(sys.argv[1], create=True)
made = {name: (provenance(name, 1), tables(name, 1)) for name in sys.argv[2:]}
print("ready", flush=True)
sys.stdin.readline()
with locked(store):
    clean_staging(store)
    for record, content in made.values():
        publish(store, record, content)
print("done", flush=True)
"""


def test_sigkill_at_random_moments(tmp_path: Path) -> None:
    names = [f"77XX2026010{number}" for number in range(1, 6)]
    start = open_archive(tmp_path / "start", create=True)
    for name in names[:4]:  # the fifth is new
        publish(start, provenance(name, 0), tables(name, 0))
    undisturbed = shutil.copytree(start.root, tmp_path / "undisturbed")
    began = time.monotonic()
    for name in names:
        publish(Disk(undisturbed), provenance(name, 1), tables(name, 1))
    longest = 2.0 * (time.monotonic() - began)
    wanted = digests(undisturbed)
    environment = {**os.environ, "PYTHONPATH": str(Path(__file__).parents[2])}
    generator = random.Random(6)  # noqa: S311 - moments, not secrets
    for _ in range(int(os.environ.get("SEAWHENCE_TEST_KILLS", "5"))):
        work = tmp_path / "work"
        shutil.rmtree(work, ignore_errors=True)
        shutil.copytree(start.root, work)
        with subprocess.Popen(
            [sys.executable, "-c", RUN, str(work), *names],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            env=environment,
            text=True,
        ) as run:
            assert run.stdin is not None
            assert run.stdout is not None
            assert run.stdout.readline() == "ready\n"
            run.stdin.write("\n")
            run.stdin.flush()
            time.sleep(generator.uniform(0.0, longest))
            run.send_signal(signal.SIGKILL)
        store = Disk(work)
        for name in names:
            assert_promise(store, name, [1] if name in names[:4] else [])
        with locked(store):
            clean_staging(store)
            for name in names:
                publish(store, provenance(name, 1), tables(name, 1))
        assert digests(work) == wanted
        assert leftovers(work) == []


def test_a_damaged_table_is_made_anew_and_what_stood_beside_it_is_kept(tmp_path: Path) -> None:
    store = open_archive(tmp_path, create=True)
    publish_seed(store, 0)
    publish_seed(store, 1)
    (tmp_path / "casts" / f"{CRUISE}.parquet").write_bytes(b"PAR1 spoiled")
    assert not read_cruise(store, CRUISE).is_whole
    assert publish_seed(store, 1) == 3
    assert read_cruise(store, CRUISE).is_whole
    assert revisions(store, CRUISE) == (1, 3)
    kept = sorted(path.name for path in (tmp_path / "superseded" / CRUISE / "r0002").iterdir())
    assert kept == ["findings.parquet", "mixtures.parquet", "rejects.parquet", "samples.parquet"]
