"""Runs that are killed at a moment, and what must hold then: for the test of a few and the command for many."""

from __future__ import annotations

import json
import os
import random
import shutil
import signal
import subprocess
import sys
import time
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING

from pipeline.archive import Disk
from tests.archive.invented import assert_promise
from tests.flows.conftest import ROOT, call, hashes
from tests.flows.prefect_server import COMMAND, environment
from tests.invented import bottle_file, cast_file, zipped

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

KNOWN = ("ZZV120090214", "ZZV220210301", "ZZV320140610")
NEW = ("ZZV420110203", "ZZV520160101")

# Has loaded the command once; a line of JSON is the arguments of a run, made in a child that can be killed.
FORKER = """
import json, os, signal, sys
from flows.cli import main
import flows.running
while line := sys.stdin.readline():
    child = os.fork()
    if not child:
        os.dup2(os.open(os.devnull, os.O_WRONLY), 1)
        os._exit(main(json.loads(line)))
    wish = sys.stdin.readline()
    if wish == "kill\\n":
        os.kill(child, signal.SIGKILL)
    print(os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]), flush=True)
"""


@dataclass(frozen=True)
class Scene:
    """An archive, an inbox with new revisions and new cruises, and the files of an undisturbed run over it."""

    start: Path
    inbox: Path
    wanted: dict[str, str]

    def copy(self) -> Path:
        """Return a fresh copy of the archive."""
        work = self.start.parent / "work"
        shutil.rmtree(work, ignore_errors=True)
        shutil.copytree(self.start, work)
        return work

    def arguments(self, archive: Path) -> list[str]:
        """Return the run's arguments."""
        return ["run", str(self.inbox), "--archive", str(archive)]

    def assert_whole(self, archive: Path) -> None:
        """Every published table opens, no cruise mixes two revisions, and the first is there."""
        for expocode in (*KNOWN, *NEW):
            assert_promise(Disk(archive), expocode, [1] if expocode in KNOWN else [])


def make_scene(place: Path) -> Scene:
    """Return the scene, made below ``place``."""
    inbox, start = place / "inbox", place / "start"
    inbox.mkdir()
    for number, expocode in enumerate(KNOWN):
        (inbox / f"{number}_hy1.csv").write_bytes(bottle_file(*_rows(expocode, "30.00")))
    assert call("run", inbox, "--archive", start).status == 0
    for number, expocode in enumerate((*KNOWN, *NEW)):
        (inbox / f"{number}_hy1.csv").write_bytes(bottle_file(*_rows(expocode, "31.00")))
    cast = cast_file(header={"EXPOCODE": NEW[0], "DATE": NEW[0][4:]})
    (inbox / "casts_ct1.zip").write_bytes(zipped({"a_ct1.csv": cast}))
    shutil.copytree(start, place / "undisturbed")
    scene = Scene(start, inbox, {})
    assert call(*scene.arguments(place / "undisturbed")).status == 0
    return Scene(start, inbox, hashes(place / "undisturbed"))


def _rows(expocode: str, nitrate: str) -> list[dict[str, str]]:
    return [
        {"EXPOCODE": expocode, "DATE": expocode[4:], "STNNBR": str(n), "NITRAT": nitrate}
        for n in range(1, 40)
    ]


class Forker:
    """Begins runs without the second that loading takes."""

    def __init__(self, process: subprocess.Popen[str]) -> None:
        assert process.stdin
        assert process.stdout
        self._in, self._out = process.stdin, process.stdout

    def begin(self, arguments: list[str]) -> None:
        """Begin a run."""
        self._say(json.dumps(arguments))

    def end(self) -> int:
        """Wait for its end; return its status."""
        return self._say_and_hear("wait")

    def kill(self) -> int:
        """Kill it, if it has not ended; return its status."""
        return self._say_and_hear("kill")

    def _say(self, word: str) -> None:
        self._in.write(f"{word}\n")
        self._in.flush()

    def _say_and_hear(self, word: str) -> int:
        self._say(word)
        return int(self._out.readline())


@contextmanager
def forker() -> Iterator[Forker]:
    """Have the process that begins runs."""
    with subprocess.Popen(
        [sys.executable, "-W", "ignore", "-c", FORKER],
        stdin=subprocess.PIPE, stdout=subprocess.PIPE, cwd=ROOT, text=True,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
    ) as process:  # fmt: skip
        yield Forker(process)


def kill_direct_runs(scene: Scene, count: int, seed: int) -> int:
    """Kill as many runs, some of them twice; return how many had not ended by then.

    Raises
    ------
    AssertionError
        If an archive is not whole after a kill, or not as after an undisturbed run after the next run.

    """
    moments = random.Random(seed)  # noqa: S311 - moments, not secrets
    killed = 0
    with forker() as runs:
        longest = 1.05 * min(_seconds(runs, scene) for _ in range(3))
        for number in range(count):
            archive = scene.copy()
            for _ in range(1 + (number % 5 == 0)):
                runs.begin(scene.arguments(archive))
                time.sleep(moments.uniform(0.0, longest))
                killed += runs.kill() == -signal.SIGKILL
                scene.assert_whole(archive)
            runs.begin(scene.arguments(archive))
            assert runs.end() == 0
            assert hashes(archive) == scene.wanted
    return killed


def _seconds(runs: Forker, scene: Scene) -> float:
    """Return how long an undisturbed run takes."""
    archive = scene.copy()
    began = time.monotonic()
    runs.begin(scene.arguments(archive))
    assert runs.end() == 0
    return time.monotonic() - began


def kill_flow_runs(scene: Scene, count: int, seed: int, server: str) -> int:
    """Do the same to as many runs as Prefect flows against a server; the next run is a direct one."""
    moments = random.Random(seed)  # noqa: S311
    killed = 0
    env = environment(scene.start.parent / "client", PREFECT_API_URL=server)
    for _ in range(count):
        archive = scene.copy()
        with subprocess.Popen(
            [*COMMAND, *scene.arguments(archive)], env=env, cwd=ROOT, stdout=subprocess.DEVNULL
        ) as run:
            while run.poll() is None and not (archive / ".lock").stat().st_size:
                time.sleep(0.005)  # until it holds the archive
            time.sleep(moments.uniform(0.0, 1.6))
            run.kill()
        killed += run.returncode == -signal.SIGKILL
        scene.assert_whole(archive)
        assert call(*scene.arguments(archive)).status == 0
        assert hashes(archive) == scene.wanted
    return killed
