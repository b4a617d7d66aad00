"""A source catalogue as TOML text, which the reader takes back exactly."""

from __future__ import annotations

import hashlib
import json
import re
from typing import TYPE_CHECKING, Any

from pipeline.mixing.entries import CatalogueFile

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

_SEAL = "# Derived by 'seawhence sources derive'. SHA-256 of all that follows: "
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")


def catalogue_text(catalogue: CatalogueFile) -> str:
    """Return a catalogue as TOML: what ``parse_catalogue`` makes of it has the same content.

    What has its default value is not written. Same content, same text.
    """
    written = catalogue.model_dump(
        mode="json", include=set(CatalogueFile.model_fields), exclude_none=True, exclude_defaults=True
    )
    blocks = []
    for name, entries in written.items():
        repeated = isinstance(entries, list)
        each = entries if repeated else [entries]
        blocks += ["\n".join(_block(name, entry, repeated=repeated)) for entry in each]
    return "\n\n".join(blocks) + "\n"


def sealed(text: str) -> str:
    """Return text with a first line that tells it from one that was written or changed by hand."""
    return f"{_SEAL}{hashlib.sha256(text.encode()).hexdigest()}\n{text}"


def is_sealed(data: bytes) -> bool:
    """Return whether the bytes of a file are what ``sealed`` made, unchanged."""
    first, _, rest = data.partition(b"\n")
    return first == f"{_SEAL}{hashlib.sha256(rest).hexdigest()}".encode()


def _block(name: str, entry: Mapping[str, Any], *, repeated: bool) -> Iterator[str]:
    """Yield the lines of a table: its own values first, then the tables in it."""
    yield f"[[{name}]]" if repeated else f"[{name}]"
    inner = {key: value for key, value in entry.items() if isinstance(value, dict)}
    for key, value in entry.items():
        if key not in inner:
            yield f"{_key(key)} = {_value(value)}"
    for key, table in inner.items():
        yield f"[{name}.{_key(key)}]"
        for below, value in table.items():
            yield f"{_key(below)} = {_value(value)}"


def _value(value: Any) -> str:
    match value:
        case bool():
            return "true" if value else "false"
        case str():
            return _text(value)
        case dict():
            return f"{{ {', '.join(f'{_key(key)} = {_value(one)}' for key, one in value.items())} }}"
        case [[*_], *_]:  # a matrix, or corners of a region: a row a line
            rows = "".join(f"  {_value(row)},\n" for row in value)
            return f"[\n{rows}]"
        case list():
            return f"[{', '.join(_value(one) for one in value)}]"
        case _:
            return repr(value)  # of a float the shortest text that is read back as the same


def _key(key: str) -> str:
    return key if _BARE_KEY.fullmatch(key) else _text(key)


def _text(text: str) -> str:
    """Return a basic string; its escapes are those of JSON, and TOML wants one character more escaped."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007F")
