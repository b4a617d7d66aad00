"""Cruises with more CTD levels than are held at once: the same tables as of one that is held whole."""

from __future__ import annotations

import io
import json
from contextlib import closing
from typing import TYPE_CHECKING, Any

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from flows.spilling import Casts, Kept
from pipeline.archive.writing import ROW_GROUP, write_table
from pipeline.large_cruise import blocks
from tests.flows.conftest import FIXTURES, call
from tests.invented import EXPOCODE, bottle_file, cast_file, zipped

if TYPE_CHECKING:
    from pathlib import Path

    from tests.flows.conftest import Outcome

SOURCES = FIXTURES / "sources.toml"
CRUISES = ("ZZV120090306", "ZZV220210218")


def levels_of(station: int) -> tuple[str, ...]:
    """Six levels, at every station other ones."""
    warm = 20 - 0.05 * station
    return tuple(
        f"{10.0 * n:.1f},2,{warm - 0.7 * n:.4f},2,{35 + 0.1 * n * (8 - n) / 8:.4f},2" for n in range(6)
    )


LEVELS = levels_of(0)


def in_any_order(table: pa.Table) -> pa.Table:
    """Return findings sorted: of a large cruise those of the track come before those of values."""
    return table.sort_by([(name, "ascending") for name in ("check", "message", "line")])


def run(tmp_path: Path, inbox: Path, levels: int, *more: str | Path) -> tuple[Path, Outcome]:
    """Run with so many levels at once and return the archive, and what was said."""
    settings = tmp_path / f"{levels}.toml"
    settings.write_text(f"[reading]\nlevels_at_once = {levels}\n")
    archive = tmp_path / f"archive-{levels}"
    return archive, call("run", inbox, "--archive", archive, "--settings", settings, *more)


def record(archive: Path, cruise: str) -> dict[str, Any]:
    found: dict[str, Any] = json.loads(
        pq.read_schema(archive / "casts" / f"{cruise}.parquet").metadata[b"seawhence"]
    )
    return found


@pytest.mark.parametrize("levels", [7_000, 1])
def test_the_invented_cruises_in_blocks_are_those_that_are_held_whole(
    tmp_path: Path, demonstration: tuple[Path, Outcome], levels: int
) -> None:
    archive, done = run(tmp_path, FIXTURES / "inbox", levels, "--sources", SOURCES)
    whole, said = demonstration
    assert done.out.splitlines()[:-1] == said.out.splitlines()[:-1]
    for cruise in CRUISES:
        for table in ("samples", "casts", "mixtures", "findings", "rejects"):
            found, expected = (pq.read_table(a / table / f"{cruise}.parquet") for a in (archive, whole))
            if table == "findings":
                found, expected = in_any_order(found), in_any_order(expected)
            assert found.equals(expected), table
            assert found.schema.remove_metadata().equals(
                expected.schema.remove_metadata(), check_metadata=True
            )
        assert record(archive, cruise)["deliveries"] == record(whole, cruise)["deliveries"]
    assert call("show", archive, "--verify").status == 0


def test_members_that_are_refused_and_rows_that_are_rejected_are_accounted_for(tmp_path: Path) -> None:
    inbox = tmp_path / "inbox"
    inbox.mkdir()
    casts = {f"{n:02d}_ct1.csv": cast_file(levels_of(n), header={"STNNBR": str(n)}) for n in range(1, 9)}
    casts["20_ct1.csv"] = cast_file((*levels_of(20), "x,2,1.0,2,35.0,2", "20.0,2"), header={"STNNBR": "20"})
    casts["30_ct1.csv"] = b"CTD,nothing\n"
    casts["song.txt"] = b"la la"
    (inbox / "a_ct1.zip").write_bytes(zipped(casts))
    (inbox / "b_ct1.csv").write_bytes(cast_file(levels_of(40), header={"STNNBR": "40"}))
    (inbox / "c_hy1.csv").write_bytes(bottle_file({}, {"CTDPRS": "2000.0"}))
    few, done = run(tmp_path, inbox, 11)
    whole, said = run(tmp_path, inbox, 10_000)
    assert done.status == said.status == 1
    assert done.out.splitlines()[:-1] == said.out.splitlines()[:-1]
    assert record(few, EXPOCODE)["deliveries"] == record(whole, EXPOCODE)["deliveries"]
    for table in ("samples", "casts", "findings", "rejects"):
        found, expected = (pq.read_table(a / table / f"{EXPOCODE}.parquet") for a in (few, whole))
        if table == "findings":
            found, expected = in_any_order(found), in_any_order(expected)
        assert found.equals(expected), table


