"""What a run says and leaves where the disk, the network share or the inbox fails it, or a cruise never ends."""

from __future__ import annotations

import errno
import json
import os
import subprocess
import time
from contextlib import contextmanager
from pathlib import Path
from typing import IO, TYPE_CHECKING, Any

import pytest

from flows import direct, plan
from pipeline.archive import Disk
from pipeline.archive.refusals import refused
from tests.flows.conftest import call
from tests.flows.planted import plant
from tests.invented import EXPOCODE, bottle_file

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

OTHERS = ("ZZV220210301", "ZZV320140610")
NO_WAITS = "[0.0, 0.0]"


@pytest.fixture
def inbox(tmp_path: Path) -> Path:
    """Return an inbox of three cruises, a small, a large and a small one."""
    folder = tmp_path / "inbox"
    folder.mkdir()
    (folder / "a_hy1.csv").write_bytes(bottle_file())
    rows = (
        {"EXPOCODE": OTHERS[0], "STNNBR": str(1 + n // 20), "NITRAT": f"{n % 977 / 31:.2f}"}
        for n in range(3000)
    )
    (folder / "b_hy1.csv").write_bytes(bottle_file(*rows))
    (folder / "c_hy1.csv").write_bytes(bottle_file({"EXPOCODE": OTHERS[1]}))
    return folder


@contextmanager
def small_disk(place: Path, size: str) -> Iterator[Path]:
    """Mount a disk of a few bytes."""
    place.mkdir()
    mounting = ["mount", "-t", "tmpfs", "-o", f"size={size}", "tmpfs", str(place)]
    if os.geteuid() != 0 or subprocess.run(mounting, check=False, capture_output=True).returncode:
        pytest.skip("needs the right to mount a small disk")
    try:
        yield place
    finally:
        subprocess.run(["umount", str(place)], check=True)


def remount(place: Path, options: str) -> None:
    subprocess.run(["mount", "-o", f"remount,{options}", str(place)], check=True)


def test_a_full_disk_is_told_of_each_cruise_and_the_archive_is_whole(inbox: Path, tmp_path: Path) -> None:
    with small_disk(tmp_path / "small", "300k") as disk:
        archive = disk / "archive"
        outcome = call("run", inbox, "--archive", archive)
        assert outcome.status == 3
        first, large, _, closing = outcome.out.splitlines()
        assert first.startswith(f"{EXPOCODE}  new, revision 1")
        assert large.startswith(f"{OTHERS[0]}  failed: {archive}/")
        assert large.endswith(": cannot write this, no space is left; free some space and run again.")
        assert "1 cruise failed" in closing
        assert outcome.err == "", "nobody waits for a full disk"
        assert call("show", archive, "--verify").status == 0
        remount(disk, "size=20m")
        again = call("run", inbox, "--archive", archive)
        assert again.status == 0
        assert f"{OTHERS[0]}  new, revision 1: 3000 rows in" in again.out
        assert call("show", archive, "--verify").status == 0


def test_an_archive_that_may_only_be_read_is_told(inbox: Path, tmp_path: Path) -> None:
    with small_disk(tmp_path / "small", "20m") as disk:
        assert call("run", inbox, "--archive", disk / "archive").status == 0
        remount(disk, "ro")
        outcome = call("run", inbox, "--archive", disk / "archive")
        assert outcome.status == 2
        assert outcome.err == (
            f"seawhence: {disk}/archive/.lock: cannot lock this, the file system is read-only; have it mounted for"
            " writing, or use another archive.\n"
        )
        assert call("show", disk / "archive", "--verify").status == 0


def test_an_inbox_that_cannot_be_read_is_told_and_changes_nothing(
    inbox: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    call("run", inbox, "--archive", tmp_path / "archive")
    real = os.scandir

    def locked_up(place: Any) -> Any:
        if str(place) == str(inbox):
            raise PermissionError(errno.EACCES, "Permission denied", str(inbox))
        return real(place)

    monkeypatch.setattr(os, "scandir", locked_up)
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 2
    assert outcome.err == (
        f"seawhence: {inbox}: the inbox cannot be read (Permission denied); see that its disk or share is there and"
        " may be read, and run again.\n"
    )
    assert call("show", tmp_path / "archive", "--verify").status == 0


def test_an_empty_inbox_may_be_a_share_that_is_not_there(inbox: Path, tmp_path: Path) -> None:
    call("run", inbox, "--archive", tmp_path / "archive")
    for path in inbox.iterdir():
        path.unlink()
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 0
    assert outcome.out.startswith("The inbox holds no file; see that its disk or network share is there. ")


def after_planning(monkeypatch: pytest.MonkeyPatch, act: Callable[[], object]) -> None:
    """Have something happen after a run was planned and before the first cruise is made."""
    real = plan.plan_run

    def planned(*arguments: Any) -> Any:
        made = real(*arguments)
        act()
        return made

    monkeypatch.setattr(direct, "plan_run", planned)


def test_a_file_that_vanishes_takes_no_sample_from_its_cruise(
    inbox: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    archive = tmp_path / "archive"
    (inbox / "a_more_hy1.csv").write_bytes(bottle_file({"STNNBR": "2"}))
    call("run", inbox, "--archive", archive)
    (inbox / "a_hy1.csv").write_bytes(bottle_file({"NITRAT": "31.00"}))
    (inbox / "c_hy1.csv").write_bytes(bottle_file({"EXPOCODE": OTHERS[1], "NITRAT": "31.00"}))
    after_planning(monkeypatch, (inbox / "a_more_hy1.csv").unlink)
    outcome = call("run", inbox, "--archive", archive)
    assert outcome.status == 1
    told = (
        "a_more_hy1.csv: it was there when the run began and cannot be read now (No such file or directory); nothing of"
        " its cruise was changed; see to it that it can be read, and run again."
    )
    assert f"{EXPOCODE}  refused: {told}" in outcome.out
    assert outcome.out.count(told) == 1
    assert f"{OTHERS[1]}  revised, revision 2" in outcome.out
    shown = json.loads(call("show", archive, EXPOCODE, "--format", "json").out)
    assert (shown["revision"], shown["rows"]["samples"]) == (1, 2)
    monkeypatch.undo()
    assert f"{EXPOCODE}  revised, revision 2: 2 rows in" in call("run", inbox, "--archive", archive).out
    assert call("show", archive, "--verify").status == 0


def test_a_share_that_comes_back_costs_a_wait(
    inbox: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("SEAWHENCE_RUN__WAITS", NO_WAITS)
    lost = lose(monkeypatch, times=1)
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 0
    assert len(lost) == 1
    assert outcome.err == (
        f"seawhence: 1 of the cruises met a fault that may pass; trying again in 0 s: {lost[0]}: cannot write this, the"
        " disk or network share does not answer; bring it back and run again.\n"
    )
    assert outcome.out.count("  new, revision 1") == 3


def test_a_share_that_stays_lost_is_told_of_each_cruise_and_waited_for_once(
    inbox: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("SEAWHENCE_RUN__WAITS", NO_WAITS)
    lose(monkeypatch, times=1000)
    archive = tmp_path / "archive"
    outcome = call("run", inbox, "--archive", archive)
    assert outcome.status == 3
    lines = outcome.out.splitlines()
    assert [line.split()[:2] for line in lines[:3]] == [[code, "failed:"] for code in (EXPOCODE, *OTHERS)]
    assert lines[3].startswith(
        f"failed  {archive}/samples: cannot write this, the disk or network share does not"
    )
    assert lines[4] == f"3 cruises failed. The tables are in {archive}."
    assert outcome.err.count("trying again") == 2, "twice for all, and not for each"
    monkeypatch.undo()
    assert call("show", archive, "--verify").status == 0
    assert call("run", inbox, "--archive", archive).status == 0
    assert call("show", archive, "--verify").status == 0


def lose(monkeypatch: pytest.MonkeyPatch, times: int) -> list[str]:
    """Have the archive's share not answer so many times when something is written; return what should have been."""
    lost: list[str] = []
    write, settle = Disk.write, Disk.settle

    def fail(path: Path) -> None:
        if len(lost) < times:
            lost.append(str(path))
            with refused(path, "write"):
                raise OSError(errno.ESTALE, os.strerror(errno.ESTALE))

    def no_write(disk: Disk, key: str, fill: Callable[[IO[bytes]], object]) -> None:
        fail(disk.root / key)
        write(disk, key, fill)

    def no_settle(disk: Disk, keys: Any) -> None:
        if times > 1:
            fail(disk.root / next(iter(keys)))
        settle(disk, keys)

    monkeypatch.setattr(Disk, "write", no_write)
    monkeypatch.setattr(Disk, "settle", no_settle)
    return lost


def test_a_delivered_file_whose_share_is_lost_is_tried_again(
    inbox: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("SEAWHENCE_RUN__WAITS", NO_WAITS)
    real = Path.read_bytes
    failures = [errno.EIO]

    def read(path: Path) -> bytes:
        if path == inbox / "a_hy1.csv" and planned and failures:
            raise OSError(number := failures.pop(), os.strerror(number))
        return real(path)

    planned: list[bool] = []
    after_planning(monkeypatch, lambda: planned.append(True))
    monkeypatch.setattr(Path, "read_bytes", read)
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 0
    assert (
        "trying again in 0 s: a_hy1.csv: it was there when the run began and cannot be read now (Input/output"
        in (outcome.err)
    )


def test_a_cruise_that_never_ends_or_ends_its_process_is_skipped_alone(
    inbox: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (inbox / "b_hy1.csv").write_bytes(bottle_file({"EXPOCODE": OTHERS[0]}))
    monkeypatch.setenv("PLANTED", plant(tmp_path / "planted")["PLANTED"])
    monkeypatch.syspath_prepend(tmp_path / "planted")
    monkeypatch.setenv("SEAWHENCE_RUN__CRUISE_SECONDS", "1.5")
    began = time.monotonic()
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert time.monotonic() - began < 60.0
    assert outcome.status == 3
    assert outcome.out.splitlines()[:2] == [
        f"{EXPOCODE}  failed: took longer than 1.5 s; skipped, its files (a_hy1.csv) can be looked at with 'seawhence"
        " check'.",
        f"{OTHERS[0]}  failed: took its process down (SIGSEGV); skipped, its files (b_hy1.csv) can be looked at with"
        " 'seawhence check'.",
    ]
    assert f"{OTHERS[1]}  new, revision 1" in outcome.out
    monkeypatch.delenv("PLANTED")
    assert call("show", tmp_path / "archive", "--verify").status == 0
