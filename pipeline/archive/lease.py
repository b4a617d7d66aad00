"""Who may write in a bucket: a small object that its holder renews, since storage of this kind has no locks.

The object is put only where there is none, and renewed or taken over only as it was last seen, so of any
number that try one succeeds: the storage decides. One that nobody renewed for ``LAST`` seconds, by the
storage's own clock, belongs to nobody and is taken over: a killed run keeps an archive busy for that long.
A holder that could not renew for ``TRUSTED`` seconds writes nothing more, by its own clock, sleep of the
machine included. What this cannot stop is a single request that was on its way before and arrives after
another took over, more than ``LAST - TRUSTED`` seconds late.
"""

from __future__ import annotations

import functools
import threading
import time
import uuid
from contextlib import contextmanager, suppress
from typing import TYPE_CHECKING

from pipeline.archive import conditional, layout, lock
from pipeline.archive.refusals import refused
from pipeline.problems import ArchiveBusy, ArchiveProblem

if TYPE_CHECKING:
    from collections.abc import Iterator

    from pipeline.archive.endpoint import Endpoint

LAST = 45.0  # seconds after which an object that is not renewed belongs to nobody
TRUSTED = 30.0  # seconds for which a holder relies on its last renewal
RENEW = 8.0  # seconds between renewals
LONGEST_WAIT = 2.0

_CLOCK = getattr(time, "CLOCK_BOOTTIME", time.CLOCK_MONOTONIC)  # the first counts while the machine sleeps

_held: set[_Lease] = set()  # of this process


class _Lease:
    """A held object and the thread that renews it."""

    def __init__(self, endpoint: Endpoint, path: str) -> None:
        self.endpoint, self.path = endpoint, path
        self._who = lock.who().strip()
        self._token = uuid.uuid4().hex
        self._renewals = 0
        self._tag = ""
        self._renewed = 0.0
        self._lost = False
        self._ended = threading.Event()
        self._thread = threading.Thread(target=self._keep, name=f"lease of {path}", daemon=True)

    def acquire(self, patience: float) -> None:
        """Take the object, waiting for another holder as long as patience lasts."""
        until = time.monotonic() + patience
        wait = lock.FIRST_WAIT
        while True:
            if self._put(None):
                break
            found = conditional.get(self.endpoint, self.path)
            if found is not None:
                if found.body == self._words():  # our own, whose answer was lost on the way
                    self._tag, self._renewed = found.tag, _now() - found.age
                    break
                if found.age > LAST and self._put(found.tag):
                    break
                if time.monotonic() >= until:
                    raise ArchiveBusy(_busy(self.path, found.body, found.age))
            time.sleep(wait)
            wait = min(2 * wait, LONGEST_WAIT)
        _held.add(self)
        self._thread.start()

    def release(self) -> None:
        """End the hold; another's object is left alone."""
        self._ended.set()
        self._thread.join()
        _held.discard(self)
        if self.is_trusted:
            with suppress(OSError):  # then it ends by itself, as that of a killed run
                conditional.remove(self.endpoint, self.path)

    @property
    def is_trusted(self) -> bool:
        """Whether nobody else can have taken it over."""
        return not self._lost and _now() - self._renewed < TRUSTED

    def _keep(self) -> None:
        while not self._ended.wait(RENEW):
            self._renewals += 1
            try:
                self._lost = not (self._put(self._tag) or self._is_ours())
            except OSError:
                continue  # the storage may be back before it is too late
            if self._lost:
                return

    def _put(self, replacing: str | None) -> bool:
        sent = _now()
        tag = conditional.put(self.endpoint, self.path, self._words(), replacing=replacing)
        if tag is None:
            return False
        self._tag, self._renewed = tag, sent
        return True

    def _is_ours(self) -> bool:
        """Return whether an earlier attempt at this renewal went through though its answer was lost."""
        found = conditional.get(self.endpoint, self.path)
        if found is None or found.body != self._words():
            return False
        self._tag, self._renewed = (
            found.tag,
            _now() - found.age - 1.0,
        )  # times of the server are whole seconds
        return True

    def _words(self) -> bytes:
        """Return what stands in the object: who holds it, and what no other object has."""
        return f"{self._who}\n{self._token} {self._renewals}\n".encode()


@contextmanager
def hold(endpoint: Endpoint, path: str, patience: float, probe: str) -> Iterator[None]:
    """Hold the object ``BUCKET/KEY`` against every other holder; it is removed when the hold ends.

    Parameters
    ----------
    endpoint, path
        The server and the object.
    patience
        Seconds to wait for another holder.
    probe
        A folder of the same bucket, in which once in a process is tried whether the storage keeps conditions.

    Raises
    ------
    ArchiveBusy
        If another holds it and patience ran out; the sentence says who.
    ArchiveProblem
        If it cannot be put, or the storage knows no conditions.

    """
    lease = _Lease(endpoint, path)
    with refused(f"s3://{path}", "lock"):
        _require_conditions(endpoint, probe)
        lease.acquire(patience)
    try:
        yield
    finally:
        lease.release()


def require_trust(root: str) -> None:
    """See that every hold of this process below ``BUCKET/PATH`` is still its own, before something is written.

    Raises
    ------
    ArchiveProblem
        If one is not.

    """
    for lease in tuple(_held):
        if lease.path.startswith(f"{root}/") and not lease.is_trusted:
            raise ArchiveProblem(
                f"s3://{lease.path}: the hold on it was lost, because the storage did not answer for {TRUSTED:.0f} s or"
                " another run took it over; nothing more was written; run again."
            )


@functools.lru_cache(maxsize=16)
def _require_conditions(endpoint: Endpoint, folder: str) -> None:
    """See once in a process that the storage keeps conditions: without them two runs would both hold."""
    probe = f"{folder}/{uuid.uuid4().hex}{layout.PART_SUFFIX}"
    conditional.put(endpoint, probe, b"probe\n", replacing=None)
    try:
        twice = conditional.put(endpoint, probe, b"other\n", replacing=None)
        wrong = conditional.put(endpoint, probe, b"other\n", replacing=f'"{"0" * 32}"')
    finally:
        conditional.remove(endpoint, probe)
    if twice is not None or wrong is not None:
        raise ArchiveProblem(
            f"s3://{folder}: the storage at {endpoint.address} puts objects whatever the condition (If-None-Match,"
            " If-Match), so two runs could not be kept apart; use storage that keeps them, or an archive on a disk."
        )


def _busy(path: str, body: bytes, age: float) -> str:
    who = body[: lock.WORDS].decode(errors="replace").partition("\n")[0].strip()
    return (
        f"s3://{path}: held by {who or 'another run'}, who renewed it {max(age, 0.0):.0f} s ago; wait for it to end, or"
        f" end it, and run again: what is published can be read meanwhile. The hold of a run that was killed ends by"
        f" itself {LAST:.0f} s after it was last renewed."
    )


def _now() -> float:
    return time.clock_gettime(_CLOCK)
