"""Whole runs with inbox and archive in a bucket, on a real server of the protocol on loopback."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
import uuid
from typing import TYPE_CHECKING

import pytest

from pipeline.archive import lease
from tests.archive.objects import BUCKET, contents, direct, environment, name_server, served, spoiled
from tests.flows.conftest import FIXTURES, ROOT, call, hashes
from tests.invented import EXPOCODE, bottle_file, cast_file, zipped

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    from tests.flows.conftest import Outcome

SOURCES = FIXTURES / "sources.toml"


@pytest.fixture(scope="module")
def server(tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    with served(tmp_path_factory.mktemp("storage") / "log") as address:
        yield address


@pytest.fixture
def place(server: str, monkeypatch: pytest.MonkeyPatch) -> str:
    """A place that no other test uses, on the server that the environment names."""
    name_server(server, monkeypatch)
    return f"{BUCKET}/{uuid.uuid4().hex}"


def deliver(server: str, place: str, files: dict[str, bytes]) -> None:
    for key, data in files.items():
        with direct(server).open_output_stream(f"{place}/inbox/{key}") as sink:
            sink.write(data)


def run(place: str, *more: str | Path) -> Outcome:
    return call("run", f"s3://{place}/inbox", "--archive", f"s3://{place}/archive", *more)


CRUISE = {
    "a_hy1.csv": bottle_file({}, {"CTDPRS": "2000.0"}),
    "casts/a_ct1.zip": zipped({"one_ct1.csv": cast_file(), "two_ct1.csv": cast_file(header={"STNNBR": "2"})}),
}
OTHER = {"b_hy1.csv": bottle_file({"EXPOCODE": "ZZV320140610"}, {"EXPOCODE": "ZZV320140610", "NITRAT": "x"})}


def test_the_invented_cruises_give_the_bytes_that_a_disk_has_and_once_more_nothing(
    server: str, place: str, demonstration: tuple[Path, Outcome]
) -> None:
    deliver(server, place, {p.relative_to(FIXTURES / "inbox").as_posix(): p.read_bytes()
                            for p in (FIXTURES / "inbox").rglob("*") if p.is_file()})  # fmt: skip
    done = run(place, "--sources", SOURCES)
    archive, direct_run = demonstration
    assert (done.status, done.err) == (0, "")
    assert done.out.splitlines()[:-1] == direct_run.out.splitlines()[:-1]
    assert done.out.splitlines()[-1].endswith(f"The tables are in s3://{place}/archive.")
    made = contents(server, f"{place}/archive")
    assert sorted(made) == sorted(hashes(archive))
    assert made == {key: (archive / key).read_bytes() for key in made}
    again = run(place)
    assert again.status == 0
    assert again.out.splitlines()[-1] == f"Nothing was new. The tables are in s3://{place}/archive."
    assert contents(server, f"{place}/archive") == made
    shown = call("show", f"s3://{place}/archive", "ZZV120090306", "--verify")
    assert shown.status == 0
    assert "verified: 4 kept files hashed" in shown.out


def test_a_reissue_is_the_next_revision_and_what_changed_is_told(
    server: str, place: str, tmp_path: Path
) -> None:
    deliver(server, place, CRUISE)
    assert run(place).out.startswith(f"{EXPOCODE}  new, revision 1: 6 rows in, 6 kept")
    deliver(server, place, {"a_hy1.csv": bottle_file({"NITRAT": "31.00"}, {"CTDPRS": "2000.0"})})
    assert run(place).out.startswith(f"{EXPOCODE}  revised, revision 2: 6 rows in, 6 kept")
    changed = call("changes", f"s3://{place}/archive", EXPOCODE, "--out", tmp_path / "changes.parquet")
    assert changed.status == 0
    assert "nitrate" in changed.out
    assert (tmp_path / "changes.parquet").is_file()
    assert any("r0001" in key for key in contents(server, f"{place}/archive"))


def test_an_emptied_inbox_leaves_the_archive_and_its_kept_files_are_used(server: str, place: str) -> None:
    deliver(server, place, CRUISE)
    run(place)
    made = contents(server, f"{place}/archive")
    direct(server).delete_dir_contents(f"{place}/inbox")
    assert run(place).status == 0
    assert contents(server, f"{place}/archive") == made
    deliver(server, place, {"a_hy1.csv": bottle_file({"NITRAT": "31.00"}, {"CTDPRS": "2000.0"})})
    assert run(place).out.startswith(f"{EXPOCODE}  revised, revision 2: 6 rows in, 6 kept")


def test_what_is_no_delivery_is_passed_over_and_what_is_no_cruise_refused(server: str, place: str) -> None:
    mapping = b'[cruise]\nstands = ["a_hy1.csv"]\n'
    deliver(server, place, {**CRUISE, ".hidden/x.csv": b"x", "cruise.toml": mapping, "song.txt": b"la la\n"})
    deliver(server, place, {f"old/{table}/x.parquet": b"x" for table in
                            ("samples", "casts", "mixtures", "findings", "rejects")})  # fmt: skip
    done = run(place)
    assert done.status == 1
    assert "song.txt" in done.out
    assert done.out.count("refused  ") == 1


def test_an_inbox_that_is_not_there_or_in_the_archive_is_refused(server: str, place: str) -> None:
    missing = run(place)
    assert missing.status == 2
    assert missing.err.startswith(
        f"seawhence: s3://{place}/inbox: there is nothing there; give the place of the"
    )
    deliver(server, place, CRUISE)
    inside = call("run", f"s3://{place}/inbox", "--archive", f"s3://{place}")
    assert inside.status == 2
    assert f"s3://{place}/inbox: the inbox lies in the archive s3://{place}" in inside.err


def start(place: str, address: str) -> subprocess.Popen[str]:
    """Start a run in a process of its own."""
    code = "import sys; from flows.cli import main; sys.exit(main(sys.argv[1:]))"
    return subprocess.Popen(
        [sys.executable, "-c", code, "run", f"s3://{place}/inbox", "--archive", f"s3://{place}/archive"],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, cwd=ROOT,
        env={**os.environ, **environment(address)},
    )  # fmt: skip


@pytest.mark.parametrize("fatal", [16, 32])
def test_a_run_that_is_killed_is_repaired_by_the_next(
    server: str, place: str, fatal: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Killed at its change number ``fatal``: while it keeps files, while it publishes."""
    deliver(server, place, CRUISE | OTHER)
    started: list[subprocess.Popen[str]] = []
    changes = 0

    def answer(_number: int, method: str, path: str) -> int | None:
        nonlocal changes
        changes += method in {"PUT", "POST", "DELETE"} and "/archive/" in path
        if changes < fatal:
            return None
        os.kill(started[0].pid, signal.SIGKILL)
        return 0

    with spoiled(server) as (address, faults):
        faults.answer = answer
        started.append(start(place, address))
        out, _ = started[0].communicate(timeout=60)
    assert started[0].returncode == -signal.SIGKILL, out
    refused = run(place)
    assert refused.status == 2
    assert f"s3://{place}/archive/.lock: held by process {started[0].pid} on " in refused.err
    monkeypatch.setattr(lease, "LAST", 0.5)
    time.sleep(1.1)
    assert run(place).status == 0
    made = contents(server, f"{place}/archive")
    undisturbed = f"{BUCKET}/{uuid.uuid4().hex}"
    deliver(server, undisturbed, CRUISE | OTHER)
    run(undisturbed)
    assert made == contents(server, f"{undisturbed}/archive")


