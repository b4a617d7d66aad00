"""A draft of a ``cruise.toml`` for one file: what its columns seem to be, with every doubt said. No run uses it."""

from __future__ import annotations

from pathlib import PurePosixPath
from typing import TYPE_CHECKING

from pipeline.reading.cells import Cells, read_cells
from pipeline.reading.cruise_faults import BLANK
from pipeline.reading.cruise_file import find_faults
from pipeline.reading.cruise_form import DELIMITERS
from pipeline.reading.delivery import DeliveryKind
from pipeline.reading.described import table_cells
from pipeline.reading.description import Description
from pipeline.reading.draft_columns import guess_columns, toml
from pipeline.reading.draft_layout import Guess, guess_text_layout, guess_workbook_layout
from pipeline.reading.exchange_names import exchange_meanings, heading_of
from pipeline.reading.files import is_sheet, is_workbook
from pipeline.reading.headings import TableCells, named
from pipeline.reading.identity import usable_expocode
from pipeline.reading.netcdf import NETCDF_MAGICS
from pipeline.reading.parquet import PARQUET_MAGIC
from pipeline.reading.sheet import find_sheet
from pipeline.reading.spellings import in_words
from pipeline.reading.text import delivered_text
from pipeline.reading.zips import ZIP_MAGICS
from pipeline.variables import REGISTRY, FlagScheme

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from pipeline.reading.draft_columns import ColumnGuess
    from pipeline.reading.sheet import Sheet
    from pipeline.settings import ReadingSettings

_NEEDED = {
    "expocode": "the cruise's code, such as ZZV120090214",
    "station": "one text for all rows; or leave it out here, and under [file.joined] write station = [columns]",
    "latitude": "degrees north, one number for all rows",
    "longitude": "degrees east, one number for all rows",
    "pressure": "dbar, one number for all rows; or depth = metres",
}
_GIVEN_BY = {
    "latitude": {"latitude", "latitude_degrees"},
    "longitude": {"longitude", "longitude_degrees"},
    "pressure": {"pressure", "depth"},
}
_OPEN = '{ quantity = "" }'
_HEAD = """\
# A draft by seawhence, guessed from the names, units and values that are in the file. Nothing of it was used.
# Read every line: a doubt is marked so, and what is behind a # at the start of a line is not in force.
# What no line gives a quantity passes through under the name it came with.
"""


def draft_description(name: str, data: bytes, limits: ReadingSettings) -> str:
    """Return a ``cruise.toml`` for a file, as text.

    Raises
    ------
    DeliveryProblem
        Where the file is cut or spoiled, or is none that a description can help.

    """
    shown = PurePosixPath(name).name
    if data.startswith(NETCDF_MAGICS):
        return _head_alone(shown, "A NetCDF file is read by the names and units that it carries.")
    if data.startswith(ZIP_MAGICS) and not is_workbook(data):
        return _head_alone(shown, "A zip of casts in the exchange format is read as it is.")
    if not data.startswith((PARQUET_MAGIC, *ZIP_MAGICS)):
        text = delivered_text(name, data)
        if is_sheet(text, limits):
            return _of_exchange(shown, find_sheet(text, limits.columns))
    guess = _layout(name, data, limits)
    description = Description(shown, DeliveryKind.BOTTLE, layout=guess.layout)
    table = table_cells(name, data, limits, description)
    guesses = guess_columns(table, decimal_comma=guess.layout.decimal == ",")
    kind, why = _kind(guesses)
    lines = [
        _HEAD,
        "[[file]]",
        f"files = {toml(shown)}",
        f"kind = {toml(kind.value)}  # {why}",
        *_layout_lines(guess),
        "",
        *_constants(guesses),
        "",
        "[file.columns]",
        *_column_lines(guesses),
    ]
    return _without_faults("\n".join(lines) + "\n")


def _layout(name: str, data: bytes, limits: ReadingSettings) -> Guess:
    if data.startswith(PARQUET_MAGIC):
        return Guess(Description("").layout)
    if data.startswith(ZIP_MAGICS):
        return guess_workbook_layout(name, data, limits)
    encoding = None
    try:
        data.decode("utf-8-sig")
    except UnicodeDecodeError:
        encoding = None if data.startswith((b"\xff\xfe", b"\xfe\xff")) else "cp1252"
        try:
            data.decode("cp1252")
        except UnicodeDecodeError:
            encoding = None  # read as Latin-1
    text = data.decode(encoding).encode() if encoding else data
    return guess_text_layout(delivered_text(name, text).data.decode("utf-8", errors="replace"), encoding)


def _layout_lines(guess: Guess) -> list[str]:
    layout = guess.layout
    word = {mark: word for word, mark in DELIMITERS.items()}.get(layout.delimiter or "", layout.delimiter)
    keys = {
        "sheet": layout.sheet and toml(layout.sheet),
        "delimiter": word and toml(word),
        "decimal": toml(layout.decimal) if layout.decimal != "." else None,
        "names_line": layout.names_line,
        "units_line": layout.units_line,
        "first_line": layout.first_line,
        "comment": layout.comment and toml(layout.comment),
        "encoding": layout.encoding and toml(layout.encoding),
    }
    lines = [f"{key} = {value}" for key, value in keys.items() if value is not None]
    lines += [f"# doubt: {_comment(doubt)}" for doubt in guess.doubts]
    return [
        *lines,
        '# time_zone = "+00:00"  # hours that its times are ahead of UTC, where they are',
        '# missing = [-9, "n.d."]  # what stands for a missing value in all columns; -999 and blanks do anyway',
    ]


