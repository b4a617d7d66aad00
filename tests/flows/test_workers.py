"""Several cruises at once: the same bytes, no cruise twice, and a killed process that costs its own cruise alone."""

from __future__ import annotations

import threading
from typing import TYPE_CHECKING

import pytest

from flows.apart import Apart
from flows.plan import InboxFile, Job
from flows.records import CruiseRecord, State
from flows.work import RunConfig
from flows.workers import make_at_once, usual_workers
from pipeline.settings import Settings
from tests.flows.conftest import call, hashes
from tests.invented import bottle_file

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator
    from pathlib import Path

EXPOCODES = [f"ZZV1200902{day}" for day in range(11, 16)]


@pytest.fixture
def inbox(tmp_path: Path) -> Path:
    folder = tmp_path / "inbox"
    folder.mkdir()
    for expocode in EXPOCODES:
        (folder / f"{expocode}_hy1.csv").write_bytes(
            bottle_file({"EXPOCODE": expocode}, {"EXPOCODE": expocode})
        )
    return folder


def job(expocode: str, size: int = 0) -> Job:
    return Job(expocode, (InboxFile(f"{expocode}_hy1.csv", "", size, ""),))


def test_the_bytes_are_the_same_for_any_number_of_workers(inbox: Path, tmp_path: Path) -> None:
    one, two = tmp_path / "one", tmp_path / "two"
    alone = call("run", inbox, "--archive", one, "--workers", "1")
    together = call("run", inbox, "--archive", two, "--workers", "2")
    assert (alone.status, together.status) == (0, 0)
    assert together.out == alone.out.replace(str(one), str(two))
    assert hashes(two) == hashes(one)


def test_a_killed_process_costs_its_cruise_and_no_other(
    inbox: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    made = Apart.make

    def make(self: Apart, job: Job, config: RunConfig, seconds: float | None = None) -> CruiseRecord:
        return made(self, job, config, 1e-6 if job.expocode == EXPOCODES[2] else seconds)

    monkeypatch.setattr(Apart, "make", make)
    archive = tmp_path / "archive"
    outcome = call("run", inbox, "--archive", archive, "--workers", "2")
    assert outcome.status == 3
    told = [line for line in outcome.out.splitlines() if "failed" in line]
    assert told[0].startswith(f"{EXPOCODES[2]}  failed: took longer than 1e-06 s; skipped")
    assert sorted(path.stem for path in (archive / "samples").iterdir()) == [
        code for code in EXPOCODES if code != EXPOCODES[2]
    ]


def test_every_cruise_is_made_once_and_by_as_many_as_said(monkeypatch: pytest.MonkeyPatch) -> None:
    begun, threads = [], set()
    both = threading.Barrier(2, timeout=30.0)

    def make(_: Apart, job: Job, **_shared: object) -> CruiseRecord:
        begun.append(job.expocode)
        threads.add(threading.get_ident())
        both.wait()  # until another is under way too
        return CruiseRecord(job.expocode, State.NEW)

    monkeypatch.setattr(Apart, "make", make)
    jobs = [job(f"ZZV12009{n:04d}") for n in range(40)]
    shown: list[str] = []

    def progress(jobs: Iterable[Job]) -> Iterator[Job]:
        for one in jobs:
            shown.append(one.expocode)
            yield one

    records = make_at_once(jobs, RunConfig("", Settings()), 2, progress, pytest.fail)
    assert sorted(begun) == sorted(shown) == sorted(record.expocode for record in records)
    assert len(begun) == 40
    assert len(threads) == 2


def test_an_interrupt_ends_the_run_before_another_cruise_is_begun(monkeypatch: pytest.MonkeyPatch) -> None:
    begun: list[str] = []

    def make(_: Apart, job: Job, **_shared: object) -> CruiseRecord:
        begun.append(job.expocode)
        raise KeyboardInterrupt

    monkeypatch.setattr(Apart, "make", make)
    with pytest.raises(KeyboardInterrupt):
        make_at_once(
            [job(f"ZZV12009{n:04d}") for n in range(1000)], RunConfig("", Settings()), 2, iter, pytest.fail
        )
    assert len(begun) <= 2


def test_processes_are_started_only_where_there_is_work_for_them() -> None:
    assert usual_workers([]) == 1
    assert usual_workers([job("ZZV120090211", 19_000_000)]) == 1
    assert usual_workers([job("ZZV120090211", 10**12)]) >= 1


@pytest.mark.parametrize("written", ["0", "-1", "two", "1.5", "1000"])
def test_a_number_of_workers_that_cannot_be_is_refused(inbox: Path, tmp_path: Path, written: str) -> None:
    outcome = call("run", inbox, "--archive", tmp_path / "archive", f"--workers={written}")
    assert outcome.status == 2
    assert f"found '{written}'; expected a whole number from 1 to 256" in outcome.err
