"""Reading ``cruise.toml``, the description of the files beside it."""

from __future__ import annotations

import re
import tomllib
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from pipeline.problems import DeliveryProblem
from pipeline.reading.cruise_faults import constant_text, meaning_faults
from pipeline.reading.cruise_form import DELIMITERS, entries, form_faults, time_zone
from pipeline.reading.delivery import DeliveryKind
from pipeline.reading.description import ColumnEntry, Description, Layout
from pipeline.reading.schemes import Scheme
from pipeline.toml_text import line_of

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pipeline.reading.cruise_form import Location

CRUISE_FILE = "cruise.toml"

_MOST_BYTES = 1_000_000
_MOST_TOLD = 50


@dataclass(frozen=True, slots=True)
class CruiseFile:
    """What one ``cruise.toml`` says."""

    descriptions: tuple[Description, ...] = ()
    stands: tuple[str, ...] = ()
    stands_line: int | None = None

    def of(self, file_name: str) -> Description | None:
        """Return the description of a file of its folder, None where it is not described.

        A name goes before a pattern, and of several patterns the first.
        """
        exact = (one for one in self.descriptions if one.files == file_name)
        return next(exact, None) or next((one for one in self.descriptions if one.fits(file_name)), None)


def read_cruise_file(name: str, data: bytes) -> CruiseFile:
    """Read a ``cruise.toml``.

    Parameters
    ----------
    name
        What to call it in sentences.
    data
        Its bytes.

    Raises
    ------
    DeliveryProblem
        With one sentence that tells everything that is wrong in it, in the order of its lines.

    """
    text = _text(name, data)
    written = _parsed(name, text)
    placed = _placed(text, written)
    if placed:
        raise DeliveryProblem("unusable-description", _told(name, placed))
    return CruiseFile(
        tuple(_description(name, text, index, file) for index, file in enumerate(written.get("file", []))),
        tuple(written.get("cruise", {}).get("stands", [])),
        line_of(text, ("cruise", "stands")),
    )


def _text(name: str, data: bytes) -> str:
    if len(data) > _MOST_BYTES:
        raise DeliveryProblem(
            "unusable-description",
            f"{name}: found {len(data)} bytes; expected a description of at most {_MOST_BYTES}; write a shorter one.",
        )
    try:
        return data.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise DeliveryProblem(
            "unusable-description",
            f"{name}, line {line}: found bytes that are not UTF-8 text; expected a TOML file; save it as UTF-8.",
            line,
        ) from error


def _parsed(name: str, text: str) -> dict[str, Any]:
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        place = re.search(r"\(at line (\d+)", str(error))
        line = int(place[1]) if place else text.count("\n") + 1
        what = str(error).partition(" (at ")[0]
        twice = _twice(what, text.split("\n")[line - 1])
        words = twice or f"found text that is not TOML ({what}); expected a description; correct that line."
        raise DeliveryProblem("unusable-description", f"{name}, line {line}: {words}", line) from error
    except RecursionError as error:
        raise DeliveryProblem(
            "unusable-description",
            f"{name}: found tables nested beyond reason; expected a description; write it anew.",
        ) from error


def _twice(what: str, line: str) -> str:
    """Return the words for a name that stands twice, which TOML does not allow, "" where that is not what is wrong."""
    if what.startswith("Cannot declare") and (table := re.match(r"\s*\[+([^\]]*)", line)):
        of = " for each [[file]]" if table[1].strip().startswith("file") else ""
        return f"found the table [{table[1].strip()}] a second time; expected it once{of}; join the two."
    key = re.match(r"""\s*(?:"([^"]*)"|'([^']*)'|([^=\s]+))\s*=""", line)
    if what.startswith("Cannot overwrite") and key:
        name = next(part for part in key.groups() if part is not None)
        return f"found '{name[:80]}' a second time in the same table; expected each name once; remove one of the two."
    if inline := re.match(r"Duplicate inline table key (.*)", what):
        return f"found the key {inline[1][:80]} twice in one line; expected it once; remove one of the two."
    return ""


def find_faults(text: str) -> list[tuple[int, str]]:
    """Return the line, 0 where there is none, and the words of every fault in a text that is TOML, by line."""
    return _placed(text, tomllib.loads(text))


def _placed(text: str, written: Mapping[str, Any]) -> list[tuple[int, str]]:
    faults = [*form_faults(written), *meaning_faults(written)]
    return sorted({(_line(text, fault.location), fault.sentence) for fault in faults})


def _line(text: str, location: Location) -> int:
    """Return the line of a location, 0 where nothing of it is written; of a list of tables, its first."""
    return line_of(text, location) or line_of(text, (*location, 0)) or 0


def _told(name: str, placed: list[tuple[int, str]]) -> str:
    """Return all faults in one sentence, in the order of their lines."""
    if len(placed) == 1:
        line, words = placed[0]
        return f"{name}, line {line}: {words}" if line else f"{name}: {words}"
    said = " ".join(f"line {line}: {words}" if line else words for line, words in placed[:_MOST_TOLD])
    more = f" and {len(placed) - _MOST_TOLD} more" if len(placed) > _MOST_TOLD else ""
    return f"{name}: {len(placed)} things are wrong in it: {said}{more}"


def _description(name: str, text: str, index: int, file: Mapping[str, Any]) -> Description:
    codes = _codes(file.get("missing", []))
    delimiter = file.get("delimiter")
    layout = Layout(
        format=file.get("format"),
        delimiter=None if delimiter is None else DELIMITERS.get(delimiter, delimiter),
        decimal=file.get("decimal", "."),
        names_line=file.get("names_line"),
        units_line=file.get("units_line"),
        first_line=file.get("first_line"),
        sheet=file.get("sheet"),
        encoding=file.get("encoding"),
        comment=file.get("comment"),
        missing=codes,
    )
    scheme = Scheme(file.get("flags", Scheme.WHP))
    return Description(
        files=file["files"],
        kind=DeliveryKind(file["kind"]) if "kind" in file else None,
        columns=tuple(
            _entry(
                column,
                {"quantity": said} if isinstance(said, str) else said,
                scheme,
                line_of(text, ("file", index, "columns", column)),
            )
            for column, said in entries(file, "columns").items()
        ),
        constants={key: constant_text(value) for key, value in entries(file, "constants").items()},
        joined={key: tuple(columns) for key, columns in entries(file, "joined").items()},
        layout=layout,
        time_zone=time_zone(file.get("time_zone", "UTC")) or 0,
        source=name,
        line=line_of(text, ("file", index)),
        files_line=line_of(text, ("file", index, "files")),
    )


def _entry(column: str, said: Mapping[str, Any], scheme: Scheme, line: int | None) -> ColumnEntry:
    return ColumnEntry(
        column=column,
        quantity=said["quantity"],
        unit=said.get("unit"),
        flag=said.get("flag"),
        flag_scheme=Scheme(said.get("flags", scheme)),
        missing=_codes(said.get("missing", [])),
        format=said.get("format"),
        line=line,
    )


def _codes(said: Any) -> tuple[str, ...]:
    return tuple(str(code) for code in (said if isinstance(said, list) else [said]))
