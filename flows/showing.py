"""The command ``seawhence show``: what is in an archive, and of a cruise, where it came from."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pyarrow.compute as pc

from flows.records import ExitStatus
from pipeline.archive import open_archive, read_contents, read_table, revisions
from pipeline.problems import UsageProblem
from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    import argparse
    from collections.abc import Sequence

    from pipeline.archive import Contents, CruiseContents, Store


def show(chosen: argparse.Namespace) -> int:
    """Print what was asked for."""
    store = open_archive(chosen.archive)
    contents = read_contents(store)
    if chosen.cruise is None:
        lines = _archive(contents)
    elif chosen.cruise in contents.cruises:
        lines = _cruise(contents.cruises[chosen.cruise], store)
    else:
        known = ", ".join(contents.cruises) or "none"
        raise UsageProblem(
            f"{chosen.archive}: there is no cruise '{chosen.cruise}'; its cruises are: {known}."
        )
    print("\n".join(lines))
    return ExitStatus.GOOD


def _archive(contents: Contents) -> list[str]:
    rows: list[tuple[str, ...]] = [("cruise", "revision", *TABLE_NAMES, "sources")]
    for cruise in contents.cruises.values():
        made = cruise.provenance
        rows.append(
            (
                cruise.expocode,
                str(made.revision) if made else "-",
                *(str(cruise.rows.get(name, "-")) for name in TABLE_NAMES),
                (made.catalogue_title or "-") if made else "-",
            )
        )
    lines = aligned(rows) if len(rows) > 1 else ["The archive has no cruise."]
    lines += [f"doubt  {trouble}" for cruise in contents.cruises.values() for trouble in cruise.troubles]
    lines += [f"note  {stranger}: not a table of the archive." for stranger in contents.strangers]
    return lines


def _cruise(cruise: CruiseContents, store: Store) -> list[str]:
    lines = [f"doubt  {trouble}" for trouble in cruise.troubles]
    made = cruise.provenance
    if made is None:
        return [*lines, f"{cruise.expocode}: none of its tables can be read."]
    earlier = [str(number) for number in revisions(store, cruise.expocode) if number != made.revision]
    lines += [
        f"{cruise.expocode}, revision {made.revision}"
        + (f" (earlier ones kept: {', '.join(earlier)})" if earlier else ""),
        "",
        "made from",
        *aligned(
            [
                ("  file", "kind", "bytes", "rows", "kept", "rejected", "sha256"),
                *(
                    (
                        f"  {d.name}",
                        d.kind,
                        str(d.size),
                        str(d.rows),
                        str(d.kept),
                        str(d.rejected),
                        d.sha256[:16],
                    )
                    for d in made.deliveries
                ),
            ]
        ),
        f"  with seawhence {made.pipeline_version}, settings {made.settings_sha256[:16]}, "
        + (
            f"sources '{made.catalogue_title}' {made.catalogue_sha256[:16]}"
            if made.catalogue_sha256
            else "no sources"
        ),
        f"  fingerprint {made.fingerprint[:16]}",
        "",
        "rows",
        *aligned([(f"  {name}", str(cruise.rows.get(name, "missing"))) for name in TABLE_NAMES]),
    ]
    return [*lines, *_tags(cruise, store)]


def _tags(cruise: CruiseContents, store: Store) -> list[str]:
    """Return how many samples have each tag, the most common first."""
    total = cruise.rows.get("samples", 0)
    if not total:
        return []
    tags = read_table(store, cruise.expocode, "samples", columns=["tag"]).column("tag")
    counts = [(entry["values"], entry["counts"]) for entry in pc.value_counts(tags).to_pylist()]
    counts.sort(key=lambda entry: (-entry[1], entry[0] or ""))
    rows = [
        (f"  {tag or 'none (no source waters given)'}", str(count), f"{100 * count / total:.1f} %")
        for tag, count in counts
    ]
    return ["", "samples by tag", *aligned(rows)]


def aligned(rows: Sequence[Sequence[str]]) -> list[str]:
    """Return rows of cells as lines, the first column to the left and numbers to the right."""
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    last = len(widths) - 1
    lines = []
    for row in rows:
        cells = [
            cell.rjust(width) if _is_number(rows, i) else cell.ljust(width)
            for i, (cell, width) in enumerate(zip(row, widths, strict=True))
        ]
        lines.append("  ".join([*cells[:last], cells[last].rstrip()]).rstrip())
    return lines


def _is_number(rows: Sequence[Sequence[str]], column: int) -> bool:
    return column > 0 and any(row[column][:1].isdigit() and len(row[column]) < 12 for row in rows)
