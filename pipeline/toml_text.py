"""Words for what is wrong in a TOML file: one sentence a fault, with its line where it can be found."""

from __future__ import annotations

import re
import tomllib
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from pydantic import ValidationError

_TABLE = re.compile(r"\s*(\[\[?)\s*([^\[\]]+?)\s*\]\]?\s*(#.*)?$")
_PART = r"""(?:"(?:[^"\\]|\\.)*"|'[^']*'|[A-Za-z0-9_-]+)"""
_KEY = re.compile(rf"\s*({_PART}(?:\s*\.\s*{_PART})*)\s*=")


def line_of(text: str, location: Sequence[str | int]) -> int | None:
    """Return the line of a TOML text, counted from 1, that a location of nested keys points at.

    The nearest enclosing line is returned where the key itself is not written (a missing key);
    None where nothing of the location stands in the text.
    """
    wanted = [str(part) for part in location]
    best, best_depth = None, 0
    counts: dict[str, int] = {}
    table: list[str] = []
    for number, line in enumerate(text.splitlines(), start=1):
        if header := _TABLE.match(line):
            table = _table_path(header[2], counts, repeated=header[1] == "[[")
            path = table
        elif key := _KEY.match(line):
            path = [*table, *_parts(key[1])]
        else:
            continue
        depth = len(path) if wanted[: len(path)] == path else 0
        if depth > best_depth:
            best, best_depth = number, depth
    return best


def sentences(
    name: str,
    text: str,
    error: ValidationError,
    elsewhere: Mapping[tuple[str, ...], str] | None = None,
) -> list[str]:
    """Return one sentence for each fault of a validated TOML text, in the order of its lines.

    Parameters
    ----------
    name, text
        The file and what stands in it.
    error
        Its faults.
    elsewhere
        By nested keys, what set a value in place of the file, in words.

    """
    faults = []
    for fault in error.errors():
        if is_echo(fault):
            continue
        location = fault["loc"]
        line = line_of(text, location)
        place = f"{name}, line {line}" if line else name
        for keys, setter in (elsewhere or {}).items():
            # a section that only the setter has is at fault as a whole
            if location[: len(keys)] == keys or (not line and keys[: len(location)] == location):
                line, place = None, setter
                break
        faults.append((line or 0, f"{place}: {_words(location, fault)}"))
    return [sentence for _, sentence in sorted(faults)]


def is_echo(fault: Any) -> bool:
    """Return whether a list is only called too short because some of its entries have faults of their own."""
    return bool(fault["type"] == "too_short" and len(fault["input"]) >= fault["ctx"]["min_length"])


def _words(location: Sequence[str | int], fault: Any) -> str:
    key = ".".join(str(part) for part in location if part != "[key]")  # the last where a key itself is wrong
    match fault["type"]:
        case "extra_forbidden":
            return f"found the key '{key}', which is not known here; correct its spelling or remove it."
        case "missing":
            return f"the key '{key}' is missing; add it."
        case "too_short":
            return f"'{key}' is {fault['input']!r}; expected at least {fault['ctx']['min_length']} in it; add some."
        case _:
            expected = fault["msg"].removeprefix("Value error, ").removeprefix("Input should be ")
            return f"'{key}' is {fault['input']!r}; expected {expected}; correct it."


def _table_path(written: str, counts: dict[str, int], *, repeated: bool) -> list[str]:
    """Return the key path of a table header, with the index of the last repeated table of that name."""
    parts = _parts(written)
    if repeated:
        counts[written] = counts.get(written, -1) + 1
    path: list[str] = []
    for depth, part in enumerate(parts):
        path.append(part)
        prefix = ".".join(parts[: depth + 1])
        if prefix in counts:
            path.append(str(counts[prefix]))
    return path


def _parts(written: str) -> list[str]:
    """Return the parts of a dotted key; a quoted part may hold dots, blanks and escapes."""
    if '"' not in written and "'" not in written:
        return [part.strip() for part in written.split(".")]
    return [_unquoted(part) for part in re.findall(_PART, written)]


def _unquoted(part: str) -> str:
    try:
        return next(iter(tomllib.loads(f"{part} = 0")))
    except tomllib.TOMLDecodeError:  # no key at all, but a line of a longer text that looks like one
        return part