def _constants(guesses: Sequence[ColumnGuess]) -> list[str]:
    given = {guess.quantity for guess in guesses if guess.decided and guess.quantity}
    lines = ["[file.constants]"]
    for quantity, words in _NEEDED.items():
        if not given & _GIVEN_BY.get(quantity, {quantity}):
            lines.append(f'{quantity} = "{BLANK}"  # needed, and no column seems to give it: {words}')
    if "station" not in given:
        places = [
            g.column
            for g in guesses
            if g.decided and g.quantity in {"date_and_time", "date", "latitude", "longitude"}
        ]
        if places:
            lines += ["# [file.joined]", f"# station = [{', '.join(toml(place) for place in places)}]"]
    return [_comment_safe(line) for line in lines]


def _kind(guesses: Iterable[ColumnGuess]) -> tuple[DeliveryKind, str]:
    quantities = [guess.quantity for guess in guesses if guess.quantity]
    water = [name for name in quantities if name in REGISTRY and REGISTRY[name].flags is FlagScheme.WATER]
    if {"sample", "bottle"} & set(quantities) or water:
        said = next((name for name in quantities if name in {"sample", "bottle"}), None) or water[0]
        return DeliveryKind.BOTTLE, f'because of {said}; "ctd" if these are levels of a cast'
    return DeliveryKind.CTD, 'doubt: nothing speaks of bottles; "bottle" if these are samples'


def _column_lines(guesses: Sequence[ColumnGuess]) -> list[str]:
    lines = []
    for guess in guesses:
        remarks = [_comment(remark) for remark in guess.remarks]
        if guess.decided and guess.quantity:
            lines.append(f"{toml(guess.column)} = {_entry(guess)}")
        elif guess.quantity or not any("the flags of" in remark for remark in remarks):
            said = _entry(guess) if guess.quantity else _OPEN
            lines.append(f"# {_comment_safe(toml(guess.column))} = {_comment_safe(said)}")
        else:
            lines.append(f"# {_comment_safe(toml(guess.column))}")
        lines += [f"#     {remark}" for remark in remarks]
    return lines


def _entry(guess: ColumnGuess) -> str:
    if not guess.entries:
        return toml(guess.quantity or "")
    more = "".join(f", {key} = {value}" for key, value in guess.entries.items())
    return f"{{ quantity = {toml(guess.quantity or '')}{more} }}"


def _comment(text: str) -> str:
    """Return a text as it may stand in a comment: on one line, without what TOML forbids there."""
    return _comment_safe(" ".join(text.split()))


def _comment_safe(text: str) -> str:
    return "".join(letter if letter.isprintable() or letter == "\t" else "?" for letter in text)


def _without_faults(text: str) -> str:
    """Return a draft with what would be a fault in it put behind a #, and the fault as a doubt."""
    lines = text.split("\n")
    for _ in range(len(lines)):
        faults = [
            (line, words)
            for line, words in find_faults("\n".join(lines))
            if line and BLANK not in lines[line - 1] and not lines[line - 1].startswith(("#", "["))
        ]
        if not faults:
            break
        line, words = faults[0]
        lines[line - 1] = f"# {_comment_safe(lines[line - 1])}\n#     doubt: {_comment(words)}"
        lines = "\n".join(lines).split("\n")
    return "\n".join(lines)


def _of_exchange(shown: str, sheet: Sheet) -> str:
    """Return a draft for an exchange file, which needs one only where a name or the expocode is odd."""
    meanings, _ = exchange_meanings(heading_of(sheet))
    cells = read_cells(sheet, (False,) * len(sheet.names))
    known = [*meanings.values, *meanings.flags]
    codes = [
        cells.columns[i].to_pylist()[:1]
        for i, name in enumerate(sheet.names)
        if name in meanings.values and meanings.values[name].name == "expocode"
    ]
    written = sheet.header.get("EXPOCODE") or next((code[0] for code in codes if code), "")
    strangers = [i for i, name in enumerate(sheet.names) if name not in known]
    table = TableCells(
        shown, named([sheet.names[i] for i in strangers]), tuple(sheet.units[i] for i in strangers),
        Cells(tuple(cells.columns[i] for i in strangers), cells.lines, ()), str,
    )  # fmt: skip
    lines = [
        _HEAD,
        "# The file is in the exchange format and needs no description but for what is odd in it.",
        "[[file]]",
    ]
    lines += [f"files = {toml(shown)}", "", "[file.constants]"]
    if usable_expocode(written) is None:
        lines.append(
            _comment_safe(f'expocode = "{BLANK}"  # in place of {written[:40]!r}, which cannot name a cruise')
        )
    else:
        lines.append(f'# expocode = "{usable_expocode(written)}"  # as in the file')
    lines += ["", "[file.columns]"]
    given = {variable.name for variable in meanings.values.values()}
    for guess in guess_columns(table, decimal_comma=sheet.delimiter == ";"):
        said = (
            f"{in_words(guess.quantity)}?"
            if guess.quantity and guess.quantity not in given
            else "passes through"
        )
        entry = _entry(guess) if guess.quantity else _OPEN
        lines.append(_comment_safe(f"# {toml(guess.column)} = {entry}"))
        lines += [f"#     {_comment(remark)}" for remark in [said, *guess.remarks]]
    return "\n".join(lines) + "\n"


def _head_alone(shown: str, words: str) -> str:
    needed = _NEEDED["expocode"]
    return (
        f"{_HEAD}\n# {words}\n# It needs a description only for what it lacks or has wrong.\n[[file]]\n"
        f'files = {toml(shown)}\n\n[file.constants]\n# expocode = "{BLANK}"  # {needed}\n'
    )
