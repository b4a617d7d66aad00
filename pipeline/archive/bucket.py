"""An archive in a bucket of S3-compatible storage: the operations of ``Store``.

An object is put whole or not at all, and readers see it from then on. A move is a copy and a removal: a run
killed between the two leaves a table in both places, which publishing takes for what it is.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import IO, TYPE_CHECKING, Any, ClassVar

from pyarrow import fs

from pipeline.archive import conditional, layout, lease
from pipeline.archive.endpoint import SCHEME, bucket_path, files_of, read_endpoint
from pipeline.archive.refusals import refused
from pipeline.archive.storage import see_archive

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable
    from contextlib import AbstractContextManager

    from pipeline.archive.endpoint import Endpoint


@dataclass(frozen=True, slots=True)
class Bucket:
    """An archive below ``BUCKET/PATH``. Can be handed to another process, which has the keys in its environment."""

    root: str
    width: ClassVar[int] = 16  # requests at once: an answer takes milliseconds of waiting and no work

    def _path(self, key: str) -> str:
        return f"{self.root}/{key}"

    @property
    def _endpoint(self) -> Endpoint:
        return read_endpoint()

    @property
    def _files(self) -> Any:
        return files_of(read_endpoint())

    def where(self, key: str) -> str:
        """See ``Store``."""
        return f"{SCHEME}{self._path(key)}"

    def source(self, key: str) -> Any:
        """See ``Store``. What is asked of the file is read from the storage, and no more."""
        return self._files.open_input_file(self._path(key))

    def names(self, key: str) -> list[str]:
        """See ``Store``."""
        with refused(self.where(key), "read"):
            return sorted(info.base_name for info in _listed(self._files, self._path(key)))

    def size(self, key: str) -> int | None:
        """See ``Store``."""
        with refused(self.where(key), "read"):
            info = self._files.get_file_info(self._path(key))
            return int(info.size) if info.is_file else None

    def read(self, key: str) -> bytes:
        """See ``Store``."""
        with refused(self.where(key), "read"), self.source(key) as file:
            return bytes(file.read())

    def write(self, key: str, fill: Callable[[IO[bytes]], object]) -> None:
        """See ``Store``. What is half written when ``fill`` fails may stay: write to the staging place."""
        lease.require_trust(self.root)
        with refused(self.where(key), "write"), self._files.open_output_stream(self._path(key)) as file:
            fill(file)

    def move(self, key: str, target: str) -> None:
        """See ``Store``. A copy and a removal."""
        lease.require_trust(self.root)
        with refused(self.where(target), "write"):
            self._files.copy_file(self._path(key), self._path(target))
        self.remove(key)

    def remove(self, key: str) -> None:
        """See ``Store``."""
        lease.require_trust(self.root)
        with refused(self.where(key), "remove"):
            conditional.remove(self._endpoint, self._path(key))

    def settle(self, keys: Iterable[str]) -> None:
        """See ``Store``. An answered request has been settled by the storage."""

    def hold(
        self, key: str, patience: float = 0.0, *, fleeting: bool = False
    ) -> AbstractContextManager[None]:
        """Hold ``key`` as ``lease.hold`` says; its object never stays."""
        del fleeting
        return lease.hold(self._endpoint, self._path(key), patience, self._path(layout.STAGING))


def open_bucket(place: str, *, create: bool = False) -> Bucket:
    """Return the archive at ``s3://BUCKET/PATH``, as ``open_archive`` says; its places are marked by empty objects.

    Raises
    ------
    ArchiveProblem
        As ``open_archive``, and where the environment does not say how to reach it, or the storage refuses.

    """
    store = Bucket(bucket_path(place))
    shown, endpoint = f"{SCHEME}{store.root}", read_endpoint()
    with refused(shown, "read"):
        found = {info.base_name for info in _listed(files_of(endpoint), store.root)}
    see_archive(shown, found, create=create)
    if create:
        for name in layout.PLACES:
            if name not in found:
                with refused(store.where(name), "write"):
                    conditional.put(endpoint, f"{store.root}/{name}/", b"", replacing=None)
    return store


def _listed(files: Any, path: str) -> list[Any]:
    """Return what lies directly under a path; nothing where there is no such place."""
    return list(files.get_file_info(fs.FileSelector(path, allow_not_found=True)))
