"""A zip of CTD casts to a Delivery; a member that cannot be used is refused alone."""

from __future__ import annotations

import io
import re
import zipfile
import zlib
from collections import Counter
from typing import IO, TYPE_CHECKING

from pipeline.findings import Finding, Reject, Severity
from pipeline.problems import DeliveryProblem
from pipeline.reading.delivery import Delivery, DeliveryKind, stack
from pipeline.reading.exchange import read_sheet
from pipeline.reading.netcdf import NETCDF_MAGICS, read_netcdf
from pipeline.reading.sheet import find_sheet, kind_of
from pipeline.reading.text import delivered_text

if TYPE_CHECKING:
    from collections.abc import Iterator

    import pyarrow as pa

    from pipeline.reading.assembly import ReadRows
    from pipeline.reading.description import Description
    from pipeline.reading.spread import Spread
    from pipeline.settings import ReadingSettings

ZIP_MAGICS = (b"PK\x03\x04", b"PK\x05\x06")  # the second is an empty zip's
# All that the library raises on zips that are cut, spoiled, packed in an odd way or not zips at all.
ZIP_ERRORS = (
    zipfile.BadZipFile, zlib.error, RuntimeError, NotImplementedError, EOFError, OSError, ValueError,
)  # fmt: skip
_LOCKED = 0x1  # bit of a member's flags: it needs a password
# What operating systems put into zips by themselves; nobody delivers it.
_LITTER = re.compile(r"(^|/)(__MACOSX/|\.DS_Store$|\._|Thumbs\.db$)")
_GIGABYTE = 1e9


class ZipAccount:
    """What became of the members of one zip, and of their rows, apart from the rows that are kept."""

    def __init__(self, name: str, limits: ReadingSettings) -> None:
        self._name, self._limits = name, limits
        self._rejects: list[Reject] = []
        self._refused: list[tuple[str, DeliveryProblem]] = []
        self._not_casts: list[Finding] = []
        self._findings: list[Finding] = []
        self._spread: list[Spread] = []
        self._words: dict[str, str] = {}
        self._rows = self._kept = 0

    def taken(self, member: str, read: ReadRows | DeliveryProblem | None) -> pa.Table | None:
        """Note what was read of a member, and return the rows of a cast, None where it is refused or is none."""
        if isinstance(read, DeliveryProblem):
            self._refused.append((member, read))
        elif read is None:
            self._not_casts.append(_not_a_cast(self._name, member))
        else:
            self._rejects += read.rejects
            self._findings += read.findings
            self._spread += read.spread
            self._words |= read.words
            self._rows += read.rows
            self._kept += read.table.num_rows
            return read.table
        return None

    def delivery(self, sha256: str, size: int, tables: list[pa.Table]) -> Delivery:
        """Return the delivery, with ``tables`` as its kept rows: those of every cast, or some that stand for them.

        Raises
        ------
        DeliveryProblem
            Where there is no cast.

        """
        if not tables:
            raise _no_cast(self._name, self._refused)
        rejects = [
            *self._rejects,
            *(
                Reject(self._name, None, member[: self._limits.raw_text], problem.reason, str(problem))
                for member, problem in self._refused
            ),
        ]
        table = stack(tables)
        return Delivery(
            self._name, sha256, size, DeliveryKind.CTD,
            table=table,
            rows=self._rows - self._kept + table.num_rows + len(self._refused),
            rejects=tuple(rejects),
            findings=(*self._not_casts, *self._findings),
            refused_members=len(self._refused),
            spread=tuple(self._spread),
            words=self._words,
        )  # fmt: skip


def read_zip(
    name: str, data: bytes, sha256: str, limits: ReadingSettings, description: Description | None = None
) -> Delivery:
    """Read a zip of CTD casts; a member that cannot be used is refused alone. A description is of every cast."""
    account = ZipAccount(name, limits)
    tables = [
        table
        for member, read in read_members(name, data, limits, description)
        if (table := account.taken(member, read)) is not None
    ]
    return account.delivery(sha256, len(data), tables)


def unpacked_size(file: IO[bytes] | str) -> int | None:
    """Return the bytes that the members of a zip unpack to by its own word, None where it is no zip."""
    try:
        with zipfile.ZipFile(file) as archive:
            return sum(member.file_size for member in archive.infolist())
    except ZIP_ERRORS:
        return None


