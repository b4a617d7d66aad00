"""File operations of an archive, by key; nothing else touches its files.

The rooms above need only what ``Store`` lists, each operation being whole or not done at all, so an
object store can stand in for a disk: a write there is one upload, a move is a copy and a removal.
"""

from __future__ import annotations

import os
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from typing import IO, TYPE_CHECKING, Any, ClassVar, Protocol, overload

from pipeline.archive import layout, lock
from pipeline.archive.endpoint import is_bucket
from pipeline.archive.refusals import refused
from pipeline.problems import ArchiveProblem
from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable
    from contextlib import AbstractContextManager

    from pipeline.archive.delivered_objects import ObjectPath

BUFFER = 1 << 20


class Store(Protocol):
    """What an archive needs of the place it lies in. Every failure is an ``ArchiveProblem``."""

    width: ClassVar[int]  # how many operations are best done at once

    def where(self, key: str) -> str:
        """Return the place of ``key`` as the user knows it."""

    def source(self, key: str) -> Any:
        """Return ``key`` as pyarrow opens it for reading; ``OSError`` is left to the caller."""

    def names(self, key: str) -> list[str]:
        """Return the sorted names directly under ``key``; none where there is no such place."""

    def size(self, key: str) -> int | None:
        """Return the number of bytes at ``key``, None where there is nothing."""

    def read(self, key: str) -> bytes:
        """Return the bytes at ``key``."""

    def write(self, key: str, fill: Callable[[IO[bytes]], object]) -> None:
        """Make ``key`` anew from what ``fill`` writes; it has reached the disk on return."""

    def move(self, key: str, target: str) -> None:
        """Move ``key`` to ``target``, replacing what is there."""

    def remove(self, key: str) -> None:
        """Remove ``key``, if it is there, and the places above it that this leaves empty."""

    def settle(self, keys: Iterable[str]) -> None:
        """Make moves into and out of the places ``keys`` survive a loss of power."""

    def hold(
        self, key: str, patience: float = 0.0, *, fleeting: bool = False
    ) -> AbstractContextManager[None]:
        """Hold ``key`` against every other holder, as ``lock.hold`` says."""


@dataclass(frozen=True, slots=True)
class Disk:
    """An archive in a directory. Can be handed to another process."""

    root: Path
    width: ClassVar[int] = 1

    def _path(self, key: str) -> Path:
        return self.root / key

    def where(self, key: str) -> str:
        """See ``Store``."""
        return str(self._path(key))

    def source(self, key: str) -> str:
        """See ``Store``."""
        return str(self._path(key))

    def names(self, key: str) -> list[str]:
        """See ``Store``."""
        with refused(self._path(key), "read"):
            try:
                return sorted(path.name for path in self._path(key).iterdir())
            except FileNotFoundError:
                return []

    def size(self, key: str) -> int | None:
        """See ``Store``."""
        with refused(self._path(key), "read"):
            try:
                return self._path(key).stat().st_size
            except FileNotFoundError:
                return None

    def read(self, key: str) -> bytes:
        """See ``Store``."""
        with refused(self._path(key), "read"):
            return self._path(key).read_bytes()

    def write(self, key: str, fill: Callable[[IO[bytes]], object]) -> None:
        """See ``Store``. What is half written when ``fill`` fails stays: write to the staging place."""
        path = self._path(key)
        with refused(path, "write"):
            if not path.parent.exists():
                path.parent.mkdir(parents=True, exist_ok=True)
            with path.open("wb", buffering=BUFFER) as file:
                fill(file)
                file.flush()
                os.fsync(file.fileno())

    def move(self, key: str, target: str) -> None:
        """See ``Store``. On a disk this is one atomic step."""
        source, path = self._path(key), self._path(target)
        with refused(path, "write"):
            if not path.parent.exists():
                path.parent.mkdir(parents=True, exist_ok=True)
            source.replace(path)
        self._prune(source.parent)

    def remove(self, key: str) -> None:
        """See ``Store``."""
        with refused(self._path(key), "remove"):
            self._path(key).unlink(missing_ok=True)
        self._prune(self._path(key).parent)

    def settle(self, keys: Iterable[str]) -> None:
        """See ``Store``."""
        for key in keys:
            with refused(self._path(key), "write"):
                descriptor = os.open(self._path(key), os.O_RDONLY)
                try:
                    os.fsync(descriptor)
                finally:
                    os.close(descriptor)

    def hold(
        self, key: str, patience: float = 0.0, *, fleeting: bool = False
    ) -> AbstractContextManager[None]:
        """See ``Store``."""
        return lock.hold(self._path(key), patience, fleeting=fleeting)

    def _prune(self, directory: Path) -> None:
        """Remove ``directory`` and those above it while they are empty, up to the archive's own places."""
        with suppress(OSError):  # not empty, or somebody else was faster
            while len(directory.relative_to(self.root).parts) > 1:
                directory.rmdir()
                directory = directory.parent


def is_archive(place: Path) -> bool:
    """Return whether a directory is an archive."""
    return all((place / name).is_dir() for name in TABLE_NAMES)


@overload
def open_archive(place: Path, *, create: bool = False) -> Disk: ...


@overload
def open_archive(place: Path | str | ObjectPath, *, create: bool = False) -> Store: ...


def open_archive(place: Path | str | ObjectPath, *, create: bool = False) -> Store:
    """Return the archive at ``place``.

    Parameters
    ----------
    place
        The archive's directory, or ``s3://BUCKET/PATH``.
    create
        Whether it is made where there is none.

    Raises
    ------
    ArchiveProblem
        If there is none and ``create`` is false, or if ``place`` is a file or holds other things and no
        archive.

    """
    if not isinstance(place, Path) and is_bucket(str(place)):
        from pipeline.archive.bucket import open_bucket  # noqa: PLC0415 - for storage of this kind only

        return open_bucket(str(place), create=create)
    root = Path(place).absolute()
    with refused(root, "read"):
        if root.exists() and not root.is_dir():
            raise ArchiveProblem(
                f"{root}: found a file, expected the directory of an archive; give another place."
            )
        found = {path.name for path in root.iterdir()} if root.exists() else set()
    see_archive(str(root), found, create=create)
    if create:
        for name in layout.PLACES:
            with refused(root / name, "write"):
                (root / name).mkdir(parents=True, exist_ok=True)
    return Disk(root)


def see_archive(place: str, found: set[str], *, create: bool) -> None:
    """See that a place in which these names were ``found`` is an archive, or can be made one.

    Raises
    ------
    ArchiveProblem
        As ``open_archive``.

    """
    ours = {*layout.PLACES, layout.LOCK}
    if found - ours and not found.issuperset(TABLE_NAMES):
        other = min(found - ours)
        raise ArchiveProblem(
            f"{place}: holds other things ('{other}') and no archive; give an empty or new directory, "
            "or that of an archive."
        )
    if not create and not found.issuperset(TABLE_NAMES):
        raise ArchiveProblem(
            f"{place}: there is no archive here; give the directory that 'seawhence run' was given as --archive."
        )
