"""Who may write: a lock that the kernel keeps, so that it ends with its holder however that ends.

What stands in a lock file is information for people only; the lock itself is ``flock``. Every hold opens
the file anew, so two threads of one process exclude each other as two processes do. A child forked during
a hold shares it until the hold ends: workers that outlive a killed run keep the archive busy until they end.
"""

from __future__ import annotations

import fcntl
import os
import socket
import time
from contextlib import contextmanager, suppress
from datetime import UTC, datetime
from typing import TYPE_CHECKING

from pipeline.archive import layout
from pipeline.archive.refusals import refused
from pipeline.problems import ArchiveBusy
from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    from pipeline.archive.storage import Store

FIRST_WAIT = 0.005  # seconds; doubled up to the longest
LONGEST_WAIT = 0.25
WORDS = 300  # bytes of a lock file that are shown


@contextmanager
def hold(path: Path, patience: float = 0.0, *, fleeting: bool = False) -> Iterator[None]:
    """Hold the lock of the file ``path``, made where it is missing; others wait or are refused.

    Parameters
    ----------
    path
        The lock file; its directory exists.
    patience
        Seconds to wait for another holder.
    fleeting
        Whether the file is removed when the hold ends.

    Raises
    ------
    ArchiveBusy
        If another holds it and patience ran out; the sentence says who.
    ArchiveProblem
        If the file cannot be made or the file system has no locks.

    """
    with refused(path, "lock"):
        descriptor = _acquire(path, patience)
    try:
        with refused(path, "lock"):
            os.ftruncate(descriptor, 0)
            os.pwrite(descriptor, who().encode(), 0)
        yield
    finally:
        # The words go first: an unlocked file that names a holder would mislead.
        with suppress(OSError):  # on a share that is lost; the lock ends all the same
            os.ftruncate(descriptor, 0)
        if fleeting:
            with suppress(OSError):
                path.unlink(missing_ok=True)
        with suppress(OSError):  # explicitly, since a forked child may share the descriptor
            fcntl.flock(descriptor, fcntl.LOCK_UN)
        with suppress(OSError):
            os.close(descriptor)


@contextmanager
def locked(store: Store, patience: float = 0.0) -> Iterator[None]:
    """Hold the archive for one run; what was published has reached the disk when the run ends well.

    Raises
    ------
    ArchiveBusy
        If another run holds it after ``patience`` seconds.

    """
    with store.hold(layout.LOCK, patience):
        yield
        store.settle(TABLE_NAMES)


def _acquire(path: Path, patience: float) -> int:
    """Return a descriptor of ``path`` that holds its lock."""
    until = time.monotonic() + patience
    wait = FIRST_WAIT
    while True:
        descriptor = os.open(path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o666)
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError as error:
            holder = os.pread(descriptor, WORDS, 0).decode(errors="replace").strip()
            os.close(descriptor)
            if not isinstance(error, BlockingIOError):
                raise
            if time.monotonic() >= until:
                raise ArchiveBusy(
                    f"{path}: held by {holder or 'another run'}; "
                    "wait for it to end, or end it, and run again: what is published can be read meanwhile."
                ) from error
            time.sleep(wait)
            wait = min(2 * wait, LONGEST_WAIT)
            continue
        if _is_still(path, descriptor):
            return descriptor
        os.close(descriptor)  # the last holder removed the file between our opening and locking it


def _is_still(path: Path, descriptor: int) -> bool:
    try:
        return os.path.samestat(path.stat(), os.fstat(descriptor))
    except FileNotFoundError:
        return False


def who() -> str:
    """Return which process this is, in words for those who wait for it."""
    started = datetime.now(UTC).strftime("%Y-%m-%d %H:%M:%S UTC")
    return f"process {os.getpid()} on {socket.gethostname()} since {started}\n"
