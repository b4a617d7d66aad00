"""A Prefect server of a run's own where the user has set none, and its settings; what the user has set stands.

To be called before Prefect is first imported: it reads the environment then.
"""

from __future__ import annotations

import atexit
import contextlib
import os
import socket
import subprocess
import sys
import time
import urllib.error
import urllib.request
from pathlib import Path
from typing import IO

from pipeline.problems import UsageProblem

_ALWAYS = {
    # Nobody is called.
    "PREFECT_SERVER_ANALYTICS_ENABLED": "false",
    "DO_NOT_TRACK": "1",
    # A server notices by missing heartbeats that a run died with its machine.
    "PREFECT_FLOWS_HEARTBEAT_FREQUENCY": "30",
}
# Measured on Prefect 3.9: a recorder that writes one by one lags behind many short tasks; slots of a dead run are freed
# after a restart only where leases are kept in files.
_OWN_SERVER = {
    "PREFECT_SERVER_SERVICES_TASK_RUN_RECORDER_READ_BATCH_SIZE": "100",
    "PREFECT_SERVER_SERVICES_TASK_RUN_RECORDER_BATCH_SIZE": "100",
    "PREFECT_SERVER_SERVICES_TASK_RUN_RECORDER_FLUSH_INTERVAL": "1",
    "PREFECT_SERVER_CONCURRENCY_LEASE_STORAGE": "prefect.server.concurrency.lease_storage.filesystem",
}
# For the length of one run nothing is scheduled and nothing reacts to events.
_ONE_RUN = {
    "PREFECT_SERVER_UI_ENABLED": "false",
    "PREFECT_SERVER_SERVICES_EVENT_PERSISTER_ENABLED": "false",
    "PREFECT_SERVER_SERVICES_TRIGGERS_ENABLED": "false",
    "PREFECT_SERVER_SERVICES_SCHEDULER_ENABLED": "false",
    "PREFECT_SERVER_SERVICES_LATE_RUNS_ENABLED": "false",
}
_LOOPBACK = ("127.0.0.1", "localhost")
_START_SECONDS = 180.0  # measured: 4 to 20, the first start on a busy machine being the longest
_STOP_SECONDS = 20.0
_LOG_BYTES = 5_000_000


def server_is_configured() -> bool:
    """Return whether the environment names a Prefect server."""
    return bool(os.environ.get("PREFECT_API_URL"))


def prepare_environment() -> None:
    """Set what the user has not set: no analytics, and loopback past every proxy."""
    for name, value in _ALWAYS.items():
        os.environ.setdefault(name, value)
    for name in ("NO_PROXY", "no_proxy"):
        hosts = [host for host in os.environ.get(name, "").split(",") if host]
        os.environ[name] = ",".join([*hosts, *(host for host in _LOOPBACK if host not in hosts)])


class Server:
    """A Prefect server on loopback, in a process of its own that ends with this one.

    Stopped when this process exits, after all that was registered to be done then since it was started: what
    Prefect has still to deliver to it among that. So it is to be started before Prefect is imported.
    """

    def __init__(self, *, one_run: bool) -> None:
        """Start it and have Prefect use it; ``wait`` until it answers."""
        prepare_environment()
        self.stopping = False
        self._home = Path(os.environ.get("PREFECT_HOME") or Path.home() / ".prefect")
        port = os.environ.get("PREFECT_SERVER_API_PORT") or str(_free_port())
        self.address = f"http://127.0.0.1:{port}"
        # In a file, since on a terminal it would be taken for the run's own words.
        self._log = self._open_log()
        settings = {**_OWN_SERVER, **(_ONE_RUN if one_run else {})}
        self.process = subprocess.Popen(  # noqa: S603 - Prefect
            [
                *(sys.executable, "-m", "flows.watched", "prefect", "server", "start"),
                *("--host", "127.0.0.1", "--port", port),
            ],
            stdin=subprocess.PIPE,
            stdout=self._log,
            stderr=subprocess.STDOUT,
            env={**settings, **os.environ, "PYTHONPATH": os.pathsep.join(path for path in sys.path if path)},
            start_new_session=True,  # an interrupt from the terminal is for the run, which needs its server to end well
        )
        os.environ["PREFECT_API_URL"] = f"{self.address}/api"
        atexit.register(self.stop)

    def wait(self) -> None:
        """Wait until it answers.

        Raises
        ------
        UsageProblem
            If it ends at once or does not answer in time.

        """
        until = time.monotonic() + _START_SECONDS
        while not _answers(f"{self.address}/api/health"):
            if self.process.poll() is not None or time.monotonic() > until:
                raise UsageProblem(
                    f"the run's own Prefect server did not start; {self._log.name} says why. Name a server in"
                    " PREFECT_API_URL, or use 'seawhence run' without --flow, which needs none."
                )
            time.sleep(0.1)

    def stop(self) -> None:
        """Stop it, and return when it has ended."""
        atexit.unregister(self.stop)
        self.stopping = True
        if os.environ.get("PREFECT_API_URL") == f"{self.address}/api":
            del os.environ["PREFECT_API_URL"]
        if self.process.stdin:
            self.process.stdin.close()
        try:
            self.process.wait(_STOP_SECONDS)
        except subprocess.TimeoutExpired:
            self.process.kill()
            self.process.wait()
        self._log.close()

    def _open_log(self) -> IO[bytes]:
        try:
            self._home.mkdir(parents=True, exist_ok=True)
            path = self._home / "seawhence-server.log"
            full = path.exists() and path.stat().st_size > _LOG_BYTES
            return path.open("wb" if full else "ab")
        except OSError as error:
            raise UsageProblem(
                f"{self._home}: Prefect's directory cannot be written ({error.strerror}); name another in PREFECT_HOME."
            ) from error


def _free_port() -> int:
    with socket.socket() as one:
        one.bind(("127.0.0.1", 0))
        return int(one.getsockname()[1])


def _answers(address: str) -> bool:
    opener = urllib.request.build_opener(urllib.request.ProxyHandler({}))
    with contextlib.suppress(OSError), opener.open(address, timeout=2) as answer:
        return bool(answer.status == 200)
    return False
