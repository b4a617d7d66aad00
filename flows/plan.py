"""What an inbox asks for: which cruises are new or changed, and from which files each is made."""

from __future__ import annotations

import hashlib
import os
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from flows.beside import NOTHING, Beside, Folder
from flows.bucket_inbox import paths_in_bucket
from flows.places import place
from pipeline.archive import DeliveredFile, content_of, fingerprint, is_archive, judge
from pipeline.problems import UsageProblem
from pipeline.reading import CRUISE_FILE, survey_cruises

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from flows.places import Place
    from pipeline.archive import Contents, CruiseContents
    from pipeline.mixing import Catalogue
    from pipeline.settings import Settings


@dataclass(frozen=True, slots=True)
class InboxFile:
    """One file in the inbox. ``name`` is its path in the inbox, as sentences and tables call it."""

    name: str
    path: str
    size: int
    sha256: str
    beside: Beside = NOTHING

    @property
    def content(self) -> str:
        """What decides the rows that are read from it."""
        return content_of(self.sha256, self.beside.sha256)


@dataclass(frozen=True, slots=True)
class Job:
    """One cruise to be made: from these files of the inbox, and what the archive has beside them."""

    expocode: str
    files: tuple[InboxFile, ...]
    archived: tuple[DeliveredFile, ...] = ()  # deliveries of earlier runs that are no longer in the inbox

    @property
    def size(self) -> int:
        """Delivered bytes."""
        return sum(file.size for file in self.files) + sum(file.size for file in self.archived)


@dataclass(frozen=True, slots=True)
class Plan:
    """What a run has to do."""

    jobs: tuple[Job, ...]
    unchanged: tuple[str, ...]
    unknown: tuple[InboxFile, ...]  # files in which no cruise was found
    same_bytes: tuple[tuple[str, str], ...]


def list_inbox(inbox: Place, archive: Place) -> list[InboxFile]:
    """Return the files of an inbox and its folders, sorted by name; hidden ones are not deliveries.

    A ``cruise.toml`` is none either: it is read for what it says of the files beside it. Archives inside
    the inbox are not looked into.

    Raises
    ------
    UsageProblem
        Where the inbox is no directory that can be read, or lies in the archive.

    """
    paths: Sequence[Place] = (
        sorted(_paths(inbox, archive)) if isinstance(inbox, Path) else paths_in_bucket(inbox, archive)
    )
    names: dict[Any, set[str]] = {}
    for path in paths:
        names.setdefault(path.parent, set()).add(path.name)
    said = {
        folder: Folder(folder, _shown_path(folder / CRUISE_FILE, inbox), here)
        for folder, here in names.items()
    }
    return [_inbox_file(path, inbox, said[path.parent].says(path.name)) for path in paths]


def _paths(inbox: Path, archive: Place) -> list[Path]:
    if not inbox.is_dir():
        raise UsageProblem(f"{inbox}: there is no such directory; give the directory of the delivered files.")
    kept_out = Path(archive).resolve()
    if inbox.resolve().is_relative_to(kept_out):
        raise UsageProblem(
            f"{inbox}: the inbox lies in the archive {archive}; give each a directory of its own."
        )

    def unreadable(error: OSError) -> None:
        raise UsageProblem(
            f"{error.filename}: the inbox cannot be read ({error.strerror}); see that its disk or share is there"
            " and may be read, and run again."
        ) from error

    paths: list[Path] = []
    for folder, folders, names in os.walk(inbox, onerror=unreadable):
        here = Path(folder)
        folders[:] = [
            f
            for f in folders
            if not f.startswith(".") and (here / f).resolve() != kept_out and not is_archive(here / f)
        ]
        paths += [here / name for name in names if not name.startswith(".") and name != CRUISE_FILE]
    return paths


def _shown_path(path: Any, inbox: Place) -> str:
    return shown_name(path.relative_to(inbox).as_posix())


