"""Archives as analysts open them, tried on the demonstration's."""

from __future__ import annotations

import subprocess
import sys
from typing import TYPE_CHECKING, Any

import polars as pl
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq
import pytest

import pipeline
from pipeline.archive import read_table
from pipeline.opening import united
from pipeline.problems import ArchiveProblem, UsageProblem
from pipeline.tables import TABLE_NAMES
from tests.archive.invented import provenance, tables

from .conftest import ROOT, Outcome

if TYPE_CHECKING:
    from pathlib import Path

    from pipeline.opening import Archive

ONE, OTHER, SMALL = "ZZV120090306", "ZZV220210218", "ZZV519960914"


@pytest.fixture
def archive(demonstration: tuple[Path, Outcome]) -> Archive:
    return pipeline.open_archive(demonstration[0])


def test_importing_the_package_loads_nothing_heavy() -> None:
    code = "import pipeline, sys; assert not {'pyarrow', 'numpy', 'prefect', 'pandas'} & set(sys.modules)"
    subprocess.run([sys.executable, "-c", code], check=True, cwd=ROOT)
    code = "import pipeline, sys; pipeline.open_archive; assert not {'prefect', 'flows', 'polars'} & set(sys.modules)"
    subprocess.run([sys.executable, "-c", code], check=True, cwd=ROOT)
    with pytest.raises(AttributeError, match="no attribute 'open_archives'"):
        _ = pipeline.open_archives


def test_a_table_of_one_cruise_is_the_file_as_it_is(
    archive: Archive, demonstration: tuple[Path, Outcome]
) -> None:
    for name in TABLE_NAMES:
        file = pq.read_table(demonstration[0] / name / f"{ONE}.parquet")
        found = archive.table(name, cruises=[ONE]).to_arrow()
        assert found.equals(file, check_metadata=True), name


def test_all_cruises_lie_one_below_the_other_with_missing_columns_as_null(archive: Archive) -> None:
    view = archive.table("samples")
    table = view.to_arrow()
    each = {cruise: archive.table("samples", cruises=[cruise]).to_arrow() for cruise in archive.cruises}
    assert table.num_rows == view.count_rows() == sum(one.num_rows for one in each.values())
    assert set(table.column_names) == {name for one in each.values() for name in one.column_names}
    for cruise, one in each.items():
        rows = table.filter(pc.equal(table.column("expocode"), cruise))
        for name in table.column_names:
            expected = one.column(name).to_pylist() if name in one.column_names else [None] * one.num_rows
            assert rows.column(name).to_pylist() == expected, (cruise, name)


def test_units_and_names_stay_with_the_columns(archive: Archive) -> None:
    view = archive.table("samples", columns=["aou", "delta_carbon_13", "station"])
    table = view.to_arrow()
    assert table.column_names == ["aou", "delta_carbon_13", "station"]
    assert table.schema.field("aou").metadata[b"units"] == b"umol kg-1"
    assert table.schema.field("aou").metadata[b"standard_name"] == b"apparent_oxygen_utilization"
    assert view.to_pandas().attrs["units"] == {"aou": "umol kg-1", "delta_carbon_13": "1e-3"}


def test_filters_go_by_columns_that_are_not_asked_for(archive: Archive) -> None:
    whole = archive.table("samples", columns=["station", "pressure", "aou"]).to_pandas()
    deep = archive.table(
        "samples", columns=["station", "aou"], filter=[("pressure", ">", 3000), ("aou", "<", 90)]
    )
    expected = whole[(whole.pressure > 3000) & (whole.aou < 90)][["station", "aou"]].reset_index(drop=True)
    assert 0 < len(expected) < len(whole)
    assert deep.to_pandas().equals(expected)
    assert deep.count_rows() == len(expected)
    same = archive.table(
        "samples", columns=["station", "aou"], filter=(pc.field("pressure") > 3000) & (pc.field("aou") < 90)
    )
    assert same.to_arrow().equals(deep.to_arrow())


def test_polars_reads_what_its_query_needs(archive: Archive) -> None:
    lazy = archive.table("mixtures", filter=[("source", "==", "OVF")]).to_polars()
    assert isinstance(lazy, pl.LazyFrame)
    asked = lazy.filter(pl.col("share") > 0.5).select("expocode", "share")
    assert "PROJECT 2/" in asked.explain()
    found = asked.collect()
    table = archive.table("mixtures").to_pandas()
    expected = table[(table.source == "OVF") & (table.share > 0.5)]
    assert sorted(found["share"].to_list()) == sorted(expected.share)