def test_casts_with_columns_of_their_own_get_those_of_all(tmp_path: Path) -> None:
    inbox = tmp_path / "inbox"
    inbox.mkdir()
    plain = cast_file(LEVELS)
    more = cast_file(LEVELS, header={"STNNBR": "2"}).replace(
        b",CTDSAL_FLAG_W", b",CTDSAL_FLAG_W,CTDTURB,MEMO"
    )
    more = more.replace(b",PSS-78,", b",PSS-78,,NTU,").replace(b",2\n", b",2,0.5,word\n")
    (inbox / "a_ct1.zip").write_bytes(zipped({"1_ct1.csv": plain, "2_ct1.csv": more}))
    few, done = run(tmp_path, inbox, 4)
    whole, _ = run(tmp_path, inbox, 10_000)
    assert done.status == 0
    found, expected = (pq.read_table(a / "casts" / f"{EXPOCODE}.parquet") for a in (few, whole))
    assert found.equals(expected)
    assert found.column_names == expected.column_names
    assert "CTDTURB" in " ".join(found.column_names).upper()


def test_a_zip_of_two_cruises_is_divided(tmp_path: Path) -> None:
    inbox = tmp_path / "inbox"
    inbox.mkdir()
    other = {"STNNBR": "2", "EXPOCODE": "ZZV320140610"}
    (inbox / "a_ct1.zip").write_bytes(
        zipped({"1_ct1.csv": cast_file(LEVELS), "2_ct1.csv": cast_file(LEVELS, header=other)})
    )
    archive, done = run(tmp_path, inbox, 4)
    assert done.status == 0, done
    assert sorted(path.stem for path in (archive / "casts").iterdir()) == [EXPOCODE, "ZZV320140610"]


def test_a_reissue_of_some_casts_replaces_their_zip(tmp_path: Path) -> None:
    inbox = tmp_path / "inbox"
    inbox.mkdir()
    for name, stations in (("a", (1, 2, 3)), ("b", (4, 5))):
        casts = {f"{n}_ct1.csv": cast_file(LEVELS, header={"STNNBR": str(n)}) for n in stations}
        (inbox / f"{name}_ct1.zip").write_bytes(zipped(casts))
    run(tmp_path, inbox, 7)
    for path in inbox.iterdir():
        path.unlink()
    again = {"1_ct1.csv": cast_file(LEVELS[:5]), "3_ct1.csv": cast_file(LEVELS, header={"STNNBR": "3"})}
    (inbox / "c_ct1.zip").write_bytes(zipped(again))
    _, done = run(tmp_path, inbox, 7)
    assert done.out.startswith(f"{EXPOCODE}  revised, revision 2: 23 rows in, 23 kept")


def test_blocks_are_whole_casts_up_to_a_number_of_levels() -> None:
    casts = [(n, pa.table({"a": [0] * rows})) for n, rows in enumerate((3, 3, 4, 12, 1, 1))]
    found = [[number for number, _ in block] for block in blocks(casts, 7)]
    assert found == [[0, 1], [2], [3], [4, 5]]
    assert list(blocks([], 7)) == []


def test_a_large_table_is_the_same_bytes_however_it_was_put_together() -> None:
    rows = ROW_GROUP + 5_000
    table = pa.table(
        {
            "expocode": pa.array(["ZZV1"] * rows),
            "pressure": pa.array(range(rows), pa.float64()),
            "flag": pa.array([2] * rows, pa.int16()),
            "nothing": pa.nulls(rows, pa.float64()),
        }
    )
    made = []
    for parts in ((rows,), (1, rows - 1), (40_000, 60_000, rows - 100_000)):
        with closing(Kept()) as kept:
            start = 0
            for part in parts:
                kept.add(table.slice(start, part))
                start += part
            assert kept.num_rows == rows
            assert kept.is_missing("nothing")
            assert not kept.is_missing("pressure")
            sink = io.BytesIO()
            write_table(kept, {"made": "here"}, sink)
            made.append(sink.getvalue())
    held = io.BytesIO()
    write_table(table, {"made": "here"}, held)
    assert made == [held.getvalue()] * 3
    assert pq.read_schema(io.BytesIO(made[0])).metadata == {b"made": b"here"}
    assert pq.read_metadata(io.BytesIO(made[0])).num_row_groups == 2


def test_casts_come_back_as_they_were_put_aside() -> None:
    tables = [pa.table({"a": [1.0, None]}), pa.table({"a": [2.0], "b": ["x"]}), pa.table({"a": [3.0]})]
    with closing(Casts()) as casts:
        for table in tables:
            casts.add(table)
        assert list(casts) == tables == list(casts)
        assert casts.num_rows == 4
        assert [table.column_names for table in casts.columns] == [["a"], ["a", "b"]]


LEVELS = tuple(f"{10.0 * n:.1f},2,{20 - 0.7 * n:.4f},2,{35 + 0.1 * n * (8 - n) / 8:.4f},2" for n in range(6))
