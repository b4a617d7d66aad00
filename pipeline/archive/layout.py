"""Where things lie in an archive: the only place that knows. Pure text, no file system.

    samples/ casts/ mixtures/ findings/ rejects/     EXPOCODE.parquet each: what is published
    raw/ab/abcd...                                   delivered bytes, named by their SHA-256
    superseded/EXPOCODE/r0001/TABLE.parquet          earlier revisions, readable
    .staging/ .lock                                  working places, empty between runs

A key is a path inside the archive, its parts joined by ``/``: the same on a disk and on an object store.
"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING
from urllib.parse import unquote_to_bytes

from pipeline.problems import ArchiveProblem, BrokenPromise
from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    from collections.abc import Iterable

RAW = "raw"
SUPERSEDED = "superseded"
STAGING = ".staging"
LOCK = ".lock"
PLACES = (*TABLE_NAMES, RAW, SUPERSEDED, STAGING)  # the directories, in the order they are made
SUFFIX = ".parquet"
HELD_SUFFIX = "~held"  # no cruise's name holds a tilde
PART_SUFFIX = "~part"

LONGEST_NAME = 200  # file systems take 255 bytes; the rest is for suffixes

_PLAIN = re.compile(r"[A-Za-z0-9_.-]+")
_SHA256 = re.compile(r"[0-9a-f]{64}")
_REVISION = re.compile(r"r(\d{4,})")


def safe_name(expocode: str) -> str:
    """Return the file name of a cruise: every byte outside ``[A-Za-z0-9_.-]`` and a leading dot as ``%XX``.

    Raises
    ------
    ArchiveProblem
        If the expocode is empty, is longer than a file name can be, or is no text that can be stored.

    """
    try:
        encoded = expocode.encode("utf-8")
    except UnicodeEncodeError as error:
        raise ArchiveProblem(
            f"the expocode {expocode!r} holds a character that cannot be stored; correct it in the delivery."
        ) from error
    name = expocode
    if not _PLAIN.fullmatch(name):
        name = "".join(chr(byte) if _PLAIN.fullmatch(chr(byte)) else f"%{byte:02X}" for byte in encoded)
    if name.startswith("."):
        name = f"%2E{name[1:]}"
    if not name:
        raise ArchiveProblem("the expocode is empty, so the cruise has no name to be stored under.")
    if len(name) > LONGEST_NAME:
        raise ArchiveProblem(
            f"the expocode {expocode[:40]!r}... makes a file name of {len(name)} characters, "
            f"at most {LONGEST_NAME} can be stored; correct it in the delivery."
        )
    return name


def expocode_of(name: str) -> str | None:
    """Return the expocode whose ``safe_name`` is ``name``, or None where no expocode has it."""
    try:
        expocode = unquote_to_bytes(name).decode("utf-8")
        return expocode if safe_name(expocode) == name else None
    except (UnicodeError, ArchiveProblem):
        return None


def cruises_in(names: Iterable[str]) -> tuple[dict[str, str], list[str]]:
    """Return file name by expocode for one table's directory, and the names that are no cruise's."""
    cruises: dict[str, str] = {}
    strangers: list[str] = []
    for name in sorted(names):
        expocode = expocode_of(name.removesuffix(SUFFIX)) if name.endswith(SUFFIX) else None
        if expocode is None:
            strangers.append(name)
        else:
            cruises[expocode] = name
    return cruises, strangers


def table_key(table: str, expocode: str) -> str:
    """Return where a published table lies."""
    return f"{_known(table)}/{safe_name(expocode)}{SUFFIX}"


def is_superseded(key: str) -> bool:
    """Return whether a key is that of an earlier revision."""
    return key.startswith(f"{SUPERSEDED}/")


def superseded_key(expocode: str, revision: int | None = None, table: str | None = None) -> str:
    """Return where earlier revisions of a cruise lie: all of them, one, or one table of one."""
    key = f"{SUPERSEDED}/{safe_name(expocode)}"
    if revision is not None:
        key = f"{key}/r{revision:04d}"
        if table is not None:
            key = f"{key}/{_known(table)}{SUFFIX}"
    return key


def revision_of(name: str) -> int | None:
    """Return the revision that a directory under ``superseded/EXPOCODE/`` holds, None if it is no revision."""
    match = _REVISION.fullmatch(name)
    return int(match[1]) if match and name == f"r{int(match[1]):04d}" else None


def staging_key(expocode: str, table: str | None = None) -> str:
    """Return where a cruise's tables are made ready."""
    key = f"{STAGING}/{safe_name(expocode)}"
    return key if table is None else f"{key}/{_known(table)}{SUFFIX}"


def held_key(expocode: str) -> str:
    """Return the file that is held while a cruise is being published."""
    return f"{STAGING}/{safe_name(expocode)}{HELD_SUFFIX}"


def part_key(name: str) -> str:
    """Return where delivered bytes are put together under a name that nobody else uses."""
    return f"{STAGING}/{name}{PART_SUFFIX}"


def raw_key(sha256: str) -> str:
    """Return where delivered bytes lie, by their SHA-256 in lower-case hexadecimal."""
    if not _SHA256.fullmatch(sha256):
        raise ArchiveProblem(f"{sha256!r} is no SHA-256: 64 hexadecimal digits in lower case are expected.")
    return f"{RAW}/{sha256[:2]}/{sha256}"


def is_raw(folder: str, name: str) -> bool:
    """Return whether ``raw/FOLDER/NAME`` is a place of delivered bytes."""
    return bool(_SHA256.fullmatch(name)) and folder == name[:2]


def _known(table: str) -> str:
    if table not in TABLE_NAMES:
        raise BrokenPromise(f"the archive has no table '{table}'; it has {', '.join(TABLE_NAMES)}")
    return table
