"""What the operating system said, as one sentence: which path, what happened, what to do."""

from __future__ import annotations

import errno
import os
import re
from contextlib import contextmanager
from typing import TYPE_CHECKING

from pipeline.problems import ArchiveProblem

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

_GONE = "the disk or network share does not answer", "bring it back and run again"
_FULL = "no space is left", "free some space and run again"
_PERMISSION = "permission is missing", "have it granted, or run as the user who owns the archive"

_SAID: dict[int, tuple[str, str]] = {
    errno.ENOSPC: _FULL,
    errno.EDQUOT: ("the quota is used up", "free some space or have the quota raised, and run again"),
    errno.EFBIG: ("the file is larger than is allowed here", "have the limit raised and run again"),
    errno.EROFS: ("the file system is read-only", "have it mounted for writing, or use another archive"),
    errno.EACCES: _PERMISSION,
    errno.EPERM: _PERMISSION,
    errno.ENOENT: ("it is not there", "see whether something else removed it, and run again"),
    errno.ENOTDIR: ("a file stands where a directory should", "move that file away and run again"),
    errno.EISDIR: ("a directory stands where a file should", "move that directory away and run again"),
    errno.ENOLCK: ("this file system has no locks", "use an archive on one that has"),
    errno.EOPNOTSUPP: ("this file system has no locks", "use an archive on one that has"),
    errno.EMFILE: ("too many files are open", "have the limit raised and run again"),
    errno.EIO: _GONE,
    errno.ESTALE: _GONE,
    errno.ENOTCONN: _GONE,
    errno.ETIMEDOUT: _GONE,
    errno.EHOSTDOWN: _GONE,
}

# What pyarrow says of storage of the S3 protocol, e.g. "AWS Error SLOW_DOWN (HTTP status 503) during GetObject
# operation: Please reduce your request rate."
_STORAGE = re.compile(r"AWS Error (\w+)(?: \(HTTP status (\d+)\))? during (\w+) operation: ([^(\n]*)")
_KEYS = (
    "see that AWS_ACCESS_KEY_ID, AWS_SECRET_ACCESS_KEY and, if there is one, AWS_SESSION_TOKEN are those of a user who"
    " may do this, and that the clock of this machine is right"
)
_NOT_ALLOWED = frozenset(
    {"ACCESS_DENIED", "INVALID_ACCESS_KEY_ID", "SIGNATURE_DOES_NOT_MATCH", "INVALID_SIGNATURE", "REQUEST_EXPIRED",
     "REQUEST_TIME_TOO_SKEWED", "EXPIRED_TOKEN", "INVALID_CLIENT_TOKEN_ID", "INVALID_TOKEN", "UNRECOGNIZED_CLIENT"}
)  # fmt: skip
_NO_ANSWER = frozenset({"NETWORK_CONNECTION", "REQUEST_TIMEOUT"})


def is_of_storage(error: OSError) -> bool:
    """Return whether an error is the system's or the storage's word, and not a decoder's on what it read."""
    return error.errno is not None or _STORAGE.search(str(error)) is not None


@contextmanager
def refused(path: Path | str, attempt: str) -> Iterator[None]:
    """Turn an ``OSError`` into an ``ArchiveProblem``; the error stays its cause, with its number.

    Parameters
    ----------
    path
        What was being worked on, as the user knows it.
    attempt
        The verb: ``read``, ``write``, ``move``, ``remove``, ``lock``.

    """
    try:
        yield
    except OSError as error:
        happened, advice = words_of(error)
        raise ArchiveProblem(f"{path}: cannot {attempt} this, {happened}; {advice}.") from error


def words_of(error: OSError) -> tuple[str, str]:
    """Return what happened and what to do, in words; of what storage said, the number is set that a disk would give."""
    if error.errno is None and (storage := _STORAGE.search(str(error))):
        number, happened, advice = _of_storage(storage[1], storage[2], storage[4].strip(" ."))
        error.errno = number
        return happened, advice
    said = os.strerror(error.errno) if error.errno else str(error)
    return _SAID.get(error.errno or 0, (said, "mend this and run again"))


def _of_storage(code: str, status: str | None, message: str) -> tuple[int, str, str]:
    """Return what S3-compatible storage said as a number, in words, and what to do about it."""
    told = f"{code}{f', HTTP status {status}' if status else ''}"
    if code == "NO_SUCH_BUCKET":
        return errno.ENOENT, "there is no such bucket", "make it, or correct its name, and run again"
    if code in _NOT_ALLOWED or status in {"401", "403"}:
        return errno.EACCES, f"the storage does not allow it ({told})", _KEYS
    if code in _NO_ANSWER:
        advice = "see that AWS_ENDPOINT_URL is right, and run again"
        return errno.EIO, f"the storage does not answer ({message})", advice
    if code in {"SLOW_DOWN", "SERVICE_UNAVAILABLE", "INTERNAL_FAILURE", "INTERNAL_ERROR", "THROTTLING"} or (
        status is not None and status >= "500"
    ):
        return (
            errno.EIO,
            f"the storage is overloaded or faulty ({told}), after several attempts",
            "run again later",
        )
    return errno.EIO, f"the storage said {told}: {message}", "mend this and run again"
