"""Who is told of a run, by a command and over the web, and that a failing notification fails nothing."""

from __future__ import annotations

import json
import sys
import threading
from contextlib import contextmanager
from http.server import BaseHTTPRequestHandler, HTTPServer
from typing import TYPE_CHECKING, Any

import pytest

from flows import notifying
from tests.flows.conftest import call
from tests.invented import EXPOCODE, bottle_file

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

SECRET = "s3cret"  # noqa: S105 - invented


@pytest.fixture
def inbox(tmp_path: Path) -> Path:
    folder = tmp_path / "inbox"
    folder.mkdir()
    (folder / "a_hy1.csv").write_bytes(bottle_file())
    return folder


@contextmanager
def listener(status: int = 200, *, mute: bool = False) -> Iterator[tuple[str, list[dict[str, Any]]]]:
    """Listen on loopback; give the address and what was posted to it."""
    posted: list[dict[str, Any]] = []
    done = threading.Event()

    class Handler(BaseHTTPRequestHandler):
        def do_POST(self) -> None:
            posted.append(json.loads(self.rfile.read(int(self.headers["Content-Length"]))))
            if mute:
                done.wait(10)
            self.send_response(status)
            self.end_headers()

        def log_message(self, *_: object) -> None:
            """Be quiet."""

    with HTTPServer(("127.0.0.1", 0), Handler) as server:
        thread = threading.Thread(target=server.serve_forever, kwargs={"poll_interval": 0.02})
        thread.start()
        try:
            yield f"http://127.0.0.1:{server.server_port}/hook?token={SECRET}", posted
        finally:
            done.set()
            server.shutdown()
            thread.join()


def test_a_run_is_posted_and_given_to_a_command(inbox: Path, tmp_path: Path) -> None:
    (inbox / "b_hy1.csv").write_bytes(b"")
    told = tmp_path / "told.json"
    command = f"{sys.executable} -c \"import sys; open('{told}', 'w').write(sys.stdin.read())\""
    with listener() as (url, posted):
        outcome = call(
            "run", inbox, "--archive", tmp_path / "archive", "--notify-url", url, "--notify-command", command
        )
    assert outcome.status == 1
    assert outcome.err == ""
    (said,) = posted
    assert said == json.loads(told.read_text(encoding="utf-8"))
    assert (
        said["headline"] == f"1 cruise written, 1 delivery refused. The tables are in {tmp_path / 'archive'}."
    )
    assert said["counts"] == {
        "new": 1, "revised": 0, "remade": 0, "unchanged": 0, "refused": 0, "failed": 0, "refusals": 1,
    }  # fmt: skip
    assert (said["exit_status"], said["problem"]) == (1, None)
    assert said["cruises"][0]["expocode"] == EXPOCODE
    assert said["cruises"][0]["seconds"] > 0


def test_a_run_that_could_not_be_made_is_told_too(inbox: Path, tmp_path: Path) -> None:
    with listener() as (url, posted):
        outcome = call("run", inbox / "none", "--archive", tmp_path / "archive", "--notify-url", url)
    assert outcome.status == 2
    assert posted == [
        {
            "headline": f"{inbox}/none: there is no such directory; give the directory of the delivered files.",
            "archive": str(tmp_path / "archive"),
            "exit_status": 2,
            "problem": f"{inbox}/none: there is no such directory; give the directory of the delivered files.",
        }
    ]


def test_an_address_that_fails_is_told_without_its_words_and_fails_nothing(
    inbox: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(notifying, "_SECONDS", 0.3)
    with listener(503) as (url, _):
        refused = call("run", inbox, "--archive", tmp_path / "archive", "--notify-url", url)
    with listener(mute=True) as (url, _):
        late = call("run", inbox, "--archive", tmp_path / "archive", "--notify-url", url)
    nobody = call("run", inbox, "--archive", tmp_path / "archive", "--notify-url", url)
    odd = call("run", inbox, "--archive", tmp_path / "archive", "--notify-url", f"http://a b/{SECRET}\n")
    told = "seawhence: the notification address {}; the run is not affected.\n"
    assert (refused.status, refused.err) == (0, told.format("answered with status 503"))
    assert (late.status, late.err) == (0, told.format("did not answer within 0.3 s"))
    assert (nobody.status, nobody.err) == (0, told.format("cannot be reached (Connection refused)"))
    assert (odd.status, odd.err) == (0, told.format("could not be used (InvalidURL)"))


@pytest.mark.parametrize(
    ("command", "words"),
    [
        ("/no/such/command", "could not be started (No such file or directory)"),
        (f"{sys.executable} -c 'raise SystemExit(7)'", "ended with status 7"),
        (f"{sys.executable} -c 'import time; time.sleep(60)'", "did not end within 0.3 s and was killed"),
    ],
)
def test_a_command_that_fails_is_told_and_fails_nothing(
    command: str, words: str, inbox: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    if "time" in command:
        monkeypatch.setattr(notifying, "_SECONDS", 0.3)
    outcome = call("run", inbox, "--archive", tmp_path / "archive", "--notify-command", command)
    assert outcome.status == 0
    assert outcome.err == f"seawhence: the notification command {words}; the run is not affected.\n"


@pytest.mark.parametrize(
    ("option", "value", "words"),
    [
        (
            "--notify-url",
            f"ftp://{SECRET}",
            "--notify-url: found no address of the web, expected one that begins with",
        ),
        ("--notify-url", f"file:///{SECRET}", "--notify-url: found no address of the web"),
        ("--notify-url", f"http://[{SECRET}", "--notify-url: found no address of the web"),
        ("--notify-command", f"tell '{SECRET}", "--notify-command: found a quotation without an end"),
    ],
)
def test_whom_to_notify_is_looked_at_before_the_run_and_never_repeated(
    option: str, value: str, words: str, inbox: Path, tmp_path: Path
) -> None:
    outcome = call("run", inbox, "--archive", tmp_path / "archive", option, value)
    assert outcome.status == 2
    assert outcome.err.startswith(f"seawhence: {words}")
    assert SECRET not in outcome.err
    assert not (tmp_path / "archive").exists()


def test_the_environment_says_whom_where_no_option_does(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv(notifying.COMMAND, "tell 'the watch'")
    monkeypatch.setenv(notifying.URL, f"https://example.org/{SECRET}")
    assert notifying.whom() == notifying.Notify(("tell", "the watch"), f"https://example.org/{SECRET}")
    assert notifying.whom("", "") == notifying.Notify()
    assert SECRET not in repr(notifying.whom())
