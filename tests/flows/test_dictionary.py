from __future__ import annotations

import csv
import io
import json
from typing import TYPE_CHECKING

import pyarrow.parquet as pq
import pytest

from pipeline.dictionary import LISTED, columns_of, entries, flag_meanings, meanings
from pipeline.tables import TABLE_NAMES
from pipeline.variables import REGISTRY, Kind

from .conftest import FIXTURES, Outcome, call

if TYPE_CHECKING:
    from pathlib import Path


def test_every_column_that_is_written_is_in_it(demonstration: tuple[Path, Outcome]) -> None:
    """Those that passed through under their delivered name excepted: they are in no registry."""
    delivered = "".join(
        (FIXTURES / "inbox" / name).read_text(encoding="utf-8")[:4000]
        for name in ("ZZV220210218_hy1.csv", "ZZV519960914_hy1.csv")
    )
    known = {(one.table, one.name) for one in entries()}
    seen = 0
    for table in TABLE_NAMES:
        for path in (demonstration[0] / table).glob("*.parquet"):
            for field in pq.read_schema(path):
                if field.name not in REGISTRY:
                    assert field.name in delivered, (table, field.name)
                    continue
                assert (table, field.name) in known, (table, field.name)
                entry = next(one for one in entries() if (one.table, one.name) == (table, field.name))
                assert entry.units == (field.metadata or {}).get(b"units", b"").decode()
                assert entry.standard_name == (field.metadata or {}).get(b"standard_name", b"").decode()
                seen += 1
    assert seen > 900


def test_every_quantity_of_the_registry_is_in_some_table() -> None:
    assert {one.name for one in entries()} == set(REGISTRY)


def test_tables_have_no_columns_of_others() -> None:
    assert "share" not in columns_of("samples")
    assert "raw" not in columns_of("samples")
    assert "offset" not in columns_of("samples")
    assert {"tag", "reduced_chi_square", "pressure", "nitrate_flag", "residual_nitrate"} <= set(
        columns_of("samples")
    )
    assert not {"tag", "sample", "residual_nitrate", "c_star"} & set(columns_of("casts"))
    assert set(columns_of("mixtures")) == set(LISTED["mixtures"])


def test_flags_have_their_meanings() -> None:
    for name, variable in REGISTRY.items():
        found = flag_meanings(name)
        assert (found is not None) == (variable.kind is Kind.FLAG), name
        if found is not None:
            assert found[0] in meanings()
            assert meanings()[found[0]] == {str(flag): words for flag, words in found[1].items()}


def test_as_csv_and_json_say_the_same() -> None:
    rows = list(csv.DictReader(io.StringIO(call("dictionary", "--format", "csv").out)))
    told = json.loads(call("dictionary", "--format", "json").out)
    assert [(row["table"], row["name"], row["units"]) for row in rows] == [
        (one["table"], one["name"], one["units"]) for one in told["columns"]
    ]
    nitrate = next(row for row in rows if (row["table"], row["name"]) == ("samples", "nitrate"))
    assert nitrate["standard_name"] == "moles_of_nitrate_per_unit_mass_in_sea_water"
    assert nitrate["exchange_names"] == "NITRAT"
    assert nitrate["plausible_to"] == f"{REGISTRY['nitrate'].plausible[1]:g}"  # type: ignore[index]
    assert nitrate["uncertainty"] == "2 % of the value"


def test_the_page_shows_every_column_and_meaning() -> None:
    page = call("dictionary").out
    assert page.startswith("# Columns of the tables\n")
    for one in entries():
        assert f"| `{one.name}` | {one.long_name} |" in page
    assert "| 3 | leaking |" in page
    widths = {line.count(" | ") for line in page.splitlines() if line.startswith("| `")}
    assert widths == {7}


def test_it_can_be_written(tmp_path: Path) -> None:
    assert call("dictionary", "--format", "csv", "--out", tmp_path / "d.csv").out == ""
    assert (tmp_path / "d.csv").read_text(encoding="utf-8") == call("dictionary", "--format", "csv").out
    told = call("dictionary", "--out", tmp_path / "nowhere" / "d.csv")
    assert told.status == 2
    assert "cannot be written" in told.err


@pytest.mark.parametrize("name", TABLE_NAMES)
def test_tables_of_the_archive_come_first(name: str) -> None:
    order = list(dict.fromkeys(one.table for one in entries()))
    assert order.index(name) == TABLE_NAMES.index(name)
