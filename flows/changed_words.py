"""What differs between two revisions, in words and tables that can be read without the program's papers."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pyarrow as pa
import pyarrow.compute as pc

from flows.pages import Block, Grid, Heading, Paragraph, Sentences
from pipeline.archive.listing import Change
from pipeline.findings import at
from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping, Sequence

    from pipeline.archive import DeliveredFile, RevisionChanges
    from pipeline.archive.changes import ColumnDifference, TableChanges
    from pipeline.archive.origins import OriginChanges

_MOST_ROWS = 20  # rows that are named one by one; beyond them casts
_MOST_CASTS = 20
_MOST_VALUES = 50
_MORE = "--format json or --out FILE.parquet tells all"
_WORDS = {"samples": "samples", "casts": "CTD levels"}
_KEYS = {
    "samples": ("sample number stands", "sample numbers stand"),
    "casts": ("pressure stands", "pressures stand"),
}


def blocks_of(found: RevisionChanges) -> list[Block]:
    """Return all that is to be told of a comparison."""
    before, after = found.before.revision, found.after.revision
    names = [name for name in TABLE_NAMES if name in found.after.tables]
    blocks: list[Block] = [
        Heading(f"{found.after.expocode}: revision {after} against revision {before}", 1),
        Paragraph(_why(found.origins)),
    ]
    if told := list(_origins(found.origins)):
        blocks.append(Sentences(told))
    counts = [(name, _count(found.before.tables, name), _count(found.after.tables, name)) for name in names]
    blocks.append(Grid([("rows of", f"revision {before}", f"revision {after}"), *counts]))
    for table in found.tables:
        if table.rows_before or table.rows_after:
            blocks += _table(table, before, after)
    return blocks


def _count(tables: Mapping[str, int], name: str) -> str:
    return str(tables.get(name, "-"))


def _why(origins: OriginChanges) -> str:
    match origins.delivery_changed, origins.processing_changed:
        case True, False:
            return "The delivery changed; settings, source waters and program are the same."
        case False, True:
            return "The same files were delivered; the processing changed."
        case True, True:
            return "Both the delivery and the processing changed."
        case _:
            return "Both were made from the same files in the same way."


def _origins(origins: OriginChanges) -> Iterator[str]:
    added = {file.name: file for file in origins.files_added}
    gone = {file.name: file for file in origins.files_gone}
    for name, file in gone.items():
        if name in added:
            yield f"{name} is another edition: {_extent(added[name])}; before {_extent(file)}."
        else:
            yield f"{name} is no longer used ({_extent(file)})."
    for name, file in added.items():
        if name not in gone:
            yield f"{name} is new ({_extent(file)})."
    for old, new in origins.files_renamed:
        yield f"{old} is called {new} now; its bytes are the same."
    if origins.settings_changed:
        yield from _settings(origins.settings)
    if origins.sources_changed:
        yield _sources(*origins.sources)
    if origins.version_changed:
        (old, new), (schema, later) = origins.versions, origins.schemas
        yield f"program: was seawhence {old} (tables of version {schema}), is {new} (tables of version {later})."


def _extent(file: DeliveredFile) -> str:
    return f"{file.rows} rows, {file.size} bytes, SHA-256 {file.sha256[:16]}"


def _settings(settings: Mapping[str, tuple[Any, Any]] | None) -> Iterator[str]:
    if settings is None:
        yield "settings: changed; the archive does not have the text of both, so which of them cannot be told."
        return
    for name, (old, new) in settings.items():
        yield f"settings: {name} was {_setting(old)}, is {_setting(new)}."


def _setting(value: Any) -> str:
    return "not set" if value is None else str(value)[:200]


def _sources(old: str, new: str) -> str:
    if not old or not new:
        return f"source waters: were {_titled(old)}, are {_titled(new)}."
    if old == new:
        return f"source waters: the catalogue '{new}' was changed under the same title."
    return f"source waters: were {_titled(old)}, are {_titled(new)}."


def _titled(title: str) -> str:
    return f"'{title}'" if title else "none"


def _table(table: TableChanges, before: int, after: int) -> list[Block]:
    more = _WORDS[table.table]
    pairing = table.pairing
    blocks: list[Block] = [
        Heading(f"{more}: {table.rows_before} before, {table.rows_after} now"),
    ]
    if table.is_same:
        return [*blocks, Paragraph("Nothing differs.")]
    listed = table.listing
    told = [f"{len(pairing.gone)} gone, {len(pairing.added)} added, {len(pairing.after)} in both."]
    told += _row_sentences(listed, Change.GONE, table.table, before)
    told += _row_sentences(listed, Change.ADDED, table.table, after)
    told += [f"the column {name} is gone (it had {_values(n)})." for name, n in table.columns_gone.items()]
    told += [f"the column {name} is new ({_values(n)})." for name, n in table.columns_added.items()]
    if pairing.repeated_keys:
        words = _counted(pairing.repeated_keys, *_KEYS[table.table])
        told.append(f"{words} more than once in a cast; these were compared in the order they stand in.")
    if pairing.casts_by_order:
        words = _counted(pairing.casts_by_order, "cast has", "casts have")
        told.append(
            f"{words} other pressures throughout; the levels were compared in the order they stand in."
        )
    blocks.append(Sentences(told))
    if table.delivered:
        blocks += [Heading(f"{more}: delivered values that differ", 3), Grid(_columns(table.delivered))]
        blocks += _value_grid(listed, table.table)
    if table.computed or table.computed_gone or table.computed_added:
        blocks.append(Heading(f"{more}: what was computed from them", 3))
        if table.computed:
            blocks.append(Grid(_columns(table.computed)))
        beside = (
            [f"columns no longer there: {', '.join(table.computed_gone)}."] if table.computed_gone else []
        )
        if table.computed_added:
            beside.append(f"new columns: {', '.join(table.computed_added)}.")
        if beside:
            blocks.append(Sentences(beside))
    return blocks


def _values(count: int) -> str:
    return _counted(count, "value", "values")


def _counted(count: int, one: str, more: str) -> str:
    return f"{count} {one if count == 1 else more}"


def _row_sentences(listed: pa.Table, change: Change, table: str, revision: int) -> list[str]:
    """Return which rows, of a revision, came or went: each by itself where they are few, else by cast."""
    rows = _of(listed, {change})
    names = ["file", "line", "station", "cast", "sample", "pressure", "occurrence"]
    if table == "samples" and rows.num_rows <= _MOST_ROWS:
        return [
            f"{change}: {where(row)}{_again(row)}{_line(row, revision)}."
            for row in rows.select(names).to_pylist()
        ]
    casts = rows.group_by(["station", "cast"], use_threads=False).aggregate(
        [("sample", "first"), ("pressure", "first"), ([], "count_all")]
    )
    more = _WORDS[table]
    sentences = []
    for own in casts.slice(0, _MOST_CASTS).to_pylist():
        cast = {name: own[name] for name in ("station", "cast")}
        if own["count_all"] == 1:
            alone = {"sample": own["sample_first"], "pressure": own["pressure_first"]}
            sentences.append(f"{change}: {where({**cast, **alone})}.")
        else:
            sentences.append(f"{change}: {where(cast)}: {own['count_all']} {more}.")
    if casts.num_rows > _MOST_CASTS:
        left = pc.sum(casts.column("count_all").slice(_MOST_CASTS)).as_py()
        sentences.append(
            f"{change}: ... and {left} {more} of {casts.num_rows - _MOST_CASTS} more casts ({_MORE})."
        )
    return sentences


def _of(listed: pa.Table, changes: set[Change]) -> pa.Table:
    return listed.filter(pc.is_in(listed.column("change"), pa.array([one.value for one in changes])))


def where(row: Mapping[str, Any]) -> str:
    """Return in words which sample or level a row is: a sample by its number, a level by its pressure."""
    words = [f"station {row['station']}", f"cast {row['cast']}"]
    if row.get("sample") is not None:
        words.append(f"sample {row['sample']}")
    elif row.get("pressure") is not None:
        words.append(f"{row['pressure']:g} dbar")
    return ", ".join(words)


def _again(row: Mapping[str, Any]) -> str:
    return f", row {row['occurrence']} of that name" if (row["occurrence"] or 1) > 1 else ""


def _line(row: Mapping[str, Any], revision: int) -> str:
    """Return where a row stands: an edition may have the name of another."""
    return f" ({at(row['file'], row['line'])} of revision {revision})" if row["file"] and row["line"] else ""


def _columns(differences: Sequence[ColumnDifference]) -> list[tuple[str, ...]]:
    rows: list[tuple[str, ...]] = [
        ("column", "changed", "appeared", "vanished", "largest difference", "unit", "at")
    ]
    rows += [
        (
            one.name,
            str(one.changed),
            str(one.appeared),
            str(one.vanished),
            "-" if one.largest is None else _signed(one.largest),
            one.unit if one.unit != "1" else "",
            where(one.at) if one.at else "",
        )
        for one in differences
    ]
    return rows


def _signed(number: float) -> str:
    return f"{number:+.6g}"


def _value_grid(listed: pa.Table, table: str) -> Iterable[Block]:
    """Yield the values that differ, the first of them where they are many."""
    values = _of(listed, {Change.VALUE, Change.FLAG, Change.APPEARED, Change.VANISHED})
    third = "sample" if table == "samples" else "pressure"
    rows = [("station", "cast", third, "column", "before", "now", "difference")]
    for row in values.slice(0, _MOST_VALUES).to_pylist():
        key = row[third]
        rows.append(
            (
                str(row["station"]),
                str(row["cast"]),
                "-" if key is None else f"{key:g}" if isinstance(key, float) else str(key),
                row["variable"],
                "-" if row["before"] is None else row["before"],
                "-" if row["after"] is None else row["after"],
                "" if row["difference"] is None else _signed(row["difference"]),
            )
        )
    yield Grid(rows)
    if values.num_rows > _MOST_VALUES:
        yield Paragraph(f"... and {values.num_rows - _MOST_VALUES} more ({_MORE}).")
