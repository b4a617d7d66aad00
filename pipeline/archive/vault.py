"""Delivered bytes, kept as they came and addressed by their SHA-256."""

from __future__ import annotations

import hashlib
import io
import stat
import uuid
from contextlib import suppress
from pathlib import Path
from typing import IO, TYPE_CHECKING

from pipeline.archive import layout
from pipeline.archive.delivered_objects import ObjectPath
from pipeline.archive.refusals import is_of_storage, words_of
from pipeline.problems import ArchiveProblem, DeliveryProblem, Problem

if TYPE_CHECKING:
    from pipeline.archive.storage import Store

BLOCK = 1 << 20


def keep(store: Store, delivered: bytes | Path | ObjectPath) -> str:
    """Keep delivered bytes and return their SHA-256; bytes that are kept already are not written again.

    Parameters
    ----------
    store
        The archive.
    delivered
        The bytes, or the file that holds them: read in blocks, so it may be larger than memory.

    Raises
    ------
    DeliveryProblem
        If the file cannot be read, or changes while it is read.
    ArchiveProblem
        If the bytes cannot be written.

    """
    if isinstance(delivered, Path):
        try:
            if not stat.S_ISREG(delivered.stat().st_mode):  # a pipe or device might never end
                raise DeliveryProblem(
                    "not-a-file", f"{delivered}: found no regular file; deliver the cruise as a file."
                )
            with delivered.open("rb") as file:
                return _keep(store, file, str(delivered))
        except OSError as error:
            raise _unreadable(str(delivered), error) from error
    if isinstance(delivered, ObjectPath):
        try:
            with delivered.open() as file:
                return _keep(store, file, str(delivered))
        except OSError as error:
            raise _unreadable(str(delivered), error) from error
    return _keep(store, io.BytesIO(delivered), "delivered bytes")


def read(store: Store, sha256: str) -> bytes:
    """Return kept bytes, after checking that they are what was delivered.

    Raises
    ------
    ArchiveProblem
        If they were never kept, or are not what they were.

    """
    key = layout.raw_key(sha256)
    if store.size(key) is None:
        raise ArchiveProblem(
            f"{store.where(key)}: these bytes are not in the archive; run again with the file in the inbox."
        )
    kept = store.read(key)
    found = hashlib.sha256(kept).hexdigest()
    if found != sha256:
        raise ArchiveProblem(
            f"{store.where(key)}: damaged, its bytes hash to {found[:12]}... and not to its name; "
            "remove it and run again with the file in the inbox."
        )
    return kept


def _keep(store: Store, file: io.BufferedReader | io.BytesIO, name: str) -> str:
    sha256 = hashlib.file_digest(file, "sha256").hexdigest()
    size = file.seek(0, io.SEEK_END)
    key = layout.raw_key(sha256)
    if store.size(key) == size:
        return sha256
    file.seek(0)
    part = layout.part_key(uuid.uuid4().hex)
    in_memory = isinstance(file, io.BytesIO)  # what cannot change meanwhile need not be hashed again
    copied = hashlib.sha256()

    def fill(sink: IO[bytes]) -> None:
        while block := _block(file, name):
            if not in_memory:
                copied.update(block)
            sink.write(block)

    try:
        store.write(part, fill)
        if not in_memory and copied.hexdigest() != sha256:
            raise DeliveryProblem(
                "changing-file",
                f"{name}: it changed while it was read; deliver it again when it is finished.",
            )
        store.move(part, key)
    except Problem:
        with suppress(ArchiveProblem):  # the first refusal is the one to tell
            store.remove(part)
        raise
    store.settle([layout.RAW, key.rpartition("/")[0]])
    return sha256


def _block(file: IO[bytes], name: str) -> bytes:
    try:
        return file.read(BLOCK)
    except OSError as error:
        raise _unreadable(name, error) from error


def _unreadable(name: str, error: OSError) -> DeliveryProblem:
    said = error.strerror or (words_of(error)[0] if is_of_storage(error) else str(error))
    return DeliveryProblem(
        "unreadable-file", f"{name}: cannot be read ({said}); see to it that it can, and run again."
    )
