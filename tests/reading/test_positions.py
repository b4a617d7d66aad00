from __future__ import annotations

import math

import pyarrow as pa
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.reading.positions import Axis, degrees_of, to_degrees
from tests.invented import bottle_file, one, read


@pytest.mark.parametrize(
    "text",
    ["35 30.0 S", "35° 30.0' S", "S35 30.0", "35 30.0S", "-35 30.0", "-35.5", "S 35.5", "35:30:00 S", "35°30′00″S",
     "35 30,0 S", "35d30m00 S", "35-30.0 S", "s35 30"],
)  # fmt: skip
def test_one_latitude_in_many_spellings(text: str) -> None:
    assert degrees_of(text, Axis.LATITUDE) == -35.5


@pytest.mark.parametrize(
    "text",
    ["35 60.0 S", "35.5 30 S", "-35 30 S", "N35 30 S", "35 30 E", "S", "", "thirty", "35 30 15 2 S",
     "35 30.0 SS", "nan"],
)  # fmt: skip
def test_what_is_no_latitude(text: str) -> None:
    assert math.isnan(degrees_of(text, Axis.LATITUDE))


def test_longitudes_take_other_letters() -> None:
    assert degrees_of("012 15.00 W", Axis.LONGITUDE) == -12.25
    assert degrees_of("179° 45' E", Axis.LONGITUDE) == 179.75
    assert math.isnan(degrees_of("12 15 S", Axis.LONGITUDE))


def test_columns_keep_apart_what_is_missing_and_what_cannot_be_read() -> None:
    values, unreadable = to_degrees(pa.array(["35 30 S", "", None, "afar", "35 30 S"]), Axis.LATITUDE)
    assert [None if math.isnan(value) else value for value in values] == [-35.5, None, None, None, -35.5]
    assert unreadable.tolist() == [3]
    assert to_degrees(pa.array([], pa.string()), Axis.LATITUDE)[0].tolist() == []


@settings(max_examples=200, deadline=None, derandomize=True)
@given(degrees=st.integers(0, 179), minutes=st.integers(0, 59_999), west=st.booleans())
def test_what_is_written_in_minutes_comes_back(degrees: int, minutes: int, west: bool) -> None:
    text = f"{degrees} {minutes / 1000:.3f} {'W' if west else 'E'}"
    expected = (degrees + minutes / 60_000) * (-1 if west else 1)
    assert degrees_of(text, Axis.LONGITUDE) == pytest.approx(expected, abs=1e-12)


def test_an_exchange_file_with_minutes_is_read() -> None:
    delivery = read(bottle_file({"LATITUDE": "35 30.0 S", "LONGITUDE": "012 15.0 W"}))
    assert (one(delivery, "latitude"), one(delivery, "longitude")) == (-35.5, -12.25)
