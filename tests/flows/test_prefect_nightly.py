"""The scheduled run on a real Prefect server: served, deployed to a work pool, killed, and two at once."""

from __future__ import annotations

import json
import os
import signal
import sys
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

import pytest

from pipeline.archive import locked, open_archive
from tests.flows.conftest import FIXTURES, Outcome, call, hashes
from tests.flows.planted import ENDLESS, plant
from tests.flows.postgresql import postgresql
from tests.flows.prefect_server import COMMAND, Server, environment, prefect_server, started, wait_for
from tests.invented import EXPOCODE, bottle_file

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path


@pytest.fixture(scope="module")
def server(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Server]:
    with prefect_server(tmp_path_factory.mktemp("server")) as one:
        yield one


def env_of(server: Server, tmp_path: Path, **more: str) -> dict[str, str]:
    often = {"PREFECT_RUNNER_POLL_FREQUENCY": "1", "PREFECT_WORKER_QUERY_SECONDS": "1"}  # to wait for less
    return environment(tmp_path / "client", PREFECT_API_URL=server.address, **often, **more)


def words(log: Path) -> str:
    return log.read_text(encoding="utf-8")


def deployment(server: Server, archive: Path) -> dict[str, Any]:
    def look() -> list[dict[str, Any]]:
        found = server.ask("/deployments/filter")
        return [one for one in found if one["parameters"]["archive"] == str(archive)]

    (found,) = wait_for(look)
    return dict(found)


@contextmanager
def nightly(server: Server, tmp_path: Path, *arguments: str, **more: str) -> Iterator[Path]:
    """Serve until the end of the context; give the file of what is said."""
    log = tmp_path / "nightly.log"
    with started([*COMMAND, "nightly", *arguments], env_of(server, tmp_path, **more), log) as process:
        wait_for(lambda: "is brought up to date" in words(log) or process.poll() is not None)
        assert process.poll() is None, words(log)
        yield log
        process.send_signal(signal.SIGTERM)
        assert process.wait(timeout=40) == 0, words(log)


def test_deployed_to_a_work_pool_it_gives_the_same_bytes_and_keeps_its_summary(
    server: Server, tmp_path: Path, demonstration: tuple[Path, Outcome]
) -> None:
    archive = tmp_path / "archive"
    env = env_of(server, tmp_path)
    arguments = [
        "nightly",
        str(FIXTURES / "inbox"),
        "--archive",
        str(archive),
        "--at",
        "02:30",
        "--pool",
        "nights",
    ]
    arguments += ["--sources", str(FIXTURES / "sources.toml")]
    log = tmp_path / "deploy.log"
    with started([*COMMAND, *arguments], env, log) as refused:
        assert refused.wait(timeout=60) == 2
    assert "the server does not know a work pool 'nights'; make it with: prefect work-pool create" in words(
        log
    )
    server.ask("/work_pools/", {"name": "nights", "type": "process"})
    with started([*COMMAND, *arguments], env, log) as deploying:
        assert deploying.wait(timeout=60) == 0, words(log)
    assert "Deployed to the work pool 'nights' as 'seawhence/" in words(log)
    made = deployment(server, archive)
    assert made["schedules"][0]["schedule"] == {"cron": "30 2 * * *", "timezone": "UTC", "day_or": True}
    worker = [sys.executable, "-m", "prefect", "worker", "start", "--pool", "nights", "--type", "process"]
    with started(worker, env, tmp_path / "worker.log", cwd=tmp_path):
        run = server.end_of(server.begin(made))
    assert run["state_name"] == "Completed", words(tmp_path / "worker.log")
    assert run["state"]["message"] == f"6 cruises written. The tables are in {archive}."
    kept = server.artifacts(run["id"])
    assert [row["cruise"] for row in json.loads(kept["seawhence-run"])][:2] == [
        "ZZV120090306",
        "ZZV220210218",
    ]
    assert kept["seawhence-summary"].startswith("# 6 cruises written.")
    assert hashes(archive) == hashes(demonstration[0])


