from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

import duckdb
import pandas as pd
import polars as pl
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.archive import DeliveredFile, Provenance, fingerprint, open_archive, publish, read_cruise
from pipeline.archive.provenance import SCHEMA_VERSION
from pipeline.problems import ArchiveProblem
from pipeline.version import VERSION

from .invented import SAMPLES, digests, provenance, tables

if TYPE_CHECKING:
    from pathlib import Path

NAMES = st.text(st.characters(), max_size=20)
FILES = st.builds(
    DeliveredFile, NAMES, NAMES, st.integers(0), st.sampled_from(["bottle", "ctd"]), *[st.integers(0)] * 3
)
RECORDS = st.builds(
    Provenance,
    expocode=NAMES,
    deliveries=st.lists(FILES, max_size=3).map(tuple),
    settings_sha256=NAMES,
    catalogue_sha256=NAMES | st.none(),
    catalogue_title=NAMES,
    revision=st.integers(0),
    tables=st.dictionaries(NAMES, st.integers(0), max_size=3),
)


@settings(deadline=None, derandomize=True)
@given(RECORDS)
def test_a_record_comes_back_from_json(record: Provenance) -> None:
    assert Provenance.from_json(record.to_json()) == record
    assert record.to_json().isascii()


@pytest.mark.parametrize("text", ["", "{", "[]", "{}", '{"deliveries": [{}]}', '{"deliveries": 3}', "null"])
def test_what_is_no_record_is_refused(text: str) -> None:
    with pytest.raises(ValueError, match=r"."):
        Provenance.from_json(text)


def test_what_a_later_writer_added_is_passed_over() -> None:
    text = provenance().to_json()
    assert Provenance.from_json(text[:-1] + ',"weather":"fair"}') == provenance()


@pytest.mark.parametrize(
    "change",
    [
        {"settings_sha256": "6" * 64},
        {"catalogue_sha256": "f" * 64},
        {"catalogue_sha256": None},
        {"schema_version": SCHEMA_VERSION + 1},
        {"pipeline_version": "99"},
        {"deliveries": provenance().deliveries[:1]},
        {"deliveries": provenance(seed=1).deliveries},
        {"deliveries": (replace(provenance().deliveries[0], name="b.csv"), provenance().deliveries[1])},
    ],
)
def test_what_decides_the_content_decides_the_fingerprint(change: dict[str, Any]) -> None:
    assert replace(provenance(), **change).fingerprint != provenance().fingerprint


@pytest.mark.parametrize(
    "change", [{"revision": 7}, {"tables": {"samples": 3}}, {"deliveries": provenance().deliveries[::-1]}]
)
def test_what_does_not_decide_the_content_leaves_the_fingerprint(change: dict[str, Any]) -> None:
    assert replace(provenance(), **change).fingerprint == provenance().fingerprint


def test_the_fingerprint_is_known_before_a_file_is_read() -> None:
    record = provenance()
    delivered = [(file.name, file.sha256) for file in record.deliveries]
    wanted = fingerprint(delivered, record.settings_sha256, record.catalogue_sha256)
    assert wanted == record.fingerprint
    assert len(wanted) == 64


def test_any_reader_sees_where_a_table_came_from(tmp_path: Path) -> None:
    record = provenance("316N138/12")
    publish(open_archive(tmp_path, create=True), record, tables("316N138/12"))
    path = str(tmp_path / "samples" / "316N138%2F12.parquet")

    frame = pd.read_parquet(path)
    assert frame.attrs["revision"] == "1"
    assert frame.attrs["fingerprint"] == record.fingerprint
    assert frame.attrs["expocode"] == "316N138/12"

    seen = pl.read_parquet_metadata(path)
    assert seen["seawhence.revision"] == "1"
    assert seen["seawhence.pipeline_version"] == VERSION
    assert pl.read_parquet(path).height == SAMPLES

    duck = duckdb.connect()
    rows = duck.execute("select key, value from parquet_kv_metadata(?)", [path]).fetchall()
    told = {bytes(key).decode(): bytes(value).decode() for key, value in rows}
    assert told["seawhence.fingerprint"] == record.fingerprint
    assert told["seawhence.table"] == "samples"

    read = Provenance.from_json(told["seawhence"])
    assert read == replace(record, revision=1, tables={name: t.num_rows for name, t in tables().items()})
    assert pq.read_schema(path).metadata[b"seawhence.revision"] == b"1"
    assert pq.read_schema(path).field("bottle_salinity").metadata[b"units"] == b"1"


def test_nothing_of_the_moment_or_machine_is_written(tmp_path: Path) -> None:
    archive = open_archive(tmp_path, create=True)
    publish(archive, provenance(), tables())
    keys = set(pq.read_metadata(tmp_path / "casts" / "77XX20260101.parquet").metadata)
    names = ("schema_version", "pipeline_version", "expocode", "revision", "fingerprint", "table")
    assert keys == {
        b"ARROW:schema",
        b"PANDAS_ATTRS",
        b"seawhence",
        *(f"seawhence.{n}".encode() for n in names),
    }


@pytest.mark.parametrize(
    ("metadata", "said"),
    [
        ({}, "not written by seawhence"),
        ({"seawhence": "{"}, "its provenance cannot be read"),
        ({"seawhence": replace(provenance(), schema_version=99).to_json()}, "tables of version 99"),
        (provenance("other").to_metadata("casts"), "holds the casts of other"),
        (provenance().to_metadata("rejects"), "holds the rejects of 77XX20260101"),
        (replace(provenance(), tables={"casts": 9}).to_metadata("casts"), "has 1 rows, 9 were written"),
    ],
)
def test_a_file_that_is_not_ours_is_told_and_never_replaced(
    tmp_path: Path, metadata: dict[str, str], said: str
) -> None:
    archive = open_archive(tmp_path, create=True)
    foreign = pa.table({"a": [1]}).replace_schema_metadata(metadata)
    pq.write_table(foreign, tmp_path / "casts" / "77XX20260101.parquet")
    before = digests(tmp_path)
    with pytest.raises(ArchiveProblem, match=said):
        publish(archive, provenance(), tables())
    assert digests(tmp_path) == before
    assert said in read_cruise(archive, "77XX20260101").troubles[0]
