from __future__ import annotations

import warnings
from typing import Any

import cftime
import numpy as np
import pytest
import xarray
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as numbers

from pipeline.reading.cf_decoding import decode_numbers, decode_texts, decode_times
from pipeline.reading.netcdf_bytes import StoredVariable, open_netcdf
from tests.invented import LIMITS
from tests.reading.netcdf_files import FORMATS, Plan, netcdf_bytes, rows, stored

KINDS = ("i1", "i2", "i4", "f4", "f8")


def variable(values: Any, kind: str = "f8", **attributes: Any) -> StoredVariable:
    array = np.asarray(values, dtype=kind)
    return StoredVariable("x", ("n", "m")[: array.ndim], array, attributes)


def decoded(values: Any, kind: str = "f8", **attributes: Any) -> list[float | None]:
    found = decode_numbers(variable(values, kind, **attributes)).values
    return [None if np.isnan(number) else float(number) for number in found]


def test_fill_and_missing_values_are_missing() -> None:
    assert decoded([1, -9999, 3, -8888], _FillValue=np.float64(-9999), missing_value=np.array([-8888.0, -7.0])) == [
        1.0, None, 3.0, None,
    ]  # fmt: skip
    assert decoded([1, -99], "i2", missing_value="-99") == [1.0, None]


def test_what_the_library_stores_where_nothing_was_written_is_missing() -> None:
    assert decoded([9.969209968386869e36, 2.0], "f4") == [None, 2.0]
    assert decoded([-32767, 2], "i2") == [None, 2.0]
    assert decoded([-32767, 2], "i2", _FillValue=np.int16(-1)) == [-32767.0, 2.0]
    assert decoded([-127, 2], "i1") == [-127.0, 2.0]  # a byte has no value to spare


def test_what_is_outside_the_valid_range_is_missing_and_counted() -> None:
    found = decode_numbers(
        variable([1, 5, 9, -1], valid_range=np.array([0.0, 8.0]), _FillValue=np.float64(-1))
    )
    assert np.isnan(found.values).tolist() == [False, False, True, True]
    assert np.count_nonzero(found.invalid) == 1
    assert decoded([1, 5, 9], valid_min=np.float64(2), valid_max=np.float64(8)) == [None, 5.0, None]


def test_the_valid_range_is_that_of_the_packed_numbers() -> None:
    assert decoded([100, 300], "i2", valid_max=np.int16(200), scale_factor=np.float64(0.01)) == [1.0, None]


def test_unsigned_bytes() -> None:
    assert decoded([-1, 5, -2], "i1", _Unsigned="true", _FillValue=np.int8(-2)) == [255.0, 5.0, None]


@pytest.mark.parametrize("scale", [np.float64(0.0), np.float64("nan"), "a tenth"])
def test_a_scale_that_is_none_is_a_problem(scale: Any) -> None:
    assert "scale_factor" in decode_numbers(variable([1, 2], "i2", scale_factor=scale)).problem


@settings(max_examples=150, deadline=None, derandomize=True)
@given(
    kind=st.sampled_from(KINDS),
    scale=st.sampled_from([None, np.float32(0.01), np.float64(0.01), np.float64(2.5)]),
    offset=st.sampled_from([None, np.float32(20.0), np.float64(-3.25)]),
    fill=st.sampled_from([None, 5]),
    data=st.data(),
)
def test_unpacking_agrees_with_an_independent_decoder(
    kind: str, scale: Any, offset: Any, fill: int | None, data: st.DataObject
) -> None:
    elements = {"min_value": -100, "max_value": 100}
    values = data.draw(numbers.arrays(kind, st.integers(0, 6), elements=elements))
    attributes = {
        "scale_factor": scale,
        "add_offset": offset,
        "_FillValue": None if fill is None else np.dtype(kind).type(fill),
    }
    attributes = {name: value for name, value in attributes.items() if value is not None}
    twin = xarray.decode_cf(xarray.Dataset({"x": xarray.Variable(("n",), values.copy(), dict(attributes))}))
    expected = np.asarray(twin["x"].values, dtype=np.float64)
    np.testing.assert_allclose(
        decode_numbers(variable(values, kind, **attributes)).values, expected, rtol=3e-7, atol=1e-5
    )