def test_served_it_is_scheduled_and_a_killed_run_is_shown_and_repaired(
    server: Server, tmp_path: Path, demonstration: tuple[Path, Outcome]
) -> None:
    archive, told = tmp_path / "archive", tmp_path / "told"
    tell = f"{sys.executable} -c \"import sys; open('{told}', 'a').write(sys.stdin.read() + chr(10))\""
    arguments = [
        str(FIXTURES / "inbox"),
        "--archive",
        str(archive),
        "--sources",
        str(FIXTURES / "sources.toml"),
    ]
    arguments += ["--at", "2:30", "--timezone", "Atlantic/Reykjavik", "--notify-command", tell]
    arguments += ["--summary", str(tmp_path / "summary.json")]
    with nightly(server, tmp_path, *arguments) as log:
        assert "every day at 2:30, Atlantic/Reykjavik" in words(log)
        made = deployment(server, archive)
        assert "told" not in json.dumps(made), "whom to notify may be a secret"
        (plan,) = made["schedules"]
        assert plan["schedule"] == {"cron": "30 2 * * *", "timezone": "Atlantic/Reykjavik", "day_or": True}
        assert made["concurrency_options"]["collision_strategy"] == "CANCEL_NEW"
        (automation,) = server.ask("/automations/filter")
        assert automation["trigger"]["within"] == 90
        number = server.begin(made)
        wait_for(lambda: list(archive.glob("raw/*/*")))  # the first cruise is being made
        os.kill(_holder(archive), signal.SIGKILL)
        assert server.end_of(number)["state_name"] == "Crashed"
        wait_for(told.exists)
        assert server.end_of(server.begin(made))["state_name"] == "Completed"
        wait_for(lambda: words(told).count("\n") == 2)
    crashed, done = (json.loads(line) for line in words(told).splitlines())
    assert crashed["exit_status"] == 3
    assert "the run's process ended before it was done" in crashed["problem"]
    assert (done["exit_status"], done["problem"]) == (0, None)
    written = json.loads((tmp_path / "summary.json").read_text(encoding="utf-8"))
    assert written.items() <= done.items()
    assert hashes(archive) == hashes(demonstration[0])


def _holder(archive: Path) -> int:
    """Return the process that holds an archive, as the lock file says."""
    return int((archive / ".lock").read_text(encoding="utf-8").split()[1])


def test_two_runs_at_once_a_busy_archive_and_a_cruise_that_never_ends(server: Server, tmp_path: Path) -> None:
    inbox, archive = tmp_path / "inbox", tmp_path / "archive"
    inbox.mkdir()
    (inbox / "a_hy1.csv").write_bytes(bottle_file())
    (inbox / "b_hy1.csv").write_bytes(bottle_file({"EXPOCODE": "ZZV320140610"}))
    env = {
        **plant(tmp_path / "planted"),
        "SEAWHENCE_RUN__LOCK_SECONDS": "8",
        "SEAWHENCE_RUN__CRUISE_SECONDS": "3",
    }
    with nightly(server, tmp_path, str(inbox), "--archive", str(archive), "--at", "02:30", **env):
        made = deployment(server, archive)
        with locked(open_archive(archive, create=True)):
            first = server.begin(made)
            wait_for(lambda: server.run(first)["state_name"] == "Running")
            second = server.end_of(server.begin(made))
            assert second["state_name"] == "Cancelled"
            assert "concurrency limit" in second["state"]["message"].lower()
            busy = server.end_of(first)
            assert busy["state_name"] == "Failed"
            assert f".lock: held by process {os.getpid()} on" in busy["state"]["message"]
        third = server.end_of(server.begin(made))
    assert third["state_name"] == "Failed"
    assert third["state"]["message"] == f"1 cruise written, 1 cruise failed. The tables are in {archive}."
    page = server.artifacts(third["id"])["seawhence-summary"].replace("\xa0", " ")
    assert f"{ENDLESS}  failed: took longer than 3 s; skipped" in page
    assert call("show", archive, "--verify").status == 0
    assert call("show", archive, "ZZV320140610").status == 0


def test_a_server_on_postgresql_keeps_the_run(tmp_path: Path) -> None:
    inbox, archive = tmp_path / "inbox", tmp_path / "archive"
    inbox.mkdir()
    (inbox / "a_hy1.csv").write_bytes(bottle_file())
    with (
        postgresql() as database,
        prefect_server(tmp_path / "server", PREFECT_SERVER_DATABASE_CONNECTION_URL=database) as server,
    ):
        arguments = ["nightly", str(inbox), "--archive", str(archive), "--once"]
        with started([*COMMAND, *arguments], env_of(server, tmp_path), tmp_path / "log") as once:
            assert once.wait(timeout=90) == 0, words(tmp_path / "log")
        (run,) = server.ask("/flow_runs/filter")
        assert (run["state_name"], run["state"]["message"]) == (
            "Completed", f"1 cruise written. The tables are in {archive}.",
        )  # fmt: skip
        assert "1 cruise written" in server.artifacts(run["id"])["seawhence-summary"]
    assert not list((tmp_path / "server").glob("*.db"))
    first, closing = words(tmp_path / "log").splitlines()
    assert first.startswith(f"{EXPOCODE}  new, revision 1: 1 row in, 1 kept")
    assert closing == f"1 cruise written. The tables are in {archive}."
