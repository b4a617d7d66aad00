"""A Prefect server on loopback for tests, what it keeps, and the command in a process of its own."""

from __future__ import annotations

import json
import os
import socket
import subprocess
import sys
import time
import urllib.error
import urllib.request
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from tests.flows.conftest import ROOT

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from pathlib import Path

START_SECONDS = 120.0
_BUSY = 503  # its database is locked; clients of Prefect ask again
ENDS = {"COMPLETED", "FAILED", "CRASHED", "CANCELLED"}
COMMAND = (sys.executable, "-c", "import sys; from flows.cli import main; sys.exit(main(sys.argv[1:]))")


def environment(home: Path, **more: str) -> dict[str, str]:
    """Return an environment in which Prefect keeps everything below ``home``."""
    kept = {
        name: value for name, value in os.environ.items() if not name.startswith(("PREFECT_", "SEAWHENCE_"))
    }
    kept.pop("DO_NOT_TRACK", None)  # that nobody is called is for the command to see to
    return {**kept, "PREFECT_HOME": str(home), "PYTHONPATH": str(ROOT), **more}


@contextmanager
def started(
    arguments: list[str], env: dict[str, str], log: Path, cwd: Path = ROOT
) -> Iterator[subprocess.Popen[bytes]]:
    """Have a process run in a group of its own; it is stopped, and what it wrote is in ``log``."""
    with log.open("wb") as out:
        process = subprocess.Popen(
            arguments,
            stdout=out,
            stderr=out,
            env=env,
            cwd=cwd,
            start_new_session=True,
            stdin=subprocess.DEVNULL,
        )
        try:
            yield process
        finally:
            if process.poll() is None:
                process.terminate()
            try:
                process.wait(timeout=40)
            except subprocess.TimeoutExpired:
                process.kill()
                process.wait()
                raise


class Server:
    """What a Prefect server knows, through its interface."""

    def __init__(self, address: str) -> None:
        self.address = address

    def ask(self, path: str, data: object = None, *, post: bool = True) -> Any:
        """Return the answer to a request."""
        body = json.dumps(data if data is not None else {}).encode() if post else None
        request = urllib.request.Request(  # noqa: S310 - loopback
            f"{self.address}{path}", data=body, headers={"Content-Type": "application/json"}
        )
        for _ in range(20):
            try:
                with urllib.request.urlopen(request, timeout=20) as answer:  # noqa: S310
                    return json.loads(answer.read() or b"null")
            except urllib.error.HTTPError as error:
                if error.code != _BUSY:
                    raise
                error.close()
                time.sleep(0.5)
        raise AssertionError("the server was busy for ten seconds")

    def begin(self, deployment: dict[str, Any]) -> str:
        """Ask for a run now; return its number."""
        run = self.ask(f"/deployments/{deployment['id']}/create_flow_run", {"state": {"type": "SCHEDULED"}})
        return str(run["id"])

    def run(self, number: str) -> dict[str, Any]:
        """Return a flow run."""
        return dict(self.ask(f"/flow_runs/{number}", post=False))

    def end_of(self, number: str, seconds: float = 240.0) -> dict[str, Any]:
        """Wait for the end of a flow run."""
        ended: dict[str, Any] = wait_for(
            lambda: run if (run := self.run(number))["state_type"] in ENDS else None, seconds
        )
        return ended

    def artifacts(self, number: str) -> dict[str, str]:
        """Return the artifacts of a flow run by their key."""
        found = self.ask("/artifacts/filter", {"artifacts": {"flow_run_id": {"any_": [number]}}})
        return {artifact["key"]: artifact["data"] for artifact in found}


def wait_for(look: Callable[[], Any], seconds: float = 120.0) -> Any:
    """Return what ``look`` finds, as soon as it finds anything."""
    until = time.monotonic() + seconds
    while not (found := look()):
        assert time.monotonic() < until, "waited in vain"
        time.sleep(0.1)
    return found


@contextmanager
def prefect_server(home: Path, **more: str) -> Iterator[Server]:
    """Start a Prefect server on loopback, and stop it."""
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    home.mkdir(parents=True, exist_ok=True)
    arguments = [
        sys.executable,
        "-m",
        "prefect",
        "server",
        "start",
        "--host",
        "127.0.0.1",
        "--port",
        str(port),
    ]
    env = environment(home, PREFECT_SERVER_ANALYTICS_ENABLED="false", DO_NOT_TRACK="1", **more)
    with started(arguments, env, home / "server.log") as process:
        server = Server(f"http://127.0.0.1:{port}/api")

        def answers() -> bool:
            assert process.poll() is None, (home / "server.log").read_text()
            try:
                return bool(server.ask("/health", post=False))
            except OSError:
                return False

        wait_for(answers, START_SECONDS)
        yield server
