"""Which objects of an inbox in a bucket are delivered files."""

from __future__ import annotations

from pathlib import Path, PurePosixPath
from typing import TYPE_CHECKING

from pipeline.archive import objects_below
from pipeline.problems import UsageProblem
from pipeline.reading import CRUISE_FILE
from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    from flows.places import Place
    from pipeline.archive import ObjectPath


def paths_in_bucket(inbox: ObjectPath, archive: Place) -> list[ObjectPath]:
    """Return the delivered files of an inbox and its folders, as ``list_inbox`` says of a directory.

    Raises
    ------
    UsageProblem
        Where there is nothing, it cannot be read, or it lies in the archive.

    """
    if f"{inbox}/".startswith(f"{archive}/"):
        raise UsageProblem(f"{inbox}: the inbox lies in the archive {archive}; give each a place of its own.")
    try:
        found = objects_below(str(inbox))
    except OSError as error:
        raise UsageProblem(
            f"{inbox}: the inbox cannot be read, {error.strerror}; mend this and run again."
        ) from error
    if found is None:
        raise UsageProblem(
            f"{inbox}: there is nothing there; give the place of the delivered files. If it is right and was emptied,"
            f" put an empty object '{inbox.name}/' there, which marks the place."
        )
    folders = {folder for path in found for folder in path.relative_to(inbox).parents}
    kept_out = {folder for folder in folders if all(folder / name in folders for name in TABLE_NAMES)}
    if not isinstance(archive, Path) and f"{archive}/".startswith(f"{inbox}/"):
        kept_out.add(archive.relative_to(inbox))
    return [path for path in found if _is_delivery(path.relative_to(inbox), kept_out)]


def _is_delivery(name: PurePosixPath, kept_out: set[PurePosixPath]) -> bool:
    hidden = any(part.startswith(".") for part in name.parts)
    return not hidden and name.name != CRUISE_FILE and kept_out.isdisjoint(name.parents)
