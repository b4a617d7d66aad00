"""The flow under Prefect, with its embedded server and with a real one on loopback: the same bytes as without."""

from __future__ import annotations

import json
import os
import socket
import subprocess
import sys
import time
import urllib.request
from typing import TYPE_CHECKING

import pytest

from tests.flows.conftest import FIXTURES, ROOT, Outcome, hashes

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

START_SECONDS = 120.0


def environment(home: Path, **more: str) -> dict[str, str]:
    """Return an environment in which Prefect keeps everything below ``home``."""
    kept = {name: value for name, value in os.environ.items() if not name.startswith("PREFECT_")}
    return {
        **kept,
        "PREFECT_HOME": str(home),
        "PREFECT_SERVER_ANALYTICS_ENABLED": "false",
        "DO_NOT_TRACK": "1",
        **more,
    }


def run_flow(archive: Path, env: dict[str, str], *more: str) -> subprocess.CompletedProcess[str]:
    """Run the command over the invented cruises in a process of its own."""
    code = "import sys; from flows.cli import main; sys.exit(main(sys.argv[1:]))"
    arguments = ["run", str(FIXTURES / "inbox"), "--archive", str(archive), "--sources"]
    return subprocess.run(
        [sys.executable, "-c", code, *arguments, str(FIXTURES / "sources.toml"), *more],
        capture_output=True, text=True, check=False, cwd=ROOT, env=env, timeout=300,
    )  # fmt: skip


def test_the_embedded_server_needs_no_set_up(tmp_path: Path, demonstration: tuple[Path, Outcome]) -> None:
    archive, direct = demonstration
    done = run_flow(tmp_path / "archive", environment(tmp_path / "prefect"), "--flow")
    assert done.returncode == 0, done.stderr
    assert done.stdout.splitlines()[:-1] == direct.out.splitlines()[:-1]
    assert "Traceback" not in done.stderr
    assert hashes(tmp_path / "archive") == hashes(archive)


@pytest.fixture
def server(tmp_path: Path) -> Iterator[str]:
    """Start a Prefect server on loopback and return the address of its interface."""
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    log = (tmp_path / "server.log").open("wb")
    process = subprocess.Popen(
        [sys.executable, "-m", "prefect", "server", "start", "--host", "127.0.0.1", "--port", str(port)],
        stdout=log, stderr=log, env=environment(tmp_path / "server"),
    )  # fmt: skip
    address = f"http://127.0.0.1:{port}/api"
    try:
        _wait_until_healthy(address, process)
        yield address
    finally:
        process.terminate()
        process.wait(timeout=30)
        log.close()


def _wait_until_healthy(address: str, process: subprocess.Popen[bytes]) -> None:
    until = time.monotonic() + START_SECONDS
    while time.monotonic() < until:
        assert process.poll() is None, "the server ended at once"
        try:
            with urllib.request.urlopen(f"{address}/health", timeout=2) as answer:  # noqa: S310 - loopback
                if answer.status == 200:
                    return
        except OSError:
            time.sleep(0.2)
    pytest.fail("the Prefect server did not start")


def test_a_configured_server_is_used_and_keeps_the_summary(
    server: str, tmp_path: Path, demonstration: tuple[Path, Outcome]
) -> None:
    done = run_flow(tmp_path / "archive", environment(tmp_path / "client", PREFECT_API_URL=server))
    assert done.returncode == 0, done.stderr
    assert hashes(tmp_path / "archive") == hashes(demonstration[0])
    (flow_run,) = _ask(f"{server}/flow_runs/filter")
    assert flow_run["state_name"] == "Completed"
    (artifact,) = _ask(f"{server}/artifacts/filter")
    assert [row["cruise"] for row in json.loads(artifact["data"])][:2] == ["ZZV120090306", "ZZV220210218"]


def _ask(address: str) -> list[dict[str, str]]:
    request = urllib.request.Request(  # noqa: S310 - loopback
        address, data=b"{}", headers={"Content-Type": "application/json"}
    )
    with urllib.request.urlopen(request, timeout=10) as answer:  # noqa: S310
        rows: list[dict[str, str]] = json.loads(answer.read())
    return rows
