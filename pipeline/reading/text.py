"""From delivered bytes to text of one encoding and one line end; nothing here knows a format."""

from __future__ import annotations

import codecs
import re
from dataclasses import dataclass
from functools import cached_property

from pipeline.findings import Finding, Severity
from pipeline.problems import DeliveryProblem

_WORD = re.compile(rb"[^\x00-\x20,;|\"]*$"), re.compile(rb"[^\x00-\x20,;|\"]*")
_LONGEST_WORD = 30


@dataclass(frozen=True)
class DeliveredText:
    """The lines of a delivered file, UTF-8 bytes with line-feed ends and no byte-order mark."""

    name: str
    data: bytes
    findings: tuple[Finding, ...] = ()  # what had to be assumed of its letters

    @cached_property
    def lines(self) -> list[bytes]:
        """Every line, without its end. Costs a pass over the file: for odd files and rejects only."""
        return self.data.split(b"\n")

    def line(self, number: int) -> str:
        """Return line ``number``, counted from 1, as text."""
        return self.lines[number - 1].decode("utf-8", errors="replace")


def delivered_text(name: str, data: bytes) -> DeliveredText:
    """Return delivered bytes as text.

    Raises
    ------
    DeliveryProblem
        For an empty file, and for one that holds bytes no text has.

    """
    if not data.strip():
        raise DeliveryProblem(
            "empty-file", f"{name}: found an empty file; expected a cruise file; ask for it to be sent again."
        )
    if data.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        data = data.decode("utf-16", errors="replace").encode()
    data = data.removeprefix(codecs.BOM_UTF8)
    if b"\0" in data[:4096]:
        raise DeliveryProblem(
            "not-a-cruise-file",
            f"{name}: found binary data; expected an exchange bottle or CTD file, NetCDF, Parquet,"
            " a spreadsheet (.xlsx) or a zip of CTD files; remove it from the inbox, or ask for one of these.",
        )
    findings: tuple[Finding, ...] = ()
    try:
        data.decode("utf-8")
    except UnicodeDecodeError as error:
        findings = (_not_utf_8(name, data, error.start),)
        data = data.decode("latin-1").encode("utf-8")
    if b"\r" in data:
        data = data.replace(b"\r\n", b"\n").replace(b"\r", b"\n")
    return DeliveredText(name, data, findings)


def _not_utf_8(name: str, data: bytes, start: int) -> Finding:
    before, behind = data[max(0, start - _LONGEST_WORD) : start], data[start : start + _LONGEST_WORD]
    found = [pattern.search(part) for pattern, part in zip(_WORD, (before, behind), strict=True)]
    word = b"".join(match[0] for match in found if match).decode("latin-1")
    above = data[:start]
    line = above.count(b"\n") + above.replace(b"\r\n", b"").count(b"\r") + 1
    return Finding(
        "encoding-assumed", Severity.NOTE,
        f"{name}, line {line}: found letters that are not UTF-8; they were read as Latin-1, such as '{word}'.",
        value=word, limit="UTF-8", file=name, line=line,
    )  # fmt: skip
