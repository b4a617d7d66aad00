"""Telling somebody what a run did: a command that gets it on standard input, an address that gets it posted.

Addresses and commands may hold secrets: no sentence repeats them. A notification that fails is told on stderr
and changes nothing of the run.
"""

from __future__ import annotations

import json
import os
import shlex
import subprocess
import sys
import urllib.error
import urllib.request
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any
from urllib.parse import urlsplit

from pipeline.problems import UsageProblem

if TYPE_CHECKING:
    from flows.records import RunSummary

# Where a run that a Prefect server starts finds what the command line was given; never among its parameters,
# which everybody sees who sees the server.
COMMAND, URL = "SEAWHENCE_NOTIFY_COMMAND", "SEAWHENCE_NOTIFY_URL"
_SECONDS = 20.0


@dataclass(frozen=True, slots=True)
class Notify:
    """Whom to tell."""

    command: tuple[str, ...] = ()
    url: str = ""

    def __repr__(self) -> str:
        """Return no secret."""
        return "Notify(...)"


def whom(command: str | None = None, url: str | None = None) -> Notify:
    """Return whom to tell: as the options say, or else the environment.

    Raises
    ------
    UsageProblem
        If the command is no command or the address none of the web.

    """
    command = command if command is not None else os.environ.get(COMMAND, "")
    url = url if url is not None else os.environ.get(URL, "")
    try:
        words = tuple(shlex.split(command))
    except ValueError as error:
        raise UsageProblem(
            f"--notify-command: found a quotation without an end ({error}); close it."
        ) from error
    try:
        parts = urlsplit(url)
        known = not url or (parts.scheme in {"http", "https"} and bool(parts.hostname))
    except ValueError:
        known = False
    if not known:
        raise UsageProblem(
            "--notify-url: found no address of the web, expected one that begins with https:// or http://; correct it."
        )
    return Notify(words, url)


def message(archive: str, summary: RunSummary | None, problem: str = "", status: int = 0) -> dict[str, Any]:
    """Return what is sent: of a run that ended, or the sentence of one that could not.

    Parameters
    ----------
    archive
        The archive's directory.
    summary
        Of the run; None where there was none.
    problem
        Why there was none.
    status
        The exit status then.

    """
    if summary is None:
        return {"headline": problem, "archive": archive, "exit_status": status, "problem": problem}
    return {"headline": summary.closing(), **summary.to_json(), "problem": None}


def notify(to: Notify, content: dict[str, Any]) -> None:
    """Tell; never raises."""
    text = json.dumps(content, ensure_ascii=False).encode()
    if to.command and (trouble := _run(to.command, text)):
        print(f"seawhence: the notification command {trouble}; the run is not affected.", file=sys.stderr)
    if to.url and (trouble := _post(to.url, text)):
        print(f"seawhence: the notification address {trouble}; the run is not affected.", file=sys.stderr)


def _run(command: tuple[str, ...], text: bytes) -> str:
    """Return what went wrong, "" if nothing did."""
    try:
        done = subprocess.run(  # noqa: S603 - the user's own command, without a shell
            command, input=text, stdout=sys.stderr.fileno() if _has_number() else subprocess.DEVNULL,
            check=False, timeout=_SECONDS,
        )  # fmt: skip
    except subprocess.TimeoutExpired:
        return f"did not end within {_SECONDS:g} s and was killed"
    except OSError as error:
        return f"could not be started ({error.strerror})"
    return f"ended with status {done.returncode}" if done.returncode else ""


def _has_number() -> bool:
    try:
        return sys.stderr.fileno() >= 0
    except (OSError, ValueError, AttributeError):
        return False


def _post(url: str, text: bytes) -> str:
    """Return what went wrong, "" if nothing did; the address is in no sentence."""
    request = urllib.request.Request(url, data=text, headers={"Content-Type": "application/json"})  # noqa: S310
    try:
        with urllib.request.urlopen(request, timeout=_SECONDS):  # noqa: S310 - the scheme was looked at
            return ""
    except urllib.error.HTTPError as error:
        error.close()
        return f"answered with status {error.code}"
    except TimeoutError:
        return f"did not answer within {_SECONDS:g} s"
    except OSError as error:
        reason = getattr(error, "reason", None)
        said = reason.strerror if isinstance(reason, OSError) else error.strerror
        return f"cannot be reached ({said or type(error).__name__})"
    except Exception as error:  # noqa: BLE001 - whatever an odd answer does, the run is done; and its words may hold the address
        return f"could not be used ({type(error).__name__})"
