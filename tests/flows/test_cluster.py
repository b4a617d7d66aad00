"""Runs on a Dask cluster: a real scheduler and two worker processes on loopback, one of which is killed on the way."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from contextlib import ExitStack, contextmanager
from typing import TYPE_CHECKING

import pytest

from flows import cluster
from flows.cli import main
from flows.cluster import require_reachable_server, use_cluster
from pipeline.problems import UsageProblem
from tests.flows.conftest import ROOT, call, hashes
from tests.flows.prefect_server import environment
from tests.invented import bottle_file, cast_file, zipped

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

CRUISES = 8
START_SECONDS = 60.0
# Every cruise a batch of its own, so that there is something left to do when the worker is killed.
CODE = """
import sys
import flows.plan as plan
packed = plan.pack
plan.pack = lambda jobs, most, least: packed(jobs, most, 1)
from flows.cli import main
sys.exit(main(sys.argv[1:]))
"""


@contextmanager
def process(log: Path, module: str, *arguments: str, home: Path) -> Iterator[subprocess.Popen[bytes]]:
    with log.open("wb") as out:
        started = subprocess.Popen(
            [sys.executable, "-m", module, *arguments],
            stdout=out, stderr=out, cwd=ROOT, env={**environment(home), "PYTHONPATH": str(ROOT)},
        )  # fmt: skip
    try:
        yield started
    finally:
        started.kill()  # asked to end, a worker first tries to report to a Prefect server that has gone
        started.wait(timeout=30)


@pytest.fixture
def scheduler(tmp_path: Path) -> Iterator[tuple[str, list[int]]]:
    """The address of a scheduler, and the process ids of its two workers."""
    home = tmp_path / "prefect"
    with ExitStack() as stack:
        stack.enter_context(
            process(
                tmp_path / "scheduler",
                "distributed.cli.dask_scheduler",
                "--host",
                "127.0.0.1",
                "--port",
                "0",
                "--no-dashboard",
                home=home,
            )
        )
        address = _wait_for(tmp_path / "scheduler", "Scheduler at:")
        workers = [
            stack.enter_context(
                process(
                    tmp_path / f"worker-{number}",
                    "distributed.cli.dask_worker",
                    address,
                    "--no-nanny",
                    "--nthreads",
                    "1",
                    "--no-dashboard",
                    "--host",
                    "127.0.0.1",
                    home=home,
                )
            )
            for number in range(2)
        ]
        for number in range(2):
            _wait_for(tmp_path / f"worker-{number}", "Registered to:")
        yield address, [worker.pid for worker in workers]


def _wait_for(log: Path, words: str) -> str:
    until = time.monotonic() + START_SECONDS
    while time.monotonic() < until:
        for line in log.read_text().splitlines():
            if words in line:
                return line.split()[-1]
        time.sleep(0.05)
    raise AssertionError(log.read_text())


@pytest.fixture
def inbox(tmp_path: Path) -> Path:
    folder = tmp_path / "inbox"
    folder.mkdir()
    for number in range(CRUISES):
        code = f"ZZV{number:02d}090214"[:12].ljust(12, "0")
        rows = [{"EXPOCODE": code, "CTDPRS": f"{10.0 * level:.1f}"} for level in range(1, 60)]
        (folder / f"{number:02d}_hy1.csv").write_bytes(bottle_file(*rows))
        casts = {f"{n}_ct1.csv": cast_file(header={"EXPOCODE": code, "STNNBR": str(n)}) for n in range(10)}
        (folder / f"{number:02d}_ct1.zip").write_bytes(zipped(casts))
    return folder


def test_a_worker_that_is_killed_costs_nothing_but_time(
    tmp_path: Path, scheduler: tuple[str, list[int]], inbox: Path
) -> None:
    address, workers = scheduler
    direct, archive = tmp_path / "direct", tmp_path / "archive"
    said = call("run", inbox, "--archive", direct)
    with (tmp_path / "out").open("wb") as out, (tmp_path / "err").open("wb") as err:
        run = subprocess.Popen(
            [sys.executable, "-c", CODE, "run", str(inbox), "--archive", str(archive), "--cluster", address],
            stdout=out, stderr=err, cwd=ROOT, env=environment(tmp_path / "prefect"),
        )  # fmt: skip
    try:
        published = archive / "rejects"
        while not published.is_dir() or len(list(published.iterdir())) < 2:
            assert run.poll() is None, (tmp_path / "err").read_text()
            time.sleep(0.01)
        os.kill(workers[0], signal.SIGKILL)
        done = len(list(published.iterdir()))
        assert run.wait(timeout=300) == 0, (tmp_path / "err").read_text()
    finally:
        if run.poll() is None:
            run.kill()
            run.wait()
    assert done < CRUISES
    lines = (tmp_path / "out").read_text().splitlines()
    assert lines[:-1] == said.out.splitlines()[:-1]
    assert hashes(archive) == hashes(direct)


@pytest.mark.parametrize(
    "wrong", ["scheduler:8786", "http://scheduler:8786", "tcp://scheduler", "tcp://scheduler:x"]
)
def test_what_is_no_address_is_refused(wrong: str) -> None:
    with pytest.raises(
        UsageProblem, match="expected the address of a Dask scheduler, such as tcp://scheduler:8786"
    ):
        use_cluster(wrong)


def test_a_scheduler_that_does_not_answer_is_told(tmp_path: Path) -> None:
    (tmp_path / "inbox").mkdir()
    done = call("run", tmp_path / "inbox", "--archive", tmp_path / "a", "--cluster", "tcp://127.0.0.1:9")
    assert done.status == 2
    assert done.err == (
        "seawhence: --cluster: no Dask scheduler answers at tcp://127.0.0.1:9 (Connection refused); start it, or"
        " correct the address.\n"
    )
    assert not (tmp_path / "a").exists()


def test_workers_elsewhere_need_a_server_that_they_can_reach(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv(cluster.ADDRESS, "tcp://scheduler.ship:8786")
    require_reachable_server(is_configured=True)
    with pytest.raises(
        UsageProblem, match="set PREFECT_API_URL to the address of its interface, here and for the work"
    ):
        require_reachable_server(is_configured=False)
    monkeypatch.setenv(cluster.ADDRESS, "tcp://127.0.0.1:8786")
    require_reachable_server(is_configured=False)


def test_what_is_not_installed_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("importlib.util.find_spec", lambda _name: None)
    with pytest.raises(
        UsageProblem, match=r"install what a cluster needs: pip install 'seawhence\[cluster\]'"
    ):
        cluster.runner_on("tcp://127.0.0.1:8786")


def test_nothing_of_dask_is_loaded_unless_it_is_asked_for() -> None:
    code = (
        "import sys, flows.cli, flows.running, flows.serving, flows.nightly\n"
        "assert not [m for m in sys.modules if m.split('.')[0] in ('dask', 'distributed', 'prefect_dask')]"
    )
    env = {name: value for name, value in os.environ.items() if name != cluster.ADDRESS}
    subprocess.run([sys.executable, "-c", code], check=True, cwd=ROOT, env=env)
    assert main is not None
