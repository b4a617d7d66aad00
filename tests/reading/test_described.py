"""The invented cruise reads the same out of every kind of table."""

from __future__ import annotations

from datetime import date, time
from typing import TYPE_CHECKING

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.invented import read
from tests.reading.tables import CRUISE, Sample, as_exchange, as_parquet, as_text, as_workbook, read_table

if TYPE_CHECKING:
    import pyarrow as pa

    from pipeline.reading import Delivery

DIALECTS = {
    "comma": (",", "."),
    "semicolon": (";", ","),
    "tab": ("\t", "."),
    "bar": ("|", ","),
}


def content(delivery: Delivery) -> pa.Table:
    """Return all that a table says but where it stood, and the metadata."""
    table = delivery.table.drop_columns(["file", "line"])
    return table.select(sorted(table.column_names)).replace_schema_metadata(None)


def same(one: Delivery, other: Delivery) -> None:
    ours, theirs = content(one), content(other)
    assert ours.column_names == theirs.column_names
    for name in ours.column_names:
        assert ours.column(name).to_pylist() == theirs.column(name).to_pylist(), name
        assert ours.column(name).type == theirs.column(name).type, name


@pytest.mark.parametrize("dialect", DIALECTS)
def test_text_reads_as_the_exchange_file_does(dialect: str) -> None:
    delimiter, decimal = DIALECTS[dialect]
    layout = f'delimiter = "{dialect}"\ndecimal = "{decimal}"'
    same(read_table(as_text(CRUISE, delimiter, decimal), "cruise.txt", layout), read(as_exchange()))


def test_a_spreadsheet_reads_as_the_exchange_file_does() -> None:
    same(read_table(as_workbook(), "cruise.xlsx"), read(as_exchange()))


def test_parquet_reads_as_the_exchange_file_does() -> None:
    same(read_table(as_parquet(), "cruise.parquet"), read(as_exchange()))


def test_lines_and_rows_are_those_of_the_file() -> None:
    assert read_table(as_text(), "cruise.txt").table.column("line").to_pylist() == [2, 3, 4, 5]
    assert read_table(as_workbook(), "cruise.xlsx").table.column("line").to_pylist() == [2, 3, 4, 5]
    assert read_table(as_parquet(), "cruise.parquet").table.column("line").to_pylist() == [1, 2, 3, 4]


_WORDS = st.text(st.characters(codec="ascii", categories=["L", "N"]), min_size=1, max_size=6).filter(
    lambda word: word.lower() not in {"nan", "na", "null", "none", "n"} and not word.isdigit()
)


def numbers(low: float, high: float) -> st.SearchStrategy[float]:
    """Return numbers of at most 15 digits, which is what a spreadsheet program keeps."""
    return st.floats(low, high).map(lambda number: float(f"{number:.15g}"))


SAMPLES = st.lists(
    st.builds(
        Sample,
        station=_WORDS | st.integers(1, 999).map(str),
        cast=st.integers(1, 30),
        sample=st.integers(1, 10_000).map(str),
        bottle=st.integers(1, 36).map(str),
        day=st.dates(date(1972, 1, 1), date(2030, 1, 1)),
        clock=st.times(time(0, 0, 0), time(23, 59, 59)).map(lambda clock: clock.replace(microsecond=0)),
        latitude=numbers(-90, 90),
        longitude=numbers(-180, 180),
        bottom=numbers(1, 9000),
        pressure=numbers(0, 9000),
        temperature=numbers(-2, 30),
        salinity=numbers(1, 40),
        oxygen=st.none() | numbers(0, 450),
        oxygen_flag=st.sampled_from([2, 3, 4, 6, 9]),
        nitrate=st.none() | numbers(0, 45),
        nitrate_flag=st.sampled_from([2, 3, 4, 6, 9]),
    ),
    min_size=1,
    max_size=8,
)


@settings(max_examples=40, deadline=None, derandomize=True)
@given(rows=SAMPLES)
def test_every_value_comes_back_to_the_last_bit(rows: list[Sample]) -> None:
    exchange = read(as_exchange(rows))
    assert exchange.table.column("pressure").to_pylist() == [row.pressure for row in rows]
    same(read_table(as_text(rows, ";", ","), "cruise.txt", 'delimiter = ";"\ndecimal = ","'), exchange)
    same(read_table(as_workbook(rows), "cruise.xlsx"), exchange)
    same(read_table(as_parquet(rows), "cruise.parquet"), exchange)