def read_members(
    name: str, data: bytes, limits: ReadingSettings, description: Description | None = None
) -> Iterator[tuple[str, ReadRows | DeliveryProblem | None]]:
    """Yield of each member of a zip its name and what was read: a cast, why it is refused, or None where it is none.

    Raises
    ------
    DeliveryProblem
        Where the zip is refused whole.

    """
    try:
        archive = zipfile.ZipFile(io.BytesIO(data))
    except ZIP_ERRORS as error:
        raise DeliveryProblem(
            "broken-zip", f"{name}: the zip cannot be opened ({error}); ask for it to be sent again."
        ) from error
    with archive:
        members = [
            m for m in archive.infolist() if not m.filename.endswith("/") and not _LITTER.search(m.filename)
        ]
        unpacked = sum(member.file_size for member in members)
        if unpacked > limits.unpacked_bytes:
            raise DeliveryProblem(
                "too-large",
                f"{name}: the zip unpacks to {unpacked / _GIGABYTE:.1f} GB; expected at most"
                f" {limits.unpacked_bytes / _GIGABYTE:.1f} GB; deliver the casts in several zips, or raise"
                " reading.unpacked_bytes in the settings.",
            )
        times = Counter(member.filename for member in members)
        for member in sorted(members, key=lambda m: m.filename):
            try:
                _refuse_name(name, member.filename, times[member.filename])
                read: ReadRows | DeliveryProblem | None = _read_member(
                    name, archive, member, limits, description
                )
            except DeliveryProblem as problem:
                read = problem
            yield member.filename, read


def _read_member(
    name: str,
    archive: zipfile.ZipFile,
    member: zipfile.ZipInfo,
    limits: ReadingSettings,
    description: Description | None,
) -> ReadRows | None:
    """Read one member; None where it is no exchange file at all."""
    shown = f"{name}:{member.filename}"
    if member.flag_bits & _LOCKED:
        raise DeliveryProblem(
            "locked-member",
            f"{shown}: the member needs a password; it was not read; pack it again without one.",
        )
    try:
        with archive.open(member) as stream:
            data = stream.read(member.file_size + 1)
    except ZIP_ERRORS as error:
        raise DeliveryProblem(
            "broken-member",
            f"{shown}: the member cannot be unpacked ({error}); pack it again and deliver the zip.",
        ) from error
    if data.startswith(NETCDF_MAGICS):
        kind, read = read_netcdf(shown, data, limits, description)
        _only_ctd(shown, kind)
        return read
    text = delivered_text(shown, data)
    of_sheet = kind_of(text)
    if of_sheet is None:
        return None
    _only_ctd(shown, of_sheet)
    return read_sheet(find_sheet(text, limits.columns), limits, description)


def _only_ctd(shown: str, kind: DeliveryKind) -> None:
    """Refuse a member that is no CTD cast."""
    if kind is DeliveryKind.BOTTLE:
        raise DeliveryProblem(
            "bottle-in-zip",
            f"{shown}: found a bottle file in a zip of CTD casts; it was not read; deliver it beside the zip.",
        )


def _refuse_name(name: str, member: str, times: int) -> None:
    """Refuse a member whose name is none, is a path, or is that of another member too."""
    if not member:
        raise DeliveryProblem(
            "member-name",
            f"{name}: a member of the zip has no name; it was not read; pack the casts again and deliver the zip.",
        )
    if ".." in member.split("/") or member.startswith(("/", "\\")) or "\\" in member:
        raise DeliveryProblem(
            "member-path",
            f"{name}: the member '{member[:80]}' has a path in its name; expected plain file names; it was"
            " not read; pack the casts without folders and deliver the zip again.",
        )
    if times > 1:
        raise DeliveryProblem(
            "repeated-member",
            f"{name}: {times} members of the zip are called '{member[:80]}'; expected each name once, and nothing"
            " tells which one stands; none of them was read; pack the casts again and deliver the zip.",
        )


def _not_a_cast(name: str, member: str) -> Finding:
    return Finding(
        "not-a-cast", Severity.NOTE,
        f"{name}: the member '{member[:80]}' is no CTD file of the exchange format; it was not read.",
        value=member[:200], file=name,
    )  # fmt: skip


def _no_cast(name: str, refused: list[tuple[str, DeliveryProblem]]) -> DeliveryProblem:
    if refused:
        _, first = refused[0]
        return DeliveryProblem(
            first.reason,
            f"{name}: none of the {len(refused)} casts in the zip can be used; the first: {first}",
        )
    return DeliveryProblem(
        "not-a-cruise-file",
        f"{name}: the zip holds no CTD file; expected files that start with CTD; remove it from the inbox.",
    )
