"""Prefect's settings for a run that nobody has set Prefect up for; what the user has set stands.

To be called before Prefect is first imported: it reads the environment then.
"""

from __future__ import annotations

import os

# Measured on Prefect 3.9: start-up can take 20 s on a busy machine; a recorder that writes one by one
# loses the task runs of the last seconds; heartbeats and analytics call out.
_ALWAYS = {
    "PREFECT_SERVER_ANALYTICS_ENABLED": "false",
    "DO_NOT_TRACK": "1",
}
_WITHOUT_SERVER = {
    "PREFECT_SERVER_EPHEMERAL_ENABLED": "true",
    "PREFECT_SERVER_EPHEMERAL_STARTUP_TIMEOUT_SECONDS": "180",
    "PREFECT_SERVER_SERVICES_TASK_RUN_RECORDER_READ_BATCH_SIZE": "100",
    "PREFECT_SERVER_SERVICES_TASK_RUN_RECORDER_BATCH_SIZE": "100",
    "PREFECT_SERVER_SERVICES_TASK_RUN_RECORDER_FLUSH_INTERVAL": "1",
    "PREFECT_SERVER_SERVICES_EVENT_PERSISTER_ENABLED": "false",
    "PREFECT_SERVER_SERVICES_TRIGGERS_ENABLED": "false",
    "PREFECT_LOGGING_LEVEL": "WARNING",
}
_LOOPBACK = ("127.0.0.1", "localhost")


def server_is_configured() -> bool:
    """Return whether the environment names a Prefect server."""
    return bool(os.environ.get("PREFECT_API_URL"))


def prepare_environment() -> None:
    """Set what the user has not set: no analytics, loopback only, patience with the embedded server."""
    chosen = dict(_ALWAYS)
    if not server_is_configured():
        chosen |= _WITHOUT_SERVER
    for name, value in chosen.items():
        os.environ.setdefault(name, value)
    for name in ("NO_PROXY", "no_proxy"):
        hosts = [host for host in os.environ.get(name, "").split(",") if host]
        os.environ[name] = ",".join([*hosts, *(host for host in _LOOPBACK if host not in hosts)])
