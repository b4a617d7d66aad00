"""A server of the S3 protocol on loopback, and a proxy before it that answers as overloaded storage does."""

from __future__ import annotations

import http.client
import os
import socket
import subprocess
import sys
import threading
import time
from contextlib import contextmanager
from dataclasses import dataclass, field
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from typing import TYPE_CHECKING, Any
from urllib.parse import urlsplit

import pyarrow.fs

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from pathlib import Path

    import pytest

START_SECONDS = 60.0
BUCKET = "ship"
KEYS = {"AWS_ACCESS_KEY_ID": "invented", "AWS_SECRET_ACCESS_KEY": "not-a-secret", "AWS_REGION": "us-east-1"}


def environment(address: str) -> dict[str, str]:
    """Return what the environment must hold to use the server at ``address``, and nothing else of its kind."""
    others = dict.fromkeys((name for name in os.environ if name.startswith("AWS_")), "")
    return {**others, **KEYS, "AWS_ENDPOINT_URL": address}


@contextmanager
def served(log: Path) -> Iterator[str]:
    """Run the server with one empty bucket and yield its address."""
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    with log.open("wb") as out:
        process = subprocess.Popen(
            [sys.executable, "-m", "moto.server", "-H", "127.0.0.1", "-p", str(port)],
            stdout=out, stderr=out, env={**os.environ, "DO_NOT_TRACK": "1"},
        )  # fmt: skip
    try:
        _wait(port, process)
        direct(f"http://127.0.0.1:{port}").create_dir(BUCKET)
        yield f"http://127.0.0.1:{port}"
    finally:
        process.terminate()
        process.wait(timeout=30)


def _wait(port: int, process: subprocess.Popen[bytes]) -> None:
    until = time.monotonic() + START_SECONDS
    while time.monotonic() < until:
        assert process.poll() is None, "the server ended at once"
        try:
            socket.create_connection(("127.0.0.1", port), timeout=1).close()
        except OSError:
            time.sleep(0.05)
        else:
            return
    raise AssertionError("the server did not start")


def direct(address: str) -> Any:
    """Return pyarrow's own view of the server, with none of ours between."""
    return pyarrow.fs.S3FileSystem(
        access_key=KEYS["AWS_ACCESS_KEY_ID"],
        secret_key=KEYS["AWS_SECRET_ACCESS_KEY"],
        region=KEYS["AWS_REGION"],
        endpoint_override=address,
        scheme="http",
        allow_bucket_creation=True,
    )


def contents(address: str, place: str) -> dict[str, bytes]:
    """Return the bytes of every object below ``place``, by the rest of its key."""
    files = direct(address)
    found = files.get_file_info(pyarrow.fs.FileSelector(place, recursive=True, allow_not_found=True))
    return {
        info.path.removeprefix(f"{place}/"): files.open_input_file(info.path).read()
        for info in found
        if info.is_file
    }


@dataclass
class Faults:
    """Which requests are not passed on: the answer of the storage in their place, 0 to hang up, None to pass on."""

    answer: Callable[[int, str, str], int | None] = lambda _number, _method, _path: None
    seen: list[tuple[float, str, str, int | None]] = field(default_factory=list)
    lock: threading.Lock = field(default_factory=threading.Lock)

    def decide(self, method: str, path: str) -> int | None:
        """Return what to answer to the next request."""
        with self.lock:
            status = self.answer(len(self.seen) + 1, method, path)
            self.seen.append((time.monotonic(), method, path, status))
            return status


@contextmanager
def spoiled(address: str) -> Iterator[tuple[str, Faults]]:
    """Run a proxy before the server and yield its address and what decides its faults."""
    faults = Faults()
    server = ThreadingHTTPServer(("127.0.0.1", 0), _handler(urlsplit(address).netloc, faults))
    server.daemon_threads = True
    thread = threading.Thread(target=server.serve_forever, args=(0.05,), daemon=True)
    thread.start()
    try:
        yield f"http://127.0.0.1:{server.server_port}", faults
    finally:
        server.shutdown()
        server.server_close()
        thread.join()


def _handler(behind: str, faults: Faults) -> type[BaseHTTPRequestHandler]:
    class Handler(BaseHTTPRequestHandler):
        protocol_version = "HTTP/1.1"

        def _pass_on(self) -> None:
            status = faults.decide(self.command, self.path)
            body = self._body()
            if status == 0:
                self.close_connection = True
                return
            if status is not None:
                said = b"" if self.command == "HEAD" else _said(status)
                self._answer(
                    status, {"Content-Length": str(len(said)), "Content-Type": "application/xml"}, said
                )
                return
            connection = http.client.HTTPConnection(behind, timeout=60)
            passed = {name: value for name, value in self.headers.items() if name.lower() not in _HOPS}
            connection.request(self.command, self.path, body, {**passed, "Content-Length": str(len(body))})
            answer = connection.getresponse()
            data = answer.read()
            kept = {name: value for name, value in answer.getheaders() if name.lower() not in _HOPS}
            whole = answer.getheader("Content-Length") if self.command == "HEAD" else None
            kept["Content-Length"] = whole or str(len(data))
            connection.close()
            self._answer(answer.status, kept, data)

        def _body(self) -> bytes:
            if self.headers.get("Transfer-Encoding") != "chunked":
                return self.rfile.read(int(self.headers.get("Content-Length") or 0))
            parts = []
            while size := int(self.rfile.readline().partition(b";")[0], 16):
                parts.append(self.rfile.read(size))
                self.rfile.readline()
            while self.rfile.readline().strip():
                pass
            return b"".join(parts)

        def _answer(self, status: int, headers: dict[str, str], body: bytes) -> None:
            self.send_response_only(status)
            for name, value in headers.items():
                self.send_header(name, value)
            self.end_headers()
            self.wfile.write(body)

        do_GET = do_PUT = do_POST = do_HEAD = do_DELETE = _pass_on  # noqa: N815 - the library's names

        def log_message(self, format: str, *args: Any) -> None:  # noqa: A002
            pass

    return Handler


_HOPS = {"connection", "transfer-encoding", "keep-alive", "expect", "content-length"}


def _said(status: int) -> bytes:
    code, message = {
        500: ("InternalError", "We encountered an internal error. Please try again."),
        503: ("SlowDown", "Please reduce your request rate."),
        403: ("AccessDenied", "Access Denied"),
    }[status]
    return (
        f'<?xml version="1.0" encoding="UTF-8"?><Error><Code>{code}</Code><Message>{message}</Message></Error>'
    ).encode()


def name_server(address: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """Have the environment name a server, with its keys."""
    for variable, value in environment(address).items():
        if value:
            monkeypatch.setenv(variable, value)
        else:
            monkeypatch.delenv(variable, raising=False)
