from __future__ import annotations

import io
import os
import subprocess
import sys
from dataclasses import replace
from itertools import pairwise
from pathlib import Path
from threading import Thread
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline import tables as known
from pipeline.archive import (
    Disk,
    clean_staging,
    open_archive,
    publish,
    read_contents,
    read_table,
    revisions,
)
from pipeline.archive.layout import held_key
from pipeline.archive.writing import ROW_GROUP, write_table
from pipeline.problems import ArchiveProblem, BrokenPromise
from pipeline.tables import TABLE_NAMES

from .invented import SAMPLES, Dying, digests, leftovers, provenance, tables

CRUISE = "77XX20260101"


@pytest.fixture
def archive(tmp_path: Path) -> Disk:
    return open_archive(tmp_path / "archive", create=True)


def as_bytes(table: pa.Table) -> bytes:
    sink = io.BytesIO()
    write_table(table, {"key": "value"}, sink)
    return sink.getvalue()


def test_tables_come_back_as_they_were_published(archive: Disk) -> None:
    assert publish(archive, provenance(), tables()) == 1
    for name, table in tables().items():
        read = read_table(archive, CRUISE, name)
        assert read.replace_schema_metadata(None).equals(table)
        assert read.schema.equals(table.schema, check_metadata=False)
        assert all(read.schema.field(f.name).metadata == f.metadata for f in table.schema)
    assert read_table(archive, CRUISE, "casts", columns=["pressure"]).column_names == ["pressure"]
    assert leftovers(archive.root) == []


def test_each_revision_stays_readable(archive: Disk) -> None:
    for seed in range(3):
        assert publish(archive, provenance(seed=seed), tables(seed=seed)) == seed + 1
    assert revisions(archive, CRUISE) == (1, 2, 3)
    for seed in range(3):
        for name, table in tables(seed=seed).items():
            read = read_table(archive, CRUISE, name, revision=seed + 1)
            assert read.replace_schema_metadata(None).equals(table)
            assert read.schema.metadata[b"seawhence.revision"] == str(seed + 1).encode()


def test_content_of_an_earlier_revision_comes_back_as_a_new_one(archive: Disk) -> None:
    for seed in (0, 1, 0):
        publish(archive, provenance(seed=seed), tables(seed=seed))
    assert revisions(archive, CRUISE) == (1, 2, 3)


def test_publishing_what_is_current_writes_nothing(archive: Disk) -> None:
    publish(archive, provenance(), tables())
    before = digests(archive.root)
    counting = Dying(archive.root)
    assert publish(counting, replace(provenance(), revision=99), tables()) == 1
    assert counting.steps == []
    assert digests(archive.root) == before


def test_the_same_cruise_gives_the_same_bytes_in_another_process(tmp_path: Path) -> None:
    here = open_archive(tmp_path / "here", create=True)
    for seed in range(2):
        publish(here, provenance(seed=seed), tables(seed=seed))
    script = (
        "import sys\nfrom tests.archive.invented import provenance, tables\n"
        "from pipeline.archive import open_archive, publish\n"
        "there = open_archive(sys.argv[1], create=True)\n"
        "for seed in range(2): publish(there, provenance(seed=seed), tables(seed=seed))\n"
    )
    path = str(Path(__file__).parents[2])
    environment = {**os.environ, "PYTHONPATH": path, "PYTHONHASHSEED": "77", "TZ": "Pacific/Apia"}
    subprocess.run([sys.executable, "-c", script, str(tmp_path / "there")], check=True, env=environment)
    assert digests(tmp_path / "there") == digests(tmp_path / "here")
    assert len(digests(tmp_path / "here")) == 10


@settings(deadline=None, derandomize=True, max_examples=30)
@given(st.lists(st.integers(0, SAMPLES), max_size=4))
def test_how_a_table_was_put_together_does_not_show(cuts: list[int]) -> None:
    table = tables()["samples"]
    edges = [0, *sorted(cuts), table.num_rows]
    pieces = [table.slice(a, b - a) for a, b in pairwise(edges)]
    assert as_bytes(pa.concat_tables(pieces)) == as_bytes(table)


