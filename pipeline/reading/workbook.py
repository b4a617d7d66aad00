"""The parts of a spreadsheet (.xlsx, ECMA-376): its sheets, texts and date formats, within what settings bear.

The parts are read here and not with a library for spreadsheets, because every row has to be accounted for: those at
hand leave out rows in silence where a sheet states its size wrongly, or make millions of blank ones.
"""

from __future__ import annotations

import io
import re
import zipfile
from dataclasses import dataclass
from enum import Enum
from functools import lru_cache
from posixpath import join, normpath
from typing import TYPE_CHECKING, Any
from xml.etree import ElementTree as ET

from pipeline.problems import DeliveryProblem
from pipeline.reading.headings import refuse_cells
from pipeline.reading.zips import ZIP_ERRORS

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping
    from typing import IO

    from pipeline.settings import ReadingSettings

WORKBOOK = "xl/workbook.xml"
OLD_SPREADSHEET_MAGIC = b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1"
BROKEN = (*ZIP_ERRORS, ET.ParseError, KeyError, IndexError, UnicodeError, AttributeError, RecursionError)
_GIGABYTE = 1e9
_LITERAL = re.compile(r'"[^"]*"|\\.|_.|\*.|\[(?![hms]+\])[^\]]*\]', re.IGNORECASE)
_ESCAPE = re.compile(r"_x([0-9A-Fa-f]{4})_")


class Shown(Enum):
    """What a cell's number format makes of its number."""

    NUMBER = "number"
    DATE = "date"
    TIME = "time"
    BOTH = "date and time"


# Number formats that every spreadsheet knows without writing them down: ECMA-376, part 1, section 18.8.30.
_BUILT_IN = {
    **dict.fromkeys((14, 15, 16, 17, *range(27, 32), 36, *range(50, 55), 57, 58), Shown.DATE),
    **dict.fromkeys((18, 19, 20, 21, *range(32, 36), 45, 46, 47, 55, 56), Shown.TIME),
    22: Shown.BOTH,
}


@dataclass(frozen=True, slots=True)
class SheetPart:
    """One sheet: its name, its member of the zip, and whether it can be seen."""

    name: str
    member: str
    visible: bool


@dataclass(frozen=True, slots=True)
class Workbook:
    """What the cells of all sheets refer to."""

    archive: zipfile.ZipFile
    sheets: tuple[SheetPart, ...]
    texts: tuple[str, ...]  # shared by number
    styles: tuple[Shown, ...]  # by number
    since_1904: bool  # whether days are counted from 1904


def open_workbook(name: str, data: bytes, limits: ReadingSettings) -> Workbook:
    """Open a spreadsheet.

    Raises
    ------
    DeliveryProblem
        Where it is cut or spoiled, or would unpack to more than is borne.

    """
    try:
        archive = zipfile.ZipFile(io.BytesIO(data))
        unpacked = sum(member.file_size for member in archive.infolist())
    except ZIP_ERRORS as error:
        raise broken(name, error) from error
    if unpacked > limits.unpacked_bytes:
        raise DeliveryProblem(
            "too-large",
            f"{name}: the spreadsheet unpacks to {unpacked / _GIGABYTE:.1f} GB; expected at most"
            f" {limits.unpacked_bytes / _GIGABYTE:.1f} GB; deliver it in parts, or raise reading.unpacked_bytes in the"
            " settings.",
        )
    try:
        targets = _targets(archive)
        sheets, since_1904 = _sheets(archive, targets)
        texts = tuple(_texts(name, archive, _only(targets, "sharedStrings"), limits))
        styles = tuple(_styles(archive, _only(targets, "styles")))
    except BROKEN as error:
        raise broken(name, error) from error
    return Workbook(archive, sheets, texts, styles, since_1904)


def broken(name: str, error: Exception) -> DeliveryProblem:
    """Return the refusal of a spreadsheet that is cut or spoiled."""
    words = " ".join(str(error).split())[:160] or type(error).__name__
    return DeliveryProblem(
        "broken-spreadsheet",
        f"{name}: the spreadsheet is cut or spoiled ({words}); ask for it to be sent again.",
    )


def elements(stream: IO[bytes], wanted: frozenset[str]) -> Iterator[ET.Element]:
    """Yield the elements of some names, complete, and forget what is in each one after."""
    head = stream.read(1_000)
    if b"<!DOCTYPE" in head:
        raise ValueError("it defines words of its own, which no spreadsheet does")
    parser: Any = ET.XMLPullParser(("end",))
    while head:
        parser.feed(head)
        for _, element in parser.read_events():
            if local(element) in wanted:
                yield element
                element.clear()
        head = stream.read(1 << 16)
    parser.close()


