"""Parquet tables of all plain types, within bounds."""

from __future__ import annotations

import datetime as dt
from decimal import Decimal

import pyarrow as pa
import pytest

from pipeline.problems import DeliveryProblem
from pipeline.reading import read_delivery
from pipeline.settings import ReadingSettings
from tests.invented import EXPOCODE, checks, one
from tests.reading.tables import as_parquet, description, parquet, read_table

TOML = f"""
[[file]]
files = "*"
kind = "ctd"
[file.constants]
expocode = "{EXPOCODE}"
latitude = -35.5
longitude = -12.25
[file.columns]
S = "station"
P = {{{{ quantity = "pressure", unit = "dbar" }}}}
T = "temperature"
W = "date_and_time"
"""
ZONE = dt.timezone(dt.timedelta(hours=2))


def table(**columns: pa.Array) -> bytes:
    named = {
        "S": pa.array(["1"]), "P": pa.array([10.5]), "T": pa.array([4.5]),
        "W": pa.array([dt.datetime(2009, 2, 14, 8, 3)]),  # noqa: DTZ001 - a column without a zone
    }  # fmt: skip
    return parquet(pa.table({**named, **columns}))


@pytest.mark.parametrize(
    ("column", "station"),
    [
        (pa.array([12]), "12"), (pa.array([12.0]), "12"), (pa.array([2**62 + 1]), str(2**62 + 1)),
        (pa.array(["  A 1 "]), "A 1"), (pa.array(["x"], pa.large_string()), "x"), (pa.array([b"bin"]), "bin"),
        (pa.array(["d"]).dictionary_encode(), "d"), (pa.array([True]), "true"),
    ],
)  # fmt: skip
def test_identity_of_any_type(column: pa.Array, station: str) -> None:
    assert one(read_table(table(S=column), "cruise.parquet", text=TOML), "station") == station


@pytest.mark.parametrize(
    ("column", "temperature"),
    [
        (pa.array([4.1], pa.float32()), 4.099999904632568), (pa.array([4.1]), 4.1), (pa.array([4]), 4.0),
        (pa.array([Decimal("4.1000")]), 4.1), (pa.array(["4.1"]), 4.1), (pa.array([None], pa.float64()), None),
        (pa.nulls(1), None), (pa.array([float("nan")]), None),
    ],
)  # fmt: skip
def test_values_exactly_as_the_type_holds_them(column: pa.Array, temperature: float | None) -> None:
    assert one(read_table(table(T=column), "cruise.parquet", text=TOML), "temperature") == temperature


@pytest.mark.parametrize("unit", ["s", "ms", "us", "ns"])
def test_instants_of_any_unit(unit: str) -> None:
    instants = pa.array([dt.datetime(2009, 2, 14, 8, 3)], pa.timestamp(unit))  # noqa: DTZ001
    delivery = read_table(table(W=instants), "cruise.parquet", text=TOML)
    assert one(delivery, "time") == dt.datetime(2009, 2, 14, 8, 3, tzinfo=dt.UTC)


def test_instants_with_a_zone_are_moved_to_utc() -> None:
    instants = pa.array([dt.datetime(2009, 2, 14, 1, 3, tzinfo=ZONE)], pa.timestamp("us", "+02:00"))
    delivery = read_table(table(W=instants), "cruise.parquet", text=TOML)
    assert one(delivery, "time") == dt.datetime(2009, 2, 13, 23, 3, tzinfo=dt.UTC)
    assert one(delivery, "date") == dt.date(2009, 2, 13)


def test_an_instant_beyond_all_calendars_is_told() -> None:
    delivery = read_table(table(W=pa.array([2**62], pa.timestamp("us"))), "cruise.parquet", text=TOML)
    assert one(delivery, "date") is None
    assert "impossible-date" in checks(delivery)


def test_nested_columns_are_refused() -> None:
    with pytest.raises(DeliveryProblem, match="the columns L hold columns or lists of their own"):
        read_table(table(L=pa.array([[1, 2]])), "cruise.parquet", text=TOML)


def test_units_of_the_fields_are_those_of_the_columns() -> None:
    field = pa.field("T", pa.float64(), metadata={"units": "IPTS-68"})
    data = pa.table(
        [pa.array(["1"]), pa.array([10.5]), pa.array([10.0]), pa.array(["2009-02-14T08:03:00Z"])],
        schema=pa.schema(
            [pa.field("S", pa.string()), pa.field("P", pa.float64()), field, pa.field("W", pa.string())]
        ),
    )
    delivery = read_table(parquet(data), "cruise.parquet", text=TOML)
    assert one(delivery, "temperature") == pytest.approx(9.99760057586, abs=1e-10)
    assert one(delivery, "T") == 10.0
    assert one(delivery, "time") == dt.datetime(2009, 2, 14, 8, 3, tzinfo=dt.UTC)


def test_more_than_is_borne_is_refused_before_it_is_read() -> None:
    with pytest.raises(DeliveryProblem, match="found at least 64 cells; expected at most 60"):
        read_delivery("c.parquet", as_parquet(), ReadingSettings(cells=60), description())
    with pytest.raises(DeliveryProblem, match="found 16 columns; expected at most 15"):
        read_delivery("c.parquet", as_parquet(), ReadingSettings(columns=15), description())
    same = pa.array(["x" * 100_000] * 5_000)  # 100 kB in the file, 500 MB unpacked
    data = table(
        S=same, P=pa.array([1.0] * 5_000), T=pa.array([1.0] * 5_000), W=pa.array(["2009-02-14"] * 5_000)
    )
    assert len(data) < 100_000
    limits = ReadingSettings(unpacked_bytes=20_000_000)
    with pytest.raises(DeliveryProblem, match="the table unpacks to at least"):
        read_delivery("c.parquet", data, limits, description(text=TOML))


def test_another_format_than_is_said() -> None:
    with pytest.raises(
        DeliveryProblem, match=r"found the bytes of a file of the format parquet; expected text, as"
    ):
        read_table(as_parquet(), "cruise.csv", 'format = "text"')
