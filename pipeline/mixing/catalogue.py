"""Reading the source catalogue: a usable one, or everything that is wrong with it at once."""

from __future__ import annotations

import re
import tomllib
from typing import TYPE_CHECKING

from pydantic import ValidationError

from pipeline.mixing.conversion import converted
from pipeline.mixing.entries import CatalogueFile
from pipeline.mixing.faults import entry_faults
from pipeline.mixing.form import form_faults
from pipeline.problems import CatalogueProblem
from pipeline.toml_text import line_of

if TYPE_CHECKING:
    from pathlib import Path

    from pipeline.mixing.entries import Catalogue
    from pipeline.mixing.form import Location

_MOST_BYTES = 1_000_000


def read_catalogue(path: Path) -> Catalogue:
    """Read a source catalogue.

    Raises
    ------
    CatalogueProblem
        With one sentence, on a line of its own, for everything that is wrong, in the order of the file.

    """
    try:
        size = path.stat().st_size
        data = b"" if size > _MOST_BYTES else path.read_bytes()
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) else error
        raise CatalogueProblem(
            f"{path}: the source catalogue cannot be read ({reason}); name a file."
        ) from error
    if size > _MOST_BYTES:
        raise CatalogueProblem(
            f"{path}: found {size} bytes; expected a source catalogue of at most {_MOST_BYTES}; name another file."
        )
    try:
        text = data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise CatalogueProblem(
            f"{path}, line {line}: found bytes that are not UTF-8 text; expected a TOML file; save it as UTF-8."
        ) from error
    return parse_catalogue(text, str(path))


def parse_catalogue(text: str, name: str) -> Catalogue:
    """Make a catalogue of the text of the file ``name``. Raises as ``read_catalogue`` does.

    Values of the published practice are made conservative here, so that all that follows sees one kind.
    """
    try:
        written = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise CatalogueProblem(_not_toml(name, text, str(error))) from error
    except RecursionError as error:
        raise CatalogueProblem(
            f"{name}: found tables nested beyond reason; expected a source catalogue; write it anew."
        ) from error
    try:
        file = CatalogueFile.model_validate(written)
    except ValidationError as error:
        file = None
        faults = form_faults(error, written)
    else:
        faults = []
    faults += entry_faults(written)
    if file is None or faults:
        placed = sorted((_line(text, fault.location), fault.sentence) for fault in faults)
        raise CatalogueProblem(
            "\n".join(
                f"{name}, line {line}: {words}" if line else f"{name}: {words}" for line, words in placed
            )
        )
    return converted(file)


def _line(text: str, location: Location) -> int:
    """Return the line of a location, 0 where nothing of it is written; of a list of tables, its first."""
    return line_of(text, location) or line_of(text, (*location, 0)) or 0


def _not_toml(name: str, text: str, words: str) -> str:
    place = re.search(r"\(at (?:line (\d+), column \d+|end of document)\)", words)
    line = (place and place[1]) or text.count("\n") + 1
    what = words.partition(" (at ")[0]
    return (
        f"{name}, line {line}: found text that is not TOML ({what}); expected a source catalogue; correct it."
    )