def _inbox_file(path: Place, inbox: Place, beside: Beside) -> InboxFile:
    """Return a file with its hash; "" for one that cannot be read, of which it is told when its turn comes."""
    sha256, size = "", 0
    try:
        if path.is_file():  # a pipe would wait for ever
            with path.open("rb") as stream:
                sha256 = hashlib.file_digest(stream, "sha256").hexdigest()
                size = stream.seek(0, os.SEEK_END)
    except OSError:
        pass
    return InboxFile(_shown_path(path, inbox), str(path), size, sha256, beside)


def shown_name(name: str) -> str:
    """Return a file's name as text of one line, whatever bytes it is made of."""
    text = os.fsencode(name).decode("utf-8", errors="backslashreplace")
    return "".join(f"\\x{ord(c):02x}" if c < " " or c == "\x7f" else c for c in text)


def plan_run(
    files: Iterable[InboxFile], contents: Contents, settings: Settings, catalogue: Catalogue | None
) -> Plan:
    """Decide what a run has to do, from the archive's own fingerprints.

    Only files that the archive does not know are opened.
    """
    distinct, same_bytes = _without_doubles(files)
    cruises: dict[str, list[InboxFile]] = {}
    unknown = []
    known = contents.cruises_by_content()
    for file in distinct:
        codes = known.get(file.content) or _survey(file, settings)
        for code in codes:
            cruises.setdefault(code, []).append(file)
        if not codes:
            unknown.append(file)
    wanted = {
        code: _wanted_fingerprint(delivered, contents.cruises.get(code), settings.for_cruise(code), catalogue)
        for code, delivered in cruises.items()
    }
    currency = judge(wanted, contents)
    jobs = tuple(
        Job(code, tuple(cruises[code]), _beside(cruises[code], contents.cruises.get(code)))
        for code in currency.due
    )
    return Plan(jobs, currency.current, tuple(unknown), tuple(same_bytes))


def _without_doubles(files: Iterable[InboxFile]) -> tuple[list[InboxFile], list[tuple[str, str]]]:
    first: dict[str, str] = {}
    distinct, doubles = [], []
    for file in files:
        if file.sha256 and file.sha256 in first:
            doubles.append((file.name, first[file.sha256]))
        else:
            first[file.sha256] = file.name
            distinct.append(file)
    return distinct, doubles


def _survey(file: InboxFile, settings: Settings) -> tuple[str, ...]:
    if not file.sha256 or file.beside.fault:
        return ()
    try:
        data = place(file.path).read_bytes()
    except OSError:
        return ()
    return survey_cruises(file.name, data, settings.reading, file.beside.description)


def _wanted_fingerprint(
    delivered: list[InboxFile],
    archived: CruiseContents | None,
    settings: Settings,
    catalogue: Catalogue | None,
) -> str:
    """Return the fingerprint that the archive's tables have if they are what would be made now.

    Where the inbox holds nothing that they were not made from, that is the fingerprint of all that they
    were made from, under the names it came with.
    """
    files = [(file.name, file.content) for file in delivered]
    if archived is not None and archived.provenance is not None:
        made_from = [(file.name, file.content) for file in archived.provenance.deliveries]
        if {content for _, content in files} <= {content for _, content in made_from}:
            files = made_from
    return fingerprint(files, settings.sha256, catalogue.sha256 if catalogue else None)


def _beside(delivered: list[InboxFile], archived: CruiseContents | None) -> tuple[DeliveredFile, ...]:
    """Return what the archive's cruise was made from and the inbox no longer holds."""
    if archived is None or archived.provenance is None:
        return ()
    here = {file.sha256 for file in delivered}
    return tuple(file for file in archived.provenance.deliveries if file.sha256 not in here)


def pack(jobs: Iterable[Job], most_batches: int, least_bytes: int) -> list[tuple[Job, ...]]:
    """Pack jobs, in their order, into at most ``most_batches`` batches of at least ``least_bytes``."""
    jobs = tuple(jobs)
    total = sum(job.size for job in jobs)
    target = max(least_bytes, -(-total // most_batches))
    batches: list[list[Job]] = []
    filled = 0
    for job in jobs:
        if not batches or filled >= target:
            batches.append([])
            filled = 0
        batches[-1].append(job)
        filled += job.size
    return [tuple(batch) for batch in batches]