def test_of_two_runs_at_once_the_second_is_refused(server: str, place: str) -> None:
    deliver(server, place, CRUISE)
    second: list[Outcome] = []

    def answer(_number: int, method: str, path: str) -> int | None:
        if method == "PUT" and path.endswith(".parquet") and not second:
            second.append(run(place))  # the first waits for its answer meanwhile
        return None

    with spoiled(server) as (address, faults):
        faults.answer = answer
        first = start(place, address)
        out, err = first.communicate(timeout=60)
    assert (first.returncode, err) == (0, "")
    assert f"{EXPOCODE}  new, revision 1" in out
    assert second[0].status == 2
    assert second[0].err.startswith(f"seawhence: s3://{place}/archive/.lock: held by process {first.pid} on ")
    assert (
        "wait for it to end, or end it, and run again: what is published can be read meanwhile."
        in second[0].err
    )


def test_storage_that_fails_now_and_then_makes_the_same_archive(
    server: str, place: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    deliver(server, place, CRUISE | OTHER)
    run(place)
    made = contents(server, f"{place}/archive")
    statuses = (500, 503, 0)
    with spoiled(server) as (address, faults):
        name_server(address, monkeypatch)
        faults.answer = lambda number, _method, _path: statuses[number // 9 % 3] if number % 9 == 0 else None
        done = call("run", f"s3://{place}/inbox", "--archive", f"s3://{place}/again")
        assert sum(status is not None for _, _, _, status in faults.seen) > 10
    assert done.status == 0, done
    assert contents(server, f"{place}/again") == made
