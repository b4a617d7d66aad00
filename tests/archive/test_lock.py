from __future__ import annotations

import fcntl
import os
import signal
import socket
import subprocess
import sys
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import pytest

from pipeline.archive import Disk, locked, open_archive
from pipeline.archive.lock import hold
from pipeline.problems import ArchiveBusy

HOLDER = """
import sys
from pipeline.archive import locked, open_archive
with locked(open_archive(sys.argv[1], create=True)):
    print("held", flush=True)
    sys.stdin.readline()
"""


@pytest.fixture
def archive(tmp_path: Path) -> Disk:
    return open_archive(tmp_path, create=True)


def holder(archive: Disk) -> subprocess.Popen[str]:
    environment = {**os.environ, "PYTHONPATH": str(Path(__file__).parents[2])}
    process = subprocess.Popen(
        [sys.executable, "-c", HOLDER, str(archive.root)],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        env=environment,
        text=True,
    )
    assert process.stdout is not None
    assert process.stdout.readline() == "held\n"
    return process


def test_a_killed_holder_holds_nothing(archive: Disk) -> None:
    with holder(archive) as other:
        with pytest.raises(ArchiveBusy) as caught, locked(archive):
            pass
        said = str(caught.value)
        assert said.startswith(
            f"{archive.root}/.lock: held by process {other.pid} on {socket.gethostname()} since 20"
        )
        assert said.endswith("run again: what is published can be read meanwhile.")
        other.send_signal(signal.SIGKILL)
        other.wait()
        assert str(other.pid) in (archive.root / ".lock").read_text()
        with locked(archive):
            assert f"process {os.getpid()} " in (archive.root / ".lock").read_text()
    assert (archive.root / ".lock").read_bytes() == b""


def test_the_lock_is_free_when_the_holder_ends(archive: Disk) -> None:
    with holder(archive) as other:
        other.communicate("\n")
    with locked(archive):
        pass


def test_patience_waits_for_the_holder(archive: Disk) -> None:
    with ThreadPoolExecutor(1) as pool:
        with locked(archive):
            waiting = pool.submit(lambda: locked(archive, patience=30.0).__enter__())
            time.sleep(0.05)
            assert not waiting.done()
        waiting.result(timeout=30)


def test_a_failing_run_releases_the_lock(archive: Disk) -> None:
    with pytest.raises(ZeroDivisionError), locked(archive):
        raise ZeroDivisionError
    with locked(archive):
        pass


def test_one_process_excludes_itself(archive: Disk) -> None:
    with locked(archive), pytest.raises(ArchiveBusy), locked(archive):
        pass


def test_a_lock_on_a_file_that_was_removed_meanwhile_is_none(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "held"
    real = fcntl.flock

    def late(descriptor: int, operation: int) -> None:
        monkeypatch.setattr(fcntl, "flock", real)
        path.unlink()  # as the last holder does, between another's opening and locking
        real(descriptor, operation)

    monkeypatch.setattr(fcntl, "flock", late)
    with hold(path, fleeting=True), pytest.raises(ArchiveBusy), hold(path, fleeting=True):
        pass


def test_of_many_threads_one_holds_though_the_file_comes_and_goes(tmp_path: Path) -> None:
    inside: list[int] = []
    most: list[int] = []

    def work(number: int) -> None:
        for _ in range(40):
            with hold(tmp_path / "held", 60.0, fleeting=True):
                inside.append(number)
                most.append(len(inside))
                time.sleep(0)
                inside.remove(number)

    with ThreadPoolExecutor(4) as pool:
        list(pool.map(work, range(4)))
    assert len(most) == 160
    assert max(most) == 1
    assert not (tmp_path / "held").exists()
