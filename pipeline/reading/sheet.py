"""Where the parts of an exchange file lie: stamp, header, column names, units and the block of data rows.

What is tolerated is what real files do: comments anywhere before the data, blank lines, units above
the names or not there, a header count that is wrong, END_DATA missing, semicolons for commas.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

from pipeline.findings import Finding, Severity
from pipeline.problems import DeliveryProblem
from pipeline.reading.delivery import DeliveryKind
from pipeline.variables import EXCHANGE_NAMES

if TYPE_CHECKING:
    from collections.abc import Iterator

    from pipeline.reading.text import DeliveredText

_END = re.compile(rb"^[ \t\"]*END_DATA[^\n]*", re.MULTILINE | re.IGNORECASE)
_STAMP = re.compile(r"\s*\"?(BOTTLE|CTD)\b", re.IGNORECASE)
_NUMBER = re.compile(r"[+-]?(\d+[.,]?\d*|[.,]\d+)([eE][+-]?\d+)?$")
_HEADER_COUNT = "NUMBER_HEADERS"


@dataclass(frozen=True, slots=True)
class Sheet:
    """The parts of one exchange file.

    ``block`` holds the data rows as they stand in the file, the first of them on ``first_line``.
    """

    text: DeliveredText
    kind: DeliveryKind
    names: tuple[str, ...]
    units: tuple[str, ...]
    delimiter: str
    block: bytes
    first_line: int
    names_line: int
    header: dict[str, str]
    findings: tuple[Finding, ...]


@dataclass(frozen=True, slots=True)
class _Line:
    number: int
    start: int
    end: int
    text: str


def kind_of(text: DeliveredText) -> DeliveryKind | None:
    """Return what the stamp says the file holds, None where there is no stamp of an exchange file."""
    for line in _written_lines(text, 0, 1):
        stamp = _STAMP.match(line.text)
        if stamp is None:
            return None
        return DeliveryKind.BOTTLE if stamp[1].upper() == "BOTTLE" else DeliveryKind.CTD
    return None


def find_sheet(text: DeliveredText, most_columns: int) -> Sheet:
    """Find the parts of an exchange file.

    Raises
    ------
    DeliveryProblem
        Where there is no stamp, no line of column names, or more columns than ``most_columns``.

    """
    kind = kind_of(text)
    if kind is None:
        first = text.data[:60].split(b"\n")[0].decode("utf-8", errors="replace").strip()
        raise DeliveryProblem(
            "not-a-cruise-file",
            f"{text.name}, line 1: found '{first}'; expected a line that starts with BOTTLE or CTD; it is no"
            " NetCDF, no zip, no spreadsheet and no Parquet file either, and no cruise.toml beside it describes it;"
            f" `seawhence mapping {text.name}` drafts one; or remove the file from the inbox.",
            1,
        )
    findings: list[Finding] = list(text.findings)
    lines = _written_lines(text, 0, 1)
    next(lines)  # the stamp
    header: dict[str, str] = {}
    line = next(lines, None)
    if kind is DeliveryKind.CTD:
        line = _read_header(lines, line, header, text.name, findings)
    names_line, units_line, after = _names_and_units(text, kind, line, lines, findings)
    delimiter = _delimiter(names_line.text)
    names = _cells(names_line.text, delimiter, most_columns, text.name, names_line.number)
    units = (
        _cells(units_line.text, delimiter, most_columns, text.name, units_line.number) if units_line else []
    )
    while names and not names[-1]:
        names.pop()
    units = (units + [""] * len(names))[: len(names)]
    stop = _end_of_data(text, after.start, findings)
    return Sheet(
        text=text,
        kind=kind,
        names=tuple(names),
        units=tuple(units),
        delimiter=delimiter,
        block=text.data[after.start : stop],
        first_line=after.number,
        names_line=names_line.number,
        header=header,
        findings=tuple(findings),
    )


def _written_lines(text: DeliveredText, start: int, number: int) -> Iterator[_Line]:
    """Yield the lines from ``start`` on that are neither blank nor comments."""
    data = text.data
    while start < len(data):
        end = data.find(b"\n", start)
        end = len(data) if end < 0 else end
        content = data[start:end].decode("utf-8", errors="replace").strip()
        if content and not content.lstrip('"').startswith("#"):
            yield _Line(number, start, end, content)
        start, number = end + 1, number + 1


def _read_header(
    lines: Iterator[_Line],
    line: _Line | None,
    header: dict[str, str],
    name: str,
    findings: list[Finding],
) -> _Line | None:
    """Read ``NAME = VALUE`` lines into ``header``; return the first line that is none."""
    first = line
    while line is not None and "=" in line.text:
        key, _, value = line.text.partition("=")
        header[key.strip().strip('"').upper()] = value.strip().strip('",;').strip()
        line = next(lines, None)
    stated = header.get(_HEADER_COUNT)
    if first is not None and stated != str(len(header)):
        findings.append(
            Finding(
                "header-count", Severity.NOTE,
                f"{name}, line {first.number}: NUMBER_HEADERS is {stated or 'missing'}, but {len(header)} header"
                " lines were found (it counts itself); all header lines were read.",
                value=stated, limit=str(len(header)), file=name, line=first.number,
            )
        )  # fmt: skip
    return line


def _names_and_units(
    text: DeliveredText,
    kind: DeliveryKind,
    line: _Line | None,
    lines: Iterator[_Line],
    findings: list[Finding],
) -> tuple[_Line, _Line | None, _Line]:
    """Return the line of names, the line of units if there is one, and the first line after both."""
    mark = "EXPOCODE" if kind is DeliveryKind.BOTTLE else "CTDPRS"
    second = next(lines, None)
    if line is not None and _names_score(line.text) == 0 and second is not None and _has(second.text, mark):
        third = next(lines, None)
        findings.append(
            Finding(
                "units-above-names", Severity.NOTE,
                f"{text.name}, line {line.number}: the units stand above the column names; they were read.",
                file=text.name, line=line.number,
            )
        )  # fmt: skip
        return second, line, third or _after_last(text)
    if line is None or _names_score(line.text) < 2:
        found = f"'{line.text[:60]}'" if line else "the end of the file"
        number = line.number if line else 1
        raise DeliveryProblem(
            "not-a-cruise-file",
            f"{text.name}, line {number}: found {found}; expected the line of column names"
            f" (with {mark} among them); ask for the file to be sent again.",
            number,
        )
    if second is not None and _is_units(second.text):
        return line, second, next(lines, None) or _after_last(text)
    findings.append(
        Finding(
            "no-units", Severity.DOUBT,
            f"{text.name}, line {line.number + 1}: the line of units is missing; the usual units of the exchange"
            " format were assumed for every column.",
            file=text.name, line=line.number + 1,
        )
    )  # fmt: skip
    return line, None, second or _after_last(text)


def _after_last(text: DeliveredText) -> _Line:
    return _Line(text.data.count(b"\n") + 1, len(text.data), len(text.data), "")


def _has(line: str, name: str) -> bool:
    return name in (cell.strip().strip('"').upper() for cell in re.split("[,;\t]", line))


def _names_score(line: str) -> int:
    """Return how many cells of a line are names of the exchange format."""
    cells = (cell.strip().strip('"').upper() for cell in re.split("[,;\t]", line[:20_000]))
    return sum(cell in EXCHANGE_NAMES for cell in cells)


def _is_units(line: str) -> bool:
    """Return whether a line can be the units: nothing in it is a number."""
    if _END.match(line.encode()):
        return False
    cells = [cell.strip().strip('"') for cell in re.split("[,;\t]", line)]
    return not any(_NUMBER.match(cell) for cell in cells if cell and cell != "1")


def _delimiter(line: str) -> str:
    return max(",;\t", key=line.count)


def _cells(line: str, delimiter: str, most: int, name: str, number: int) -> list[str]:
    if line.count(delimiter) >= most:
        raise DeliveryProblem(
            "too-many-columns",
            f"{name}, line {number}: found {line.count(delimiter) + 1} columns; expected at most {most};"
            " ask for the file to be sent again, or raise reading.columns in the settings.",
            number,
        )
    return [cell.strip().strip('"').strip() for cell in line.split(delimiter)]


def _end_of_data(text: DeliveredText, start: int, findings: list[Finding]) -> int:
    """Return where the data block ends, and note a missing or early end mark."""
    # the plain search is far faster, and hits in nearly every file
    plain = text.data.find(b"\nEND_DATA", start - 1)
    end = _END.match(text.data, plain + 1) if plain >= 0 else _END.search(text.data, start)
    if end is None:
        last = text.data.rstrip().count(b"\n") + 1
        findings.append(
            Finding(
                "no-end-mark", Severity.NOTE,
                f"{text.name}, line {last}: the file ends here, without END_DATA; every line was read, but the file may"
                " have been cut short.",
                file=text.name, line=last,
            )
        )  # fmt: skip
        return len(text.data)
    left = text.data[end.end() :].strip(b' \t\n,;"')
    if left:
        line = text.data.count(b"\n", 0, end.start()) + 2
        findings.append(
            Finding(
                "text-after-end", Severity.NOTE,
                f"{text.name}, line {line}: there is text after END_DATA; the format allows it and it was not read.",
                value=left[:60].decode("utf-8", errors="replace"), file=text.name, line=line,
            )
        )  # fmt: skip
    return end.start()
