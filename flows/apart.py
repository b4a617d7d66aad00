"""Cruises made in processes apart: one that takes too long, or takes its process down, hurts no other.

A library's call cannot be stopped from within its process, and a fault in one ends the process; the archive
bears the kill at any moment. Run as a script this module is such a process: it makes the cruises that it is
sent, one at a time, and ends with the process that sent them, however that ends.
"""

from __future__ import annotations

import contextlib
import os
import queue
import signal
import subprocess
import sys
import threading
import time
from multiprocessing.connection import Connection, Pipe
from typing import TYPE_CHECKING

from flows.records import CruiseRecord, State

if TYPE_CHECKING:
    from flows.plan import Job
    from flows.work import RunConfig

_READY_SECONDS = 120.0  # for a process to start and load the rooms, on a busy machine


class _Hand:
    """One process, and the pipe to it."""

    def __init__(self) -> None:
        self._pipe, theirs = Pipe()
        self._process = subprocess.Popen(  # noqa: S603 - this module
            [sys.executable, "-m", "flows.apart", str(theirs.fileno())],
            stdin=subprocess.DEVNULL,
            pass_fds=[theirs.fileno()],
            env={**os.environ, "PYTHONPATH": os.pathsep.join(path for path in sys.path if path)},
            process_group=0,  # an interrupt from the terminal is for the run, which ends this in its own way
        )
        theirs.close()

    def make(self, job: Job, config: RunConfig, seconds: float | None) -> CruiseRecord | str:
        """Return the record of a cruise, or in words what became of the process."""
        try:
            if not self._pipe.poll(_READY_SECONDS):
                return "could not be started: its process did not answer"
            self._pipe.recv()
            self._pipe.send((job, config))
            if not self._pipe.poll(seconds):
                return f"took longer than {seconds:g} s"
            record: CruiseRecord = self._pipe.recv()
        except (EOFError, OSError):
            with contextlib.suppress(subprocess.TimeoutExpired):  # it is ending: how, only it can tell
                self._process.wait(5.0)
            return _how_it_ended(self.end())
        return record

    def kill(self) -> None:
        """Kill the process, with those that it started."""
        with contextlib.suppress(ProcessLookupError):
            if self._process.poll() is None:
                os.killpg(self._process.pid, signal.SIGKILL)

    def end(self) -> int:
        """Kill the process and return its status; for who makes a cruise in it, or when nobody does."""
        self.kill()
        self._pipe.close()
        return self._process.wait()


class Apart:
    """As many processes as are asked for a cruise at once; kept for the next one until ``close``."""

    def __init__(self) -> None:
        self._guard = threading.Lock()
        self._all: list[_Hand] = []
        self._idle: list[_Hand] = []
        self._ended = False

    def make(self, job: Job, config: RunConfig, seconds: float | None = None) -> CruiseRecord:
        """Make one cruise as ``run_job`` does; never raises.

        Parameters
        ----------
        job, config
            What ``run_job`` takes.
        seconds
            That it may take before its process is killed and it is skipped; None for no limit.

        """
        began = time.monotonic()
        try:
            hand = self._take()
        except OSError as error:
            return _skipped(job, f"could not be started: {error.strerror}", 0.0)
        if hand is None:
            return _skipped(job, "was not begun, because the run was stopped", 0.0)
        said = hand.make(job, config, seconds)
        with self._guard:
            if isinstance(said, CruiseRecord):
                self._idle.append(hand)
                return said
            self._all = [other for other in self._all if other is not hand]
            if self._ended:
                said = "was not finished, because the run was stopped"
        hand.end()
        return _skipped(job, said, time.monotonic() - began)

    def close(self) -> None:
        """Kill all processes; cruises under way are given up, and no more are begun."""
        with self._guard:
            self._ended = True
            busy = [hand for hand in self._all if hand not in self._idle]
            idle, self._all, self._idle = self._idle, [], []
        for hand in busy:
            hand.kill()  # who makes a cruise in it does the rest
        for hand in idle:
            hand.end()

    def _take(self) -> _Hand | None:
        with self._guard:
            if self._ended:
                return None
            if self._idle:
                return self._idle.pop()
            self._all.append(hand := _Hand())
            return hand


def _how_it_ended(status: int) -> str:
    if status < 0:
        name = signal.Signals(-status).name if -status in set(signal.Signals) else str(-status)
        memory = ", as the system does where memory runs out" if -status == signal.SIGKILL else ""
        return f"took its process down ({name}{memory})"
    return f"ended its process (status {status})"


def _skipped(job: Job, what: str, seconds: float) -> CruiseRecord:
    files = ", ".join(file.name for file in job.files)
    message = f"{what}; skipped, its files ({files}) can be looked at with 'seawhence check'."
    return CruiseRecord(job.expocode, State.FAILED, message=message, seconds=round(seconds, 3))


def _serve(pipe: Connection) -> None:
    """Make the cruises that come in until nobody is left who sends them."""
    from flows.work import run_job  # noqa: PLC0415 - what loads the rooms is the process, not who starts it

    jobs: queue.SimpleQueue[tuple[Job, RunConfig]] = queue.SimpleQueue()

    def listen() -> None:
        try:
            while True:
                jobs.put(pipe.recv())
        except (EOFError, OSError):
            os._exit(0)  # in the middle of a cruise too: who holds the archive has ended

    threading.Thread(target=listen, daemon=True).start()
    while True:
        pipe.send("ready")
        pipe.send(run_job(*jobs.get()))


if __name__ == "__main__":
    _serve(Connection(int(sys.argv[1])))
