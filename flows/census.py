"""The command ``seawhence census``: how much of a section each source water makes up, and how that changed."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any, TypeVar

from pydantic import BaseModel

from flows.census_words import blocks_of
from flows.pages import as_markdown, as_text
from flows.records import ExitStatus
from pipeline.archive import open_archive, read_contents, read_table, vault
from pipeline.archive.writing import write_table
from pipeline.census import Comparison, Resolved, census_table, compare, take_census
from pipeline.mixing import Catalogue
from pipeline.problems import ArchiveProblem, UsageProblem
from pipeline.settings import Settings, read_settings
from pipeline.version import VERSION

if TYPE_CHECKING:
    import argparse
    from pathlib import Path

    from pipeline.archive import Contents, Provenance, Store
    from pipeline.census import Census
    from pipeline.census_settings import CensusSettings

Model = TypeVar("Model", bound=BaseModel)


def census(chosen: argparse.Namespace) -> int:
    """Take the census of one cruise, or of two and compare them, and tell what was found.

    Parameters
    ----------
    chosen
        ``archive`` is a path, ``cruise`` an expocode, ``other`` another or None, ``density`` and ``boundaries`` stand
        over the settings where they are given, ``settings`` and ``out`` are paths or None, ``format`` is ``text``,
        ``json`` or ``markdown``.

    """
    _refuse_out(chosen.out, chosen.archive)
    asked = _asked(chosen)
    store = open_archive(chosen.archive)
    contents = read_contents(store)
    one = _resolved(store, contents, chosen.archive, chosen.cruise, asked)
    if chosen.other is None:
        found: Census | Comparison = take_census(one)
    else:
        if chosen.other == chosen.cruise:
            raise UsageProblem(f"{chosen.cruise}: a cruise cannot be compared with itself; name another one.")
        found = compare(one, _resolved(store, contents, chosen.archive, chosen.other, asked))
    match chosen.format:
        case "json":
            print(json.dumps(_as_json(found), indent=2))
        case "markdown":
            print("\n".join(as_markdown(blocks_of(found))))
        case _:
            print("\n".join(as_text(blocks_of(found))))
    if chosen.out is not None:
        names = [chosen.cruise, *([chosen.other] if chosen.other else [])]
        _write(chosen.out, found, contents, names, asked)
    return ExitStatus.GOOD


def _asked(chosen: argparse.Namespace) -> CensusSettings:
    """Return how the census is taken: the settings, and over them what the command says."""
    settings = read_settings(chosen.settings).census
    given = {"density": chosen.density, "boundaries": chosen.boundaries}
    given = {name: value for name, value in given.items() if value}
    if (boundaries := given.get("boundaries")) and sorted(set(boundaries)) != list(boundaries):
        raise UsageProblem(
            f"--boundaries {' '.join(f'{one:g}' for one in boundaries)}: expected densities from the lightest to the"
            " densest, each once; order them."
        )
    return settings.model_copy(
        update={**given, "boundaries": tuple(given.get("boundaries", settings.boundaries))}
    )


def _resolved(
    store: Store, contents: Contents, archive: Path, cruise: str, asked: CensusSettings
) -> Resolved:
    """Return the samples of a cruise, with the settings and the source waters that its tables were made with."""
    if cruise not in contents.cruises:
        known = ", ".join(contents.cruises) or "none"
        raise UsageProblem(f"{archive}: there is no cruise '{cruise}'; its cruises are: {known}.")
    found = contents.cruises[cruise]
    if not found.is_whole or found.provenance is None:
        raise ArchiveProblem(" ".join(found.troubles))
    made = found.provenance
    if made.catalogue_sha256 is None:
        raise UsageProblem(
            f"{cruise}: its tables were made without source waters, so that no sample has shares; run again with"
            " --sources."
        )
    samples = read_table(store, cruise, "samples")
    if not samples.num_rows:
        raise UsageProblem(f"{cruise}: it has no bottle samples, so there is nothing to take a census of.")
    settings = _kept(store, made, made.settings_sha256, Settings, "settings")
    catalogue = _kept(store, made, made.catalogue_sha256, Catalogue, "source waters")
    return Resolved(cruise, samples, catalogue, settings.model_copy(update={"census": asked}))


def _kept(store: Store, made: Provenance, sha256: str, model: type[Model], what: str) -> Model:
    """Return what a cruise was made with, which the archive keeps beside the delivered bytes."""
    try:
        return model.model_validate_json(vault.read(store, sha256))
    except (ArchiveProblem, ValueError) as problem:
        raise ArchiveProblem(
            f"{made.expocode}: the {what} that its tables were made with are not in the archive, or this version does"
            " not know them; run again to make the tables anew."
        ) from problem


def _as_json(found: Census | Comparison) -> dict[str, Any]:
    """Return what was found as plain data: the sections, and the rows of the table."""
    censuses = (found.one, found.other) if isinstance(found, Comparison) else (found,)
    first = censuses[0]
    rows = census_table(found).to_pylist()
    told: dict[str, Any] = {
        "measurement_errors": first.errors,
        "members": first.members,
        "density": first.density,
        "boundaries": list(first.boundaries),
        "sections": [_section_as_json(one) for one in censuses],
    }
    if isinstance(found, Comparison):
        common = found.common
        told["common"] = {
            "track_km": common.length,
            "area_km2": float(common.resolved[0][0]),
            "stations": list(common.stations),
            "median_km_apart": common.off if common.stations[1] else None,
        }
    return {**told, "rows": [{k: v for k, v in row.items() if v is not None and v == v} for row in rows]}  # noqa: PLR0124


def _section_as_json(census: Census) -> dict[str, Any]:
    section, layout = census.section, census.layout
    return {
        "cruise": census.expocode,
        "stations": list(section.names),
        "kilometres": [float(one) for one in section.along],
        "has_width": layout.has_width,
        "resolved_km2": float(layout.resolved[0]) if layout.has_width else None,
        "samples": section.n_resolved,
        "gaps": [{"from": one, "to": other, "km": km} for one, other, km in layout.gaps],
        "stations_alone": list(layout.alone),
        "stations_without_bottom_depth": section.without_floor,
    }


def _refuse_out(out: Path | None, archive: Path) -> None:
    if out is None:
        return
    if out.suffix != ".parquet":
        raise UsageProblem(f"{out}: found another ending, expected .parquet; give such a file as --out.")
    if out.resolve().is_relative_to(archive.resolve()):
        raise UsageProblem(
            f"{out}: lies in the archive, which keeps its own tables only; give another file as --out."
        )


def _write(
    out: Path, found: Census | Comparison, contents: Contents, names: list[str], asked: CensusSettings
) -> None:
    record = {
        "pipeline_version": VERSION,
        "cruises": {name: contents.cruises[name].fingerprint for name in names},
        "settings": asked.model_dump(mode="json"),
    }
    metadata = {
        "seawhence": json.dumps(record, sort_keys=True, separators=(",", ":")), "seawhence.table": "census",
    }  # fmt: skip
    part = out.with_name(f".{out.name}.part")
    try:
        with part.open("wb") as sink:
            write_table(census_table(found), metadata, sink)
        part.replace(out)
    except OSError as error:
        part.unlink(missing_ok=True)
        raise UsageProblem(
            f"{out}: the census cannot be written ({error.strerror}); give another file as --out."
        ) from error