def test_a_column_that_only_other_cruises_have_is_null(archive: Archive) -> None:
    table = archive.table("samples", cruises=[SMALL], columns=["silicate", "cfc12"]).to_arrow()
    assert table.column("cfc12").null_count == table.num_rows == 24
    assert table.column("silicate").null_count < 24
    assert table.schema.field("cfc12").metadata[b"units"] == b"pmol kg-1"


@pytest.mark.parametrize(
    ("asked", "sentence"),
    [
        ({"name": "sample"}, "there is no table 'sample'; its tables are: samples, casts,"),
        ({"cruises": ["ZZV120090307"]}, "there is no cruise 'ZZV120090307'; near it come: ZZV120090306"),
        ({"cruises": ["X"]}, "there is no cruise 'X'; its cruises are: ZZV120090306,"),
        ({"columns": ["silicat"]}, "no cruise has a column 'silicat' in samples; near it come: silicate"),
        (
            {"filter": [("depht", ">", 1)]},
            r"filter of samples cannot be used \(No match for FieldRef.Name\(depht\)\)",
        ),
        ({"filter": [("depth", "~", 1)]}, "filter of samples cannot be used"),
        ({"filter": 7}, "filter of samples cannot be used"),
        ({"cruises": [ONE], "revision": 9}, "ZZV120090306 has no revision 9 that can be read; there are: 1"),
        ({"revision": 1}, "revision 1 is asked for; name the one cruise it is of"),
    ],
)
def test_what_is_not_there_is_told_in_a_sentence(
    archive: Archive, asked: dict[str, Any], sentence: str
) -> None:
    with pytest.raises(UsageProblem, match=sentence):
        archive.table(**{"name": "samples", **asked})


def test_provenance_findings_and_revisions(archive: Archive) -> None:
    made = archive.provenance(ONE)
    assert made.expocode == ONE
    assert {file.name for file in made.deliveries} == {f"{ONE}_ct1.zip", f"{ONE}_hy1.csv"}
    assert archive.revisions(ONE) == (1,)
    assert archive.findings(ONE).count_rows() == made.tables["findings"]
    with pytest.raises(UsageProblem, match="no cruise 'X'"):
        archive.provenance("X")


def test_earlier_revisions_can_be_read(tmp_path: Path) -> None:
    from pipeline.archive import open_archive, publish  # noqa: PLC0415 - one test

    store = open_archive(tmp_path / "a", create=True)
    for seed in (0, 1):
        publish(store, provenance(seed=seed), tables(seed=seed))
    archive = pipeline.open_archive(tmp_path / "a")
    (cruise,) = archive.cruises
    assert archive.revisions(cruise) == (1, 2)
    for revision in (1, 2):
        found = archive.table("casts", cruises=[cruise], revision=revision).to_arrow()
        assert found.equals(read_table(store, cruise, "casts", revision=revision))
        assert archive.provenance(cruise, revision).revision == revision
    (tmp_path / "a" / "casts" / f"{cruise}.parquet").write_bytes(b"spoiled")
    with pytest.raises(ArchiveProblem, match="damaged, it cannot be read"):
        archive.table("casts")
    (tmp_path / "a" / "casts" / f"{cruise}.parquet").unlink()
    with pytest.raises(ArchiveProblem, match="not published"):
        archive.table("casts")


def test_a_place_without_an_archive_is_refused(tmp_path: Path) -> None:
    with pytest.raises(ArchiveProblem, match="there is no archive here"):
        pipeline.open_archive(tmp_path)


def test_columns_of_several_types_are_united() -> None:
    one = pa.schema([pa.field("A", pa.int64(), metadata={"units": "m"}), pa.field("B", pa.float64())])
    other = pa.schema([pa.field("A", pa.float64(), metadata={"units": "km"}), pa.field("B", pa.string())])
    both = united([one, other], "samples")
    assert both.field("A").type == pa.float64()
    assert both.field("B").type == pa.string()
    assert both.field("A").metadata == {b"units": b"m | km"}
