"""Places that the user names: a path on a disk, or ``s3://BUCKET/PATH``. Loads what the second needs only for it."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from pipeline.archive import ObjectPath

    Place = Path | ObjectPath


def place(text: str) -> Place:
    """Return the place that is written so."""
    if not text.startswith("s3://"):
        return Path(text)
    from pipeline.archive import ObjectPath  # noqa: PLC0415 - takes the tables' library with it

    return ObjectPath(text.rstrip("/"))
