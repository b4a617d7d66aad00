"""The source waters of a run that names none: those the archive was made with."""

from __future__ import annotations

import json
from dataclasses import replace
from typing import TYPE_CHECKING

from pipeline.archive import vault
from pipeline.mixing import Catalogue
from pipeline.problems import ArchiveProblem, UsageProblem

if TYPE_CHECKING:
    from flows.work import RunConfig
    from pipeline.archive import Contents, Store


def with_remembered_sources(config: RunConfig, contents: Contents, store: Store) -> RunConfig:
    """Return the configuration with the archive's own catalogue where it has none.

    A forgotten option must not take the shares from every cruise.

    Raises
    ------
    UsageProblem
        Where the archive's cruises were made with different catalogues, or the one is no longer kept.

    """
    if config.catalogue is not None:
        return config
    used = {
        (made.catalogue_sha256, made.catalogue_title)
        for cruise in contents.cruises.values()
        if (made := cruise.provenance) is not None and made.catalogue_sha256 is not None
    }
    if not used:
        return config
    titles = ", ".join(sorted(f"'{title}'" for _, title in used))
    if len(used) > 1:
        raise UsageProblem(
            f"{config.archive}: its cruises were made with different source waters ({titles}); say with --sources which"
            " ones stand."
        )
    ((sha256, _),) = used
    try:
        values = json.loads(vault.read(store, sha256))
    except ArchiveProblem as problem:
        raise UsageProblem(
            f"{config.archive}: it was made with the source waters {titles}, which it no longer holds; give them with"
            " --sources."
        ) from problem
    return replace(config, catalogue=Catalogue.model_validate(values))
