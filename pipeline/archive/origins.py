"""Why two revisions can differ: what was delivered, the settings, the source waters, or the program."""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from pipeline.archive import vault
from pipeline.problems import ArchiveProblem

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from pipeline.archive.provenance import DeliveredFile, Provenance
    from pipeline.archive.storage import Store


@dataclass(frozen=True, slots=True)
class OriginChanges:
    """What of the things that decide a cruise's tables is another in the later revision."""

    files_gone: tuple[DeliveredFile, ...]  # by content: a file under another name is no other file
    files_added: tuple[DeliveredFile, ...]
    files_renamed: tuple[tuple[str, str], ...]  # the same bytes: earlier and later name
    settings_changed: bool
    settings: Mapping[str, tuple[Any, Any]] | None  # earlier and later value by name; None where not known
    sources_changed: bool
    sources: tuple[str, str]  # titles of the catalogues, "" where there was none
    versions: tuple[str, str]  # of the program
    schemas: tuple[int, int]  # of the tables

    @property
    def delivery_changed(self) -> bool:
        """Whether other bytes were delivered."""
        return bool(self.files_gone or self.files_added)

    @property
    def version_changed(self) -> bool:
        """Whether another version of the program made the later revision."""
        return self.versions[0] != self.versions[1] or self.schemas[0] != self.schemas[1]

    @property
    def processing_changed(self) -> bool:
        """Whether something else than the delivery is another."""
        return self.settings_changed or self.sources_changed or self.version_changed


def compare_origins(store: Store, before: Provenance, after: Provenance) -> OriginChanges:
    """Return what two revisions of a cruise were made from differently.

    Parameters
    ----------
    store
        The archive, which keeps the texts of the settings.
    before, after
        What the earlier and the later revision were made from.

    """
    old = {file.content: file for file in before.deliveries}
    new = {file.content: file for file in after.deliveries}
    changed = before.settings_sha256 != after.settings_sha256
    return OriginChanges(
        files_gone=tuple(file for content, file in old.items() if content not in new),
        files_added=tuple(file for content, file in new.items() if content not in old),
        files_renamed=tuple(
            (file.name, new[content].name)
            for content, file in old.items()
            if content in new and new[content].name != file.name
        ),
        settings_changed=changed,
        settings=_settings(store, before.settings_sha256, after.settings_sha256) if changed else {},
        sources_changed=before.catalogue_sha256 != after.catalogue_sha256,
        sources=(before.catalogue_title, after.catalogue_title),
        versions=(before.pipeline_version, after.pipeline_version),
        schemas=(before.schema_version, after.schema_version),
    )


def _settings(store: Store, before: str, after: str) -> dict[str, tuple[Any, Any]] | None:
    """Return the settings that differ, None where the archive does not have both texts."""
    try:
        one, other = (dict(_flat(json.loads(vault.read(store, sha256)))) for sha256 in (before, after))
    except (ArchiveProblem, ValueError, AttributeError):
        return None
    names = [*one, *(name for name in other if name not in one)]
    return {name: (one.get(name), other.get(name)) for name in names if one.get(name) != other.get(name)}


def _flat(values: Mapping[str, Any], prefix: str = "") -> Iterator[tuple[str, Any]]:
    """Yield every value of nested tables under its dotted name."""
    for name, value in values.items():
        if isinstance(value, dict) and value:
            yield from _flat(value, f"{prefix}{name}.")
        elif value != {}:
            yield f"{prefix}{name}", value
