"""The command ``seawhence changes``: what differs between two revisions of a cruise, and why."""

from __future__ import annotations

import json
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from flows.changed_words import blocks_of
from flows.pages import as_markdown, as_text
from flows.records import ExitStatus
from pipeline.archive import (
    compare_revisions,
    is_listing,
    open_archive,
    read_contents,
    revisions,
    write_listing,
)
from pipeline.problems import ArchiveProblem, UsageProblem

if TYPE_CHECKING:
    import argparse
    from collections.abc import Sequence
    from pathlib import Path

    from pipeline.archive import RevisionChanges
    from pipeline.archive.changes import ColumnDifference, TableChanges
    from pipeline.archive.origins import OriginChanges

_ROWS_AT_ONCE = 10_000


def changes(chosen: argparse.Namespace) -> int:
    """Compare two revisions and tell what differs.

    Parameters
    ----------
    chosen
        ``archive`` is a path, ``cruise`` an expocode, ``earlier`` and ``later`` are revisions or None, ``out`` is
        a path or None, ``format`` is ``text``, ``json`` or ``markdown``.

    """
    if chosen.out is not None:
        _refuse_to_replace(chosen.out, chosen.archive)
    store = open_archive(chosen.archive)
    contents = read_contents(store)
    if chosen.cruise not in contents.cruises:
        known = ", ".join(contents.cruises) or "none"
        raise UsageProblem(
            f"{chosen.archive}: there is no cruise '{chosen.cruise}'; its cruises are: {known}."
        )
    there = revisions(store, chosen.cruise)
    if not there:
        raise ArchiveProblem(" ".join(contents.cruises[chosen.cruise].troubles))
    pair = _pair(chosen.cruise, there, chosen.earlier, chosen.later)
    if pair is None:
        _tell_of_one(chosen.cruise, there[0], chosen.format)
        return ExitStatus.GOOD
    found = compare_revisions(store, chosen.cruise, *pair)
    match chosen.format:
        case "json":
            _print_json(found)
        case "markdown":
            print("\n".join(as_markdown(blocks_of(found))))
        case _:
            print("\n".join(as_text(blocks_of(found))))
    if chosen.out is not None:
        _write(chosen.out, found)
    return ExitStatus.GOOD


def _pair(
    cruise: str, there: Sequence[int], earlier: int | None, later: int | None
) -> tuple[int, int] | None:
    """Return which revisions to compare, the last two where nothing is said; None where there is one only."""
    for asked in (earlier, later):
        if asked is not None and asked not in there:
            known = ", ".join(map(str, there))
            raise UsageProblem(
                f"{cruise}: there is no revision {asked} that can be read; there are: {known}."
            )
    if earlier is not None:
        return earlier, there[-1] if later is None else later
    if later is not None:
        before = [number for number in there if number < later]
        if not before:
            known = ", ".join(map(str, there))
            raise UsageProblem(
                f"{cruise}: no revision before {later} can be read; there are: {known}; give one as --from."
            )
        return before[-1], later
    return (there[-2], there[-1]) if len(there) > 1 else None


def _tell_of_one(cruise: str, revision: int, form: str) -> None:
    sentence = (
        f"{cruise}: the archive has one revision of it, {revision}, and nothing to compare it with; a second one is "
        "made when the cruise is delivered again, or when settings, source waters or the program change."
    )
    if form == "json":
        print(json.dumps({"cruise": cruise, "revisions": [revision], "message": sentence}, indent=2))
    else:
        print(sentence)


def _print_json(found: RevisionChanges) -> None:
    """Print all as JSON; what is listed comes last, a piece after the other, because it may be long."""
    print(f"{json.dumps(_as_json(found), indent=2, ensure_ascii=False).removesuffix('}').rstrip()},")
    print('  "changes": [', end="")
    separator = "\n"
    for batch in found.listing.to_batches(max_chunksize=_ROWS_AT_ONCE):
        for row in batch.to_pylist():
            print(f"{separator}    {json.dumps(row, ensure_ascii=False)}", end="")
            separator = ",\n"
    print("\n  ]\n}")


def _as_json(found: RevisionChanges) -> dict[str, Any]:
    return {
        "cruise": found.after.expocode,
        "from": found.before.revision,
        "to": found.after.revision,
        "made_from": _origins_as_json(found.origins),
        "rows": {
            name: {"from": found.before.tables.get(name), "to": found.after.tables.get(name)}
            for name in found.after.tables
        },
        "tables": {table.table: _table_as_json(table) for table in found.tables},
    }


def _origins_as_json(origins: OriginChanges) -> dict[str, Any]:
    return {
        "delivery_changed": origins.delivery_changed,
        "processing_changed": origins.processing_changed,
        "files_gone": [asdict(file) for file in origins.files_gone],
        "files_added": [asdict(file) for file in origins.files_added],
        "files_renamed": [{"from": old, "to": new} for old, new in origins.files_renamed],
        "settings_changed": origins.settings_changed,
        "settings": None
        if origins.settings is None
        else {name: {"from": old, "to": new} for name, (old, new) in origins.settings.items()},
        "sources_changed": origins.sources_changed,
        "sources": {"from": origins.sources[0], "to": origins.sources[1]},
        "version": {"from": origins.versions[0], "to": origins.versions[1]},
        "schema_version": {"from": origins.schemas[0], "to": origins.schemas[1]},
    }


def _table_as_json(table: TableChanges) -> dict[str, Any]:
    return {
        "rows": {"from": table.rows_before, "to": table.rows_after},
        "in_both": len(table.pairing.after),
        "gone": len(table.pairing.gone),
        "added": len(table.pairing.added),
        "keys_repeated": table.pairing.repeated_keys,
        "casts_paired_by_order": table.pairing.casts_by_order,
        "columns_gone": dict(table.columns_gone),
        "columns_added": dict(table.columns_added),
        "delivered": [_column_as_json(one) for one in table.delivered],
        "computed": [_column_as_json(one) for one in table.computed],
        "computed_columns_gone": list(table.computed_gone),
        "computed_columns_added": list(table.computed_added),
    }


def _column_as_json(one: ColumnDifference) -> dict[str, Any]:
    return {
        "column": one.name,
        "unit": one.unit,
        "changed": one.changed,
        "appeared": one.appeared,
        "vanished": one.vanished,
        "largest_difference": one.largest,
        "at": one.at,
    }


def _refuse_to_replace(out: Path, archive: Path) -> None:
    """Refuse an output in the archive, or one that holds anything but a table of changes."""
    if out.suffix != ".parquet":
        raise UsageProblem(f"{out}: found another ending, expected .parquet; give such a file as --out.")
    if out.resolve().is_relative_to(archive.resolve()):
        raise UsageProblem(
            f"{out}: lies in the archive, which keeps its own tables only; give another file as --out."
        )
    if (out.exists() or out.is_symlink()) and not is_listing(out):
        raise UsageProblem(
            f"{out}: found something else than a table of changes there; move it away, or give another file as --out."
        )


def _write(out: Path, found: RevisionChanges) -> None:
    part = out.with_name(f".{out.name}.part")
    try:
        with part.open("wb") as sink:
            write_listing(found, sink)
        part.replace(out)
    except OSError as error:
        part.unlink(missing_ok=True)
        raise UsageProblem(
            f"{out}: the changes cannot be written ({error.strerror}); give another file as --out."
        ) from error
