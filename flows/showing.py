"""The command ``seawhence show``: what is in an archive, and of a cruise, where it came from."""

from __future__ import annotations

import json
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

import pyarrow.compute as pc

from flows.records import ExitStatus
from pipeline.archive import open_archive, read_contents, read_table, revisions, verify
from pipeline.mixing import notices_in
from pipeline.problems import ArchiveProblem, UsageProblem
from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    import argparse
    from collections.abc import Iterator, Mapping, Sequence

    from pipeline.archive import Contents, CruiseContents, DeliveredFile, Provenance, Store, Verified


def show(chosen: argparse.Namespace) -> int:
    """Print what was asked for; the exit status tells whether all that was looked at is whole.

    Parameters
    ----------
    chosen
        ``archive`` is a path, ``cruise`` an expocode or None, ``format`` is ``text`` or ``json``, ``verify`` says
        whether every kept byte is looked at.

    """
    store = open_archive(chosen.archive)
    contents = read_contents(store)
    if chosen.cruise is not None and chosen.cruise not in contents.cruises:
        known = ", ".join(contents.cruises) or "none"
        raise UsageProblem(
            f"{chosen.archive}: there is no cruise '{chosen.cruise}'; its cruises are: {known}."
        )
    cruise = None if chosen.cruise is None else contents.cruises[chosen.cruise]
    verified = verify(store, contents, chosen.cruise) if chosen.verify else None
    if chosen.format == "json":
        told = _archive_as_json(contents) if cruise is None else _cruise_as_json(cruise, store)
        if verified is not None:
            told["verified"] = asdict(verified)
        print(json.dumps(told, indent=2, ensure_ascii=False))
    else:
        lines = _archive(contents) if cruise is None else _cruise(cruise, store)
        print("\n".join([*lines, *_verified(verified)]))
    looked_at = contents.cruises.values() if cruise is None else [cruise]
    is_whole = all(one.is_whole for one in looked_at) and not (verified and verified.troubles)
    return ExitStatus.GOOD if is_whole else ExitStatus.REFUSED


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


def _archive_as_json(contents: Contents) -> dict[str, Any]:
    return {
        "cruises": [
            {
                "cruise": cruise.expocode,
                "revision": cruise.provenance.revision if cruise.provenance else None,
                "whole": cruise.is_whole,
                "troubles": list(cruise.troubles),
                "rows": dict(cruise.rows),
                "sources": (cruise.provenance.catalogue_title or None) if cruise.provenance else None,
            }
            for cruise in contents.cruises.values()
        ],
        "strangers": list(contents.strangers),
    }


def _cruise(cruise: CruiseContents, store: Store) -> list[str]:
    lines = [f"doubt  {trouble}" for trouble in cruise.troubles]
    made = cruise.provenance
    if made is None:
        return [*lines, f"{cruise.expocode}: none of its tables can be read."]
    earlier = [str(number) for number in _earlier(cruise.expocode, made, store)]
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
        *(f"  corrected  {words}" for words in _corrections(made)),
        "",
        "rows",
        *aligned([(f"  {name}", str(cruise.rows.get(name, "missing"))) for name in TABLE_NAMES]),
    ]
    for file in made.deliveries:
        lines += ["", f"rows of {file.name}, step by step", *aligned(_steps(file))]
    tags = _tags(cruise, store)
    total = sum(tags.values())
    rows = [
        (f"  {tag or 'none (no source waters given)'}", str(count), f"{100 * count / total:.1f} %")
        for tag, count in tags.items()
    ]
    notices = _notices(cruise, store)
    told = ["", *(f"note  {notice}" for notice in notices)] if notices else []
    return [*lines, *(["", "samples by tag", *aligned(rows)] if rows else []), *told]


