"""What the operating system said, as one sentence: which path, what happened, what to do."""

from __future__ import annotations

import errno
import os
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
        said = os.strerror(error.errno) if error.errno else str(error)
        happened, advice = _SAID.get(error.errno or 0, (said, "mend this and run again"))
        raise ArchiveProblem(f"{path}: cannot {attempt} this, {happened}; {advice}.") from error