@pytest.mark.parametrize(
    ("unit", "calendar"),
    [
        ("seconds since 1970-01-01 00:00:00", "standard"),
        ("days since 1950-01-01T00:00:00Z", "standard"),
        ("hours since 2000-1-1 6:30", "gregorian"),
        ("minutes since 1990-06-01 12:00:00.5", "proleptic_gregorian"),
        ("days since 0001-01-01", "standard"),
        ("days since 0001-01-01 00:00:00", "proleptic_gregorian"),
        ("days since 1582-10-15", "standard"),
        ("days since 1582-10-04", "standard"),
        ("days since 1500-02-28", "standard"),
        ("hours since 1999-12-31 22:00:00 +02:00", "standard"),
        ("hours since 1999-12-31 22:00:00 -0530", "standard"),
        ("milliseconds since 2009-01-01", "standard"),
    ],
)
def test_times_agree_with_an_independent_library(unit: str, calendar: str) -> None:
    wanted = [np.datetime64("2009-02-14T08:03:20"), np.datetime64("1987-12-31T23:59:59")]
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        dates = [cftime.datetime(*_parts(when), calendar=calendar) for when in wanted]
        values = np.array([float(cftime.date2num(date, unit.replace("Z", ""), calendar)) for date in dates])
    found = decode_times(variable(values, units=unit, calendar=calendar))
    assert (found.problem, found.odd) == ("", "")
    assert found.values.tolist() == [when.tolist() for when in wanted]


def _parts(when: np.datetime64) -> tuple[int, ...]:
    return tuple(int(part) for part in str(when).replace("T", "-").replace(":", "-").split("-"))


def test_times_that_no_cruise_has_are_missing() -> None:
    found = decode_times(variable([0, 1e9, 1e300, np.nan, -1e15], units="seconds since 1970-01-01"))
    assert np.isnat(found.values).tolist() == [False, False, True, True, True]


def test_instants_written_as_text() -> None:
    texts = np.array(["2009-02-14T08:03:20Z", "2009-02-14", "", "soon"], dtype=object)
    found = decode_times(StoredVariable("x", ("n",), texts))
    assert [str(instant) for instant in found.values] == [
        "2009-02-14T08:03:20",
        "2009-02-14T00:00:00",
        "NaT",
        "NaT",
    ]
    assert "'soon'" in found.odd


def test_characters_are_texts_and_a_lone_one_is_a_letter() -> None:
    letters = np.array([list("V3b \0x"), list("\0\0\0\0\0\0")], dtype="S1")
    assert decode_texts(StoredVariable("x", ("n", "m"), letters)).tolist() == ["V3b", ""]
    assert decode_texts(StoredVariable("x", (), np.array(b"A", dtype="S1"))).tolist() == "A"


@pytest.mark.parametrize("form", FORMATS)
def test_every_format_is_stored_the_same(form: str) -> None:
    one = open_netcdf("x.nc", netcdf_bytes(rows(), Plan(format="NETCDF3_CLASSIC")), LIMITS)
    other = open_netcdf("x.nc", netcdf_bytes(rows(), Plan(format=form)), LIMITS)
    assert one.dimensions == other.dimensions
    assert list(one.variables) == list(other.variables)
    for name, of in one.variables.items():
        same = other.variables[name]
        assert of.dimensions == same.dimensions
        assert of.values.tolist() == same.values.tolist()
        assert {key: of.text(key) for key in of.attributes} == {
            key: same.text(key) for key in same.attributes
        }


def test_texts_of_any_length_and_types_of_ones_own() -> None:
    data = stored(["a", "long text", ""], kind=str)  # type: ignore[arg-type]
    assert open_netcdf("x.nc", data, LIMITS).variables["x"].values.tolist() == ["a", "long text", ""]