def _steps(file: DeliveredFile) -> list[tuple[str, str, str]]:
    """Return what became of the rows of a file: step, rows, reasons; "-" where no account was kept."""
    account = file.account
    steps = [("  in the file", str(file.rows), "")]
    if file.set_aside:
        steps.append(("    set aside", str(file.set_aside), "another edition stands"))
    if account is None:
        unknown = (
            "with doubtful values",
            "with bad values",
            "with TEOS-10",
            "with tracers",
            "given to mixing",
        )
        return [
            *steps,
            ("    rejected", str(file.rejected), ""),
            ("  kept", str(file.kept), ""),
            *((f"    {words}", "-", "") for words in unknown),
        ]
    steps += [
        ("    rejected", str(file.rejected), _reasons(account.rejected)),
        ("  kept", str(file.kept), ""),
        ("    with bad values", str(account.faulted), "a check calls at least one value bad"),
        ("    with doubtful values", str(account.doubted), "and none bad"),
        ("    without either", str(account.unquestioned), ""),
        ("    with TEOS-10", str(account.with_teos10), ""),
        ("    with tracers", str(account.with_tracers), ""),
    ]
    if not account.given_to_mixing:
        return [*steps, ("    given to mixing", "-", "")]
    left = account.given_to_mixing - account.resolved
    return [
        *steps,
        ("    given to mixing", str(account.given_to_mixing), ""),
        ("      resolved", str(account.resolved), ""),
        ("      not resolved", str(left), _reasons(account.unresolved)),
    ]


def _reasons(counts: Mapping[str, int]) -> str:
    return ", ".join(f"{reason} {count}" for reason, count in counts.items())


def _cruise_as_json(cruise: CruiseContents, store: Store) -> dict[str, Any]:
    made = cruise.provenance
    told: dict[str, Any] = {
        "cruise": cruise.expocode,
        "whole": cruise.is_whole,
        "troubles": list(cruise.troubles),
        "rows": dict(cruise.rows),
    }
    if made is None:
        return told
    return {
        **told,
        "revision": made.revision,
        "earlier_revisions": list(_earlier(cruise.expocode, made, store)),
        "fingerprint": made.fingerprint,
        "made_from": json.loads(made.to_json()),
        "tags": {tag or "none": count for tag, count in _tags(cruise, store).items()},
        "notices": _notices(cruise, store),
    }


def _corrections(made: Provenance) -> Iterator[str]:
    """Yield in words what the settings corrected: what stands in the tables beside the delivered values."""
    for quantity, how in made.corrections.items():
        change = f"x {how['factor']:g}" if "factor" in how else f"{how['add']:+g}"
        yield f"{quantity} {change}: {how['reason']}"


def _notices(cruise: CruiseContents, store: Store) -> list[str]:
    """Return what the mixing analysis has to say of a whole cruise."""
    if not cruise.is_whole:
        return []
    return notices_in(read_table(store, cruise.expocode, "findings", columns=["check", "message"]))


def _earlier(expocode: str, made: Provenance, store: Store) -> list[int]:
    return [number for number in revisions(store, expocode) if number != made.revision]


def _tags(cruise: CruiseContents, store: Store) -> dict[str | None, int]:
    """Return how many samples have each tag, the most common first; none where they cannot be read."""
    if not cruise.rows.get("samples"):
        return {}
    try:
        tags = read_table(store, cruise.expocode, "samples", columns=["tag"]).column("tag")
    except ArchiveProblem:
        if cruise.is_whole:
            raise
        return {}
    counts = [(entry["values"], entry["counts"]) for entry in pc.value_counts(tags).to_pylist()]
    return dict(sorted(counts, key=lambda entry: (-entry[1], entry[0] or "")))


def _verified(verified: Verified | None) -> list[str]:
    if verified is None:
        return []
    lines = [f"doubt  {trouble}" for trouble in verified.troubles]
    lines += [f"note  {stranger}: not a delivered file of the archive." for stranger in verified.strangers]
    files = f"{verified.deliveries} kept file{'s' if verified.deliveries != 1 else ''}"
    tables = f"{verified.tables} table{'s' if verified.tables != 1 else ''}"
    seen = f"{files} hashed, each what its name says; {tables} read to the end, each whole and of the right revision."
    return ["", *lines, f"verified: {seen}"]


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
