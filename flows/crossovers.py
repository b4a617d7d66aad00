"""The command ``seawhence crossovers``: how the cruises of an archive compare, and what would make them agree."""

from __future__ import annotations

import hashlib
import io
import json
from typing import TYPE_CHECKING

from flows.records import ExitStatus
from pipeline.archive import open_archive, read_contents, read_table
from pipeline.archive.writing import write_table
from pipeline.crossovers import (
    as_delivered,
    columns_used,
    compare_cruises,
    gather_stations,
    offsets_table,
    page,
    proposals_table,
    propose,
    short_form,
    where_corrected,
)
from pipeline.problems import ArchiveProblem, SettingsProblem, UsageProblem
from pipeline.settings import read_settings
from pipeline.version import VERSION

if TYPE_CHECKING:
    import argparse
    from collections.abc import Mapping
    from pathlib import Path

    import pyarrow as pa

    from pipeline.archive import CruiseContents, Store
    from pipeline.crossovers import CruiseStations
    from pipeline.settings import Settings

OFFSETS, PROPOSALS, PAGE = "offsets.parquet", "proposals.parquet", "crossovers.md"


def crossovers(chosen: argparse.Namespace) -> int:
    """Compare the cruises, write both tables and the page, and tell what was found.

    Parameters
    ----------
    chosen
        ``archive`` and ``out`` are paths, ``settings`` is one or None.

    """
    settings = read_settings(chosen.settings)
    store = open_archive(chosen.archive)
    if chosen.out.resolve().is_relative_to(chosen.archive.resolve()):
        raise UsageProblem(f"{chosen.out}: it lies in the archive; give a directory outside it as --out.")
    contents = read_contents(store).cruises
    _refuse_unknown_references(settings, contents)
    troubles = [trouble for cruise in contents.values() for trouble in cruise.troubles]
    whole = {expocode: cruise for expocode, cruise in contents.items() if cruise.is_whole}
    applied = {
        cruise.expocode: made.corrections
        for cruise in whole.values()
        if (made := cruise.provenance) and made.corrections
    }
    cruises, corrected = _stations(store, whole, settings, troubles)
    found = compare_cruises(cruises, settings.crossovers)
    remaining = None if corrected is None else compare_cruises(corrected, settings.crossovers)
    left = where_corrected(remaining or [], applied)
    proposals = propose(found, settings.crossovers, applied, remaining)
    text = page(cruises, found, proposals, settings.crossovers, applied, left)
    metadata = _made_from(whole, settings)
    _write(
        chosen.out,
        {
            OFFSETS: _parquet(offsets_table(found, left), {**metadata, "seawhence.table": "offsets"}),
            PROPOSALS: _parquet(proposals_table(proposals), {**metadata, "seawhence.table": "proposals"}),
            PAGE: text.encode(),
        },
    )
    for line in short_form(found, proposals, settings.crossovers, left):
        print(line)
    for trouble in troubles:
        print(f"left out  {trouble}")
    met = {c.expocode for c in found} | {c.other for c in found}
    count = sum(proposal.proposed for proposal in proposals)
    print(
        f"{len(cruises)} cruise{'s' if len(cruises) != 1 else ''}, {len(met)} of them comparable; {len(found)} offset"
        f"{'s' if len(found) != 1 else ''}, {count} correction{'s' if count != 1 else ''} proposed. The page is"
        f" {chosen.out / PAGE}."
    )
    return ExitStatus.REFUSED if troubles else ExitStatus.GOOD


def _refuse_unknown_references(settings: Settings, cruises: Mapping[str, CruiseContents]) -> None:
    unknown = [expocode for expocode in settings.crossovers.reference if expocode not in cruises]
    if unknown:
        known = ", ".join(cruises) or "none"
        raise SettingsProblem(
            f"'crossovers.reference' names {', '.join(unknown)}, which the archive does not have; its cruises are:"
            f" {known}; correct it."
        )


def _stations(
    store: Store, cruises: Mapping[str, CruiseContents], settings: Settings, troubles: list[str]
) -> tuple[list[CruiseStations], list[CruiseStations] | None]:
    """Return the deep stations of all cruises, and again with the corrections in force where these are not in them.

    One that cannot be read is told in ``troubles``. The second is None where it would be the same.
    """
    columns = columns_used()
    compared, corrected = [], []
    differ = False
    for expocode in cruises:
        try:
            table = read_table(store, expocode, "samples", columns=columns)
        except ArchiveProblem as problem:
            troubles.append(str(problem))
            continue
        mine = gather_stations(expocode, table, settings)
        corrected.append(mine)
        delivered = as_delivered(table)
        if settings.crossovers.values == "delivered" and delivered.num_columns < table.num_columns:
            mine = gather_stations(expocode, delivered, settings)
            differ = True
        compared.append(mine)
    return compared, corrected if differ else None


def _made_from(cruises: Mapping[str, CruiseContents], settings: Settings) -> dict[str, str]:
    """Return the file metadata: which tables of the archive were compared, and with which settings."""
    values = {
        "pipeline_version": VERSION,
        "cruises": {expocode: cruise.fingerprint for expocode, cruise in sorted(cruises.items())},
        "settings": settings.crossovers.model_dump(mode="json"),
        "use": settings.use.model_dump(mode="json"),
    }
    record = json.dumps(values, sort_keys=True, separators=(",", ":"))
    return {"seawhence": record, "seawhence.fingerprint": hashlib.sha256(record.encode()).hexdigest()}


def _parquet(table: pa.Table, metadata: Mapping[str, str]) -> bytes:
    sink = io.BytesIO()
    write_table(table, metadata, sink)
    return sink.getvalue()


def _write(out: Path, files: Mapping[str, bytes]) -> None:
    """Write every file whole, or leave what stood there."""
    part = out / ".part"
    try:
        out.mkdir(parents=True, exist_ok=True)
        for name, data in files.items():
            part.write_bytes(data)
            part.replace(out / name)
    except OSError as error:
        raise UsageProblem(
            f"{out}: the tables cannot be written there ({error.strerror}); give another directory as --out."
        ) from error
    finally:
        part.unlink(missing_ok=True) if out.is_dir() else None
