"""Several cruises at once, each in a process apart: how many, and what hands them out."""

from __future__ import annotations

import os
import threading
from concurrent.futures import ThreadPoolExecutor
from contextlib import closing
from functools import partial
from typing import TYPE_CHECKING

from flows.apart import Apart
from flows.retrying import make_with_retries
from flows.stopping import stoppable

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator, Sequence

    from flows.plan import Job
    from flows.records import CruiseRecord
    from flows.work import RunConfig

    Progress = Callable[[Iterable[Job]], Iterable[Job]]

# Delivered bytes for each process: about fifty cruises, or four seconds, where starting one takes one.
_WORTH_A_PROCESS = 20_000_000
_MEMORY = 1_000_000_000  # bytes that a process may take; one that makes usual cruises takes a third of it
_SHARE_OF_MEMORY = 0.5  # of the machine's


def usual_workers(jobs: Sequence[Job]) -> int:
    """Return how many processes make cruises at once: as cores, memory and the work to be done allow."""
    worth = sum(job.size for job in jobs) // _WORTH_A_PROCESS
    memory = os.sysconf("SC_PHYS_PAGES") * os.sysconf("SC_PAGE_SIZE")
    return int(max(1, min(_cores(), worth, memory * _SHARE_OF_MEMORY // _MEMORY)))


def make_at_once(
    jobs: Sequence[Job], config: RunConfig, workers: int, progress: Progress, tell: Callable[[str], None]
) -> list[CruiseRecord]:
    """Make cruises, some at once; a process that is killed costs its cruise and no other.

    Parameters
    ----------
    jobs, config
        The cruises, and what they share.
    workers
        How many processes make them; each takes the next cruise when it has done one.
    progress
        Wraps the jobs, to show how far the run is.
    tell
        Is told of every wait for a fault that may pass.

    """
    stopped = threading.Event()
    settings = config.settings.run
    with stoppable(), ThreadPoolExecutor(workers) as threads, closing(Apart()) as apart:
        make = partial(apart.make, config=config, seconds=settings.cruise_seconds)
        queue = _Queue(progress(jobs), stopped)
        parts = [
            threads.submit(make_with_retries, queue, make, settings.waits, tell, stopped.wait)
            for _ in range(workers)
        ]
        try:
            return [record for part in parts for record in part.result()]
        finally:
            stopped.set()  # an interrupt: no thread begins another cruise, or waits


class _Queue:
    """The jobs for several threads, each given out once; none once the run was stopped."""

    def __init__(self, jobs: Iterable[Job], stopped: threading.Event) -> None:
        self._jobs = iter(jobs)
        self._stopped = stopped
        self._guard = threading.Lock()

    def __iter__(self) -> Iterator[Job]:
        return self

    def __next__(self) -> Job:
        with self._guard:
            if self._stopped.is_set():
                raise StopIteration
            return next(self._jobs)


def _cores() -> int:
    """Return the cores that this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
