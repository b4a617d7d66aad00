"""A PostgreSQL server on loopback for tests, where the machine has one."""

from __future__ import annotations

import os
import shutil
import socket
import subprocess
import tempfile
import time
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from collections.abc import Iterator

START_SECONDS = 60.0


@contextmanager
def postgresql() -> Iterator[str]:
    """Start a server with an empty database and stop it; give its address as Prefect wants it."""
    found = shutil.which("pg_ctl")
    if found is None:
        pytest.skip("PostgreSQL is not on this machine: no pg_ctl in PATH")
    programs = Path(found).resolve().parent
    # The server refuses to be the superuser's; a directory of its own, since nobody may look into that of the tests.
    who: dict[str, Any] = {"user": "nobody"} if os.geteuid() == 0 else {}
    place = Path(tempfile.mkdtemp(prefix="postgresql-"))
    try:
        if who:
            shutil.chown(place, "nobody")
        making: list[str | Path] = [
            programs / "initdb",
            "-D",
            place / "data",
            "-U",
            "seawhence",
            "-A",
            "trust",
            "-E",
            "UTF8",
            "-N",
        ]
        made = subprocess.run(making, cwd=place, check=False, capture_output=True, text=True, **who)
        if made.returncode:
            pytest.skip(f"PostgreSQL makes no database here: {made.stderr}")
        with socket.socket() as free:
            free.bind(("127.0.0.1", 0))
            port = free.getsockname()[1]
        serving: list[str | Path] = [
            programs / "postgres",
            "-D",
            place / "data",
            "-p",
            str(port),
            "-k",
            "",
            "-h",
            "127.0.0.1",
            "-F",
        ]
        with (place / "log").open("wb") as log, subprocess.Popen(
            serving, cwd=place, stdout=log, stderr=log, **who
        ) as server:  # fmt: skip
            try:
                _wait(port, server)
                yield f"postgresql+asyncpg://seawhence@127.0.0.1:{port}/postgres"
            finally:
                server.terminate()
                server.wait(timeout=30)
    finally:
        shutil.rmtree(place)


def _wait(port: int, server: subprocess.Popen[Any]) -> None:
    until = time.monotonic() + START_SECONDS
    while True:
        assert server.poll() is None, "PostgreSQL ended at once"
        try:
            socket.create_connection(("127.0.0.1", port), timeout=1).close()
        except OSError:
            assert time.monotonic() < until, "PostgreSQL does not answer"
            time.sleep(0.05)
        else:
            return
