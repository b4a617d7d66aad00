"""A run by hand as a Prefect flow: the same bytes as without, nobody called, and stopped by an interrupt."""

from __future__ import annotations

import contextlib
import os
import signal
import subprocess
import time
from pathlib import Path

import pytest

from tests.flows.conftest import FIXTURES, ROOT, Outcome, call, hashes
from tests.flows.prefect_server import COMMAND, environment, started, wait_for

# Written beside the tests' own files and found by every Python process that is started: what it connects to, listens
# on and looks up.
LISTENER = """
import os, sys
def _listen(event, arguments):
    if event in ("socket.connect", "socket.bind", "socket.sendto"):
        where = arguments[1]
    elif event == "socket.getaddrinfo":
        where = arguments[0]
    else:
        return
    name = where[0] if isinstance(where, tuple) else where
    with open(os.environ["LISTENER_FILE"], "a") as file:
        file.write(f"{event} {name!r}\\n")
sys.addaudithook(_listen)
"""


def run_flow(archive: Path, env: dict[str, str], *more: str) -> subprocess.CompletedProcess[str]:
    """Run the command over the invented cruises in a process of its own."""
    arguments = ["run", str(FIXTURES / "inbox"), "--archive", str(archive), "--sources"]
    return subprocess.run(
        [*COMMAND, *arguments, str(FIXTURES / "sources.toml"), *more],
        capture_output=True, text=True, check=False, cwd=ROOT, env=env, timeout=300,
    )  # fmt: skip


@pytest.fixture(scope="module")
def home(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a directory for Prefect, in which its server has run once."""
    return tmp_path_factory.mktemp("prefect")


def servers(home: Path) -> list[str]:
    """Return the processes that work with a directory of Prefect."""
    found = []
    for process in Path("/proc").glob("[0-9]*"):
        with contextlib.suppress(OSError):  # it has ended meanwhile
            if f"PREFECT_HOME={home}\0".encode() in (process / "environ").read_bytes():
                found.append(process.name)
    return found


def test_it_needs_no_set_up_gives_the_same_bytes_and_calls_nobody(
    home: Path, tmp_path: Path, demonstration: tuple[Path, Outcome]
) -> None:
    archive, direct = demonstration
    (tmp_path / "sitecustomize.py").write_text(LISTENER, encoding="utf-8")
    env = environment(home, LISTENER_FILE=str(tmp_path / "heard"))
    env["PYTHONPATH"] = f"{tmp_path}{os.pathsep}{ROOT}"
    done = run_flow(tmp_path / "archive", env, "--flow")
    assert done.returncode == 0, done.stderr
    assert done.stdout.splitlines()[:-1] == direct.out.splitlines()[:-1]
    assert done.stderr == ""
    assert hashes(tmp_path / "archive") == hashes(archive)
    assert servers(home) == []
    heard = set((tmp_path / "heard").read_text(encoding="utf-8").splitlines())
    assert "socket.bind '127.0.0.1'" in heard
    assert "socket.connect '127.0.0.1'" in heard
    allowed = {"'127.0.0.1'", "b'127.0.0.1'", "'localhost'", "''", "None"}
    assert {line for line in heard if line.split(" ", 1)[1] not in allowed} == set()
    assert "socket.bind ''" not in heard, "everywhere"


def test_an_interrupt_stops_it_within_seconds_and_nothing_is_left(
    home: Path, tmp_path: Path, demonstration: tuple[Path, Outcome]
) -> None:
    archive = tmp_path / "archive"
    arguments = ["run", str(FIXTURES / "inbox"), "--archive", str(archive), "--sources"]
    arguments.append(str(FIXTURES / "sources.toml"))
    with started([*COMMAND, *arguments, "--flow"], environment(home), tmp_path / "log") as run:
        wait_for(lambda: list(archive.glob("raw/*/*")), 120.0)  # the first cruise is being made
        began = time.monotonic()
        os.killpg(run.pid, signal.SIGINT)  # as a terminal does, to all that it started
        assert run.wait(timeout=60) == 130
        assert time.monotonic() - began < 20.0
    said = (tmp_path / "log").read_text(encoding="utf-8")
    assert (
        "seawhence: stopped; the archive is whole, and the next run goes on from here." in said.splitlines()
    )
    assert "Traceback" not in said
    assert servers(home) == []
    assert call(*arguments).status == 0
    assert hashes(archive) == hashes(demonstration[0])
