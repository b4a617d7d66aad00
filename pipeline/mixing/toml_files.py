"""Files of catalogues and rules: opened within bounds, read as TOML, or refused in a sentence."""

from __future__ import annotations

import re
import tomllib
from typing import TYPE_CHECKING, Any

from pipeline.problems import CatalogueProblem

if TYPE_CHECKING:
    from pathlib import Path

MOST_BYTES = 1_000_000


def text_of(path: Path, what: str) -> str:
    """Return the text of a file.

    Parameters
    ----------
    path
        The file.
    what
        What it should hold, as "a source catalogue".

    Raises
    ------
    CatalogueProblem
        Where it cannot be read, is too large, or is not text.

    """
    try:
        with path.open("rb") as file:
            data = file.read(MOST_BYTES + 1)
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) else error
        raise CatalogueProblem(
            f"{path}: the {what.removeprefix('a ')} cannot be read ({reason}); name a file."
        ) from error
    if len(data) > MOST_BYTES:
        raise CatalogueProblem(
            f"{path}: found more than {MOST_BYTES} bytes; expected {what}; name another file."
        )
    try:
        return data.decode("utf-8-sig")  # some editors put a mark before the text
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise CatalogueProblem(
            f"{path}, line {line}: found bytes that are not UTF-8 text; expected {what} in TOML; save it as UTF-8."
        ) from error


def parsed(text: str, name: str, what: str) -> dict[str, Any]:
    """Return what the TOML text of the file ``name`` holds. Raises as ``text_of`` does."""
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        words = str(error)
        place = re.search(r"\(at (?:line (\d+), column \d+|end of document)\)", words)
        line = (place and place[1]) or text.count("\n") + 1
        raise CatalogueProblem(
            f"{name}, line {line}: found text that is not TOML ({words.partition(' (at ')[0]}); expected {what}; "
            f"correct it."
        ) from error
    except RecursionError as error:
        raise CatalogueProblem(
            f"{name}: found tables nested beyond reason; expected {what}; write it anew."
        ) from error
