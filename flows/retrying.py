"""Faults that may pass, and trying again after growing waits what met one."""

from __future__ import annotations

import errno
import time
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Sequence

    from flows.plan import Job
    from flows.records import CruiseRecord

# What waiting half a minute does not mend; everything else that a disk or network share says may pass.
_LASTING = frozenset(
    {
        errno.ENOSPC, errno.EDQUOT, errno.EFBIG, errno.EROFS, errno.EACCES, errno.EPERM, errno.ENOENT,
        errno.ENOTDIR, errno.EISDIR, errno.ENOLCK, errno.EOPNOTSUPP, errno.EMFILE, errno.ENAMETOOLONG, errno.ELOOP,
    }
)  # fmt: skip


def may_pass(problem: BaseException) -> bool:
    """Return whether what the system said, the cause of a problem, may be another thing in a while."""
    cause = problem.__cause__
    return isinstance(cause, OSError) and cause.errno not in _LASTING


def make_with_retries(
    jobs: Iterable[Job],
    make: Callable[[Job], CruiseRecord],
    waits: Sequence[float],
    tell: Callable[[str], None],
    sleep: Callable[[float], object] = time.sleep,
) -> list[CruiseRecord]:
    """Make cruises one after the other, then those again that met a fault which may pass.

    All are tried before the first wait, so that a lost share costs the waits once and not for every cruise.

    Parameters
    ----------
    jobs
        The cruises.
    make
        Makes one; what went wrong is in its record.
    waits
        Seconds before the second attempt, the third and so on.
    tell
        Is told of every wait, in a sentence.
    sleep
        Waits.

    """
    due: list[Job] = []
    records: dict[str, CruiseRecord] = {}
    for job in jobs:
        records[job.expocode] = make(job)
        due.append(job)
    for wait in waits:
        due = [job for job in due if records[job.expocode].storage_fault]
        if not due:
            break
        first = records[due[0].expocode].message
        tell(f"{len(due)} of the cruises met a fault that may pass; trying again in {wait:g} s: {first}")
        sleep(wait)
        for job in due:
            records[job.expocode] = make(job)
    return list(records.values())