def local(element: ET.Element) -> str:
    """Return the name of an element without its namespace, which differs between editions of the standard."""
    return _local(element.tag)


@lru_cache(maxsize=1_000)
def _local(tag: str) -> str:
    return tag.rpartition("}")[2]


def text_of(element: ET.Element) -> str:
    """Return the text of a cell or shared text, its differently formatted runs joined, without reading aids."""
    if local(element) == "t":
        return _ESCAPE.sub(lambda match: chr(int(match[1], 16)), element.text or "")
    return "".join(text_of(child) for child in element if local(child) in {"t", "r"})


def _part(archive: zipfile.ZipFile, member: str) -> Iterator[ET.Element]:
    """Yield every element of a small part, from the root down."""
    with archive.open(member) as stream:
        head = stream.read()
    if b"<!DOCTYPE" in head[:1_000]:
        raise ValueError("it defines words of its own, which no spreadsheet does")
    yield from ET.fromstring(head).iter()  # noqa: S314 - no document type, and expat bounds what entities expand to


def _attribute(element: ET.Element, name: str) -> str | None:
    """Return an attribute by its name, in whatever namespace."""
    return next((value for key, value in element.attrib.items() if key.rpartition("}")[2] == name), None)


def _targets(archive: zipfile.ZipFile) -> dict[str, tuple[str, str]]:
    """Return what kind of part each reference of the workbook leads to, and the part's member of the zip."""
    found = {}
    for element in _part(archive, "xl/_rels/workbook.xml.rels"):
        if local(element) == "Relationship":
            target, kind = element.get("Target", ""), element.get("Type", "")
            member = normpath(target.lstrip("/") if target.startswith("/") else join("xl", target))
            found[element.get("Id", "")] = (kind.rpartition("/")[2], member)
    return found


def _sheets(
    archive: zipfile.ZipFile, targets: Mapping[str, tuple[str, str]]
) -> tuple[tuple[SheetPart, ...], bool]:
    sheets = []
    since_1904 = False
    for element in _part(archive, WORKBOOK):
        if local(element) == "workbookPr":
            since_1904 = element.get("date1904", "0") in {"1", "true"}
        if local(element) != "sheet":
            continue
        kind, member = targets.get(_attribute(element, "id") or "", ("", ""))
        if kind == "worksheet":
            visible = element.get("state", "visible") == "visible"
            sheets.append(SheetPart(element.get("name", ""), member, visible))
    return tuple(sheets), since_1904


def _only(targets: Mapping[str, tuple[str, str]], wanted: str) -> str | None:
    """Return the one part of a kind, None where the workbook has none."""
    return next((member for kind, member in targets.values() if kind == wanted), None)


def _texts(name: str, archive: zipfile.ZipFile, member: str | None, limits: ReadingSettings) -> Iterator[str]:
    if member is None:
        return
    with archive.open(member) as stream:
        for count, element in enumerate(elements(stream, frozenset({"si"})), start=1):
            refuse_cells(name, count, limits)
            yield text_of(element).strip()


def _styles(archive: zipfile.ZipFile, member: str | None) -> Iterator[Shown]:
    if member is None:
        return
    codes: dict[int, str] = {}
    for element in _part(archive, member):
        if local(element) == "numFmt":
            codes[int(element.get("numFmtId", "-1"))] = element.get("formatCode", "")
        elif local(element) == "cellXfs":
            for style in element:
                number = int(style.get("numFmtId", "0"))
                yield shown_by(codes[number]) if number in codes else _BUILT_IN.get(number, Shown.NUMBER)


def shown_by(code: str) -> Shown:
    """Return what a written number format shows."""
    letters = _LITERAL.sub("", code.partition(";")[0]).lower().replace("general", "")
    day = "y" in letters or "d" in letters or "mmm" in letters
    clock = "h" in letters or "s" in letters
    if day and clock:
        return Shown.BOTH
    if clock:
        return Shown.TIME
    return Shown.DATE if day or letters.strip(" -/.,") in {"m", "mm"} else Shown.NUMBER


def is_true(value: Any) -> str:
    """Return a truth value as spreadsheets show it."""
    return "TRUE" if value in {"1", "true"} else "FALSE"