def test_large_tables_are_cut_into_row_groups_of_one_size() -> None:
    rows = ROW_GROUP + 10
    table = pa.table({"pressure": pa.nulls(rows, pa.float64()), "a.b": pa.array(range(rows))})
    found = pq.ParquetFile(io.BytesIO(as_bytes(table)))
    assert [found.metadata.row_group(i).num_rows for i in range(found.num_row_groups)] == [ROW_GROUP, 10]
    assert found.read().replace_schema_metadata(None).equals(table)


def test_files_can_be_chosen_by_place_and_time_from_their_footers() -> None:
    table = known.with_columns(known.empty([]), {"latitude": [-3.0, 4.0], "nitrate": [1.0, 2.0]})
    group = pq.ParquetFile(io.BytesIO(as_bytes(table))).metadata.row_group(0)
    statistics = group.column(0).statistics
    assert (statistics.min, statistics.max) == (-3.0, 4.0)
    assert group.column(1).statistics is None


@pytest.mark.parametrize("expocode", ["316N138/12", "../../x", "..", "/etc/x", "a\0b", ".x", "ÆØÅ 1", "%2F"])
def test_odd_expocodes_stay_inside_and_come_back(archive: Disk, expocode: str) -> None:
    for seed in range(2):
        publish(archive, provenance(expocode, seed), tables(expocode, seed))
    assert list(read_contents(archive).cruises) == [expocode]
    assert read_contents(archive).cruises[expocode].is_whole
    assert read_contents(archive).strangers == ()
    assert [path.name for path in archive.root.parent.iterdir()] == ["archive"]
    assert read_table(archive, expocode, "samples", revision=1).num_rows == SAMPLES


@pytest.mark.parametrize("expocode", ["", "x" * 300, "\ud800"])
def test_expocodes_that_cannot_be_stored_are_refused(archive: Disk, expocode: str) -> None:
    with pytest.raises(ArchiveProblem, match="expocode"):
        publish(archive, provenance(expocode), tables())
    assert digests(archive.root, working=True) == {}


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"rows": 15}, r"a_hy1\.csv: rows: found 14 rows, expected 15"),
        ({"kept": 11, "rows": 13}, "samples: found 12 rows, expected 11"),
        ({"rejected": 3, "rows": 15}, "rejects: found 2 rows, expected 3"),
        ({"kind": "ctd"}, "samples: found 12 rows, expected 0"),
    ],
)
def test_a_lost_row_stops_the_publication(archive: Disk, change: dict[str, Any], said: str) -> None:
    bottle, ctd = provenance().deliveries
    record = replace(provenance(), deliveries=(replace(bottle, **change), ctd))
    with pytest.raises(BrokenPromise, match=said):
        publish(archive, record, tables())
    assert digests(archive.root, working=True) == {}


def test_all_five_tables_are_expected(archive: Disk) -> None:
    with pytest.raises(BrokenPromise, match="expected"):
        publish(archive, provenance(), {name: tables()[name] for name in TABLE_NAMES[:4]})


def test_two_that_publish_the_same_cruise_at_once_wait_for_each_other(archive: Disk) -> None:
    seeds = range(6)
    found: list[int] = []
    workers = [
        Thread(target=lambda s=seed: found.append(publish(archive, provenance(seed=s), tables(seed=s))))
        for seed in seeds
    ]
    for worker in workers:
        worker.start()
    for worker in workers:
        worker.join()
    assert sorted(found) == [1, 2, 3, 4, 5, 6]
    assert revisions(archive, CRUISE) == (1, 2, 3, 4, 5, 6)
    assert leftovers(archive.root) == []


def test_what_dead_runs_left_in_the_staging_place_is_removed(archive: Disk) -> None:
    staging = archive.root / ".staging"
    (staging / "316N138%2F12").mkdir()
    (staging / "316N138%2F12" / "samples.parquet").write_bytes(b"half")
    (staging / "316N138%2F12~held").touch()
    (staging / "0123~part").write_bytes(b"half")
    (staging / "live").mkdir()
    (staging / "live" / "casts.parquet").write_bytes(b"half")
    with archive.hold(held_key("live"), fleeting=True):
        clean_staging(archive)
        assert sorted(path.name for path in staging.iterdir()) == ["live", "live~held"]
    clean_staging(archive)
    assert leftovers(archive.root) == []
