"""A place in a bucket: what of a path is needed to name it, and to read a delivered file there."""

from __future__ import annotations

import errno
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import PurePosixPath
from typing import TYPE_CHECKING, Any, Literal

from pipeline.archive.endpoint import SCHEME, bucket_path, files_of, read_endpoint
from pipeline.archive.refusals import words_of

if TYPE_CHECKING:
    from collections.abc import Iterator


@dataclass(frozen=True, slots=True, order=True)
class ObjectPath:
    """``s3://BUCKET/KEY``. Every failure is an ``OSError`` with a number and words, as of a file."""

    place: str

    def __str__(self) -> str:
        return self.place

    def __truediv__(self, name: str) -> ObjectPath:
        return ObjectPath(f"{self.place}/{name}")

    @property
    def name(self) -> str:
        """What follows the last slash."""
        return self.place.rpartition("/")[2]

    @property
    def parent(self) -> ObjectPath:
        """What precedes the last slash."""
        return ObjectPath(self.place.rpartition("/")[0])

    def relative_to(self, other: ObjectPath) -> PurePosixPath:
        """Return the way from ``other``, which is above it."""
        return PurePosixPath(self.place.removeprefix(f"{other.place}/"))

    def absolute(self) -> ObjectPath:
        """Return itself."""
        return self

    def resolve(self) -> ObjectPath:
        """Return itself."""
        return self

    def __fspath__(self) -> str:
        return self.place

    def is_dir(self) -> bool:
        """Return whether anything lies below it."""
        with _worded(self.place):
            return str(_files().get_file_info(bucket_path(self.place)).type) == "FileType.Directory"

    def is_file(self) -> bool:
        """Return whether there is such an object."""
        with _worded(self.place):
            return bool(_files().get_file_info(self._path).is_file)

    def read_bytes(self) -> bytes:
        """Return its bytes."""
        with _worded(self.place), _files().open_input_file(self._path) as file:
            return bytes(file.read())

    @contextmanager
    def open(self, mode: Literal["rb"] = "rb") -> Iterator[Any]:
        """Open it as a binary file that can be read and moved about in."""
        del mode
        with _worded(self.place), _files().open_input_file(self._path) as file:
            yield file

    @property
    def _path(self) -> str:
        return self.place.removeprefix(SCHEME)


def objects_below(place: str) -> list[ObjectPath] | None:
    """Return every object below ``s3://BUCKET/PATH``, by name; None where there is no such place.

    Raises
    ------
    OSError
        If the storage refuses or does not answer.
    ArchiveProblem
        If the place is not written so, or the environment does not say how to reach it.

    """
    from pyarrow import fs  # noqa: PLC0415 - for storage of this kind only

    path = bucket_path(place)
    with _worded(place):
        files = _files()
        if files.get_file_info(path).type == fs.FileType.NotFound:
            return None
        found = files.get_file_info(fs.FileSelector(path, recursive=True))
    return sorted(ObjectPath(f"{SCHEME}{info.path}") for info in found if info.is_file)


def _files() -> Any:
    return files_of(read_endpoint())


@contextmanager
def _worded(place: str) -> Iterator[None]:
    try:
        yield
    except OSError as error:
        if error.errno is not None:
            raise
        raise OSError(errno.EIO, words_of(error)[0], place) from error
