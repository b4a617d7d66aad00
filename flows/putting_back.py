"""Kept bytes that the archive has lost, put back from an inbox that holds them."""

from __future__ import annotations

from contextlib import suppress
from typing import TYPE_CHECKING

from flows.places import place
from pipeline.archive import layout, vault
from pipeline.problems import DeliveryProblem

if TYPE_CHECKING:
    from collections.abc import Iterable

    from flows.plan import InboxFile
    from flows.work import RunConfig
    from pipeline.archive import Contents, Store


def put_back(
    files: Iterable[InboxFile], contents: Contents, config: RunConfig, store: Store
) -> tuple[str, ...]:
    """Keep again what cruises were made from and the archive no longer has, and tell of each file.

    A cruise that is current is not made anew, so nothing else would keep its files again. A kept file of another
    size is damaged, and replaced. Nothing is read but what is missing.

    Parameters
    ----------
    files
        The inbox.
    contents
        What the archive's cruises were made from.
    config
        Settings and catalogue of this run; their texts are put back for cruises that were made with them.
    store
        The archive.

    Raises
    ------
    ArchiveProblem
        If the bytes cannot be written.

    """
    known = {
        sha256
        for cruise in contents.cruises.values()
        for file in (cruise.provenance.deliveries if cruise.provenance else ())
        for sha256 in (file.sha256, file.described_by)
        if sha256
    }
    told = []
    for file in files:
        if file.sha256 in known and store.size(layout.raw_key(file.sha256)) != file.size:
            with suppress(
                DeliveryProblem
            ):  # it went or changed just now; that it is missing is told by others
                if vault.keep(store, place(file.path)) == file.sha256:
                    told.append(
                        f"{file.name}: its kept bytes were missing in the archive or damaged, and were put back."
                    )
        if file.beside.sha256 in known:
            vault.keep(store, file.beside.text)
    _put_back_choices(contents, config, store)
    return tuple(told)


def _put_back_choices(contents: Contents, config: RunConfig, store: Store) -> None:
    """Keep the texts of settings and catalogue again where a cruise was made with them and they are gone."""
    gone: dict[str, bool] = {}
    for expocode, cruise in contents.cruises.items():
        if (made := cruise.provenance) is None:
            continue
        for sha256 in filter(None, (made.settings_sha256, made.catalogue_sha256)):
            if sha256 not in gone:
                gone[sha256] = store.size(layout.raw_key(sha256)) is None
            if gone[sha256]:
                choices = (config.settings.for_cruise(expocode), config.catalogue)
                texts = [one.text for one in choices if one is not None and one.sha256 == sha256]
                gone[sha256] = not [vault.keep(store, text) for text in texts]
