"""Numbers and places in sentences."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.checking.figures import beyond, label, lines, named, plain, signed, unit_of

SIZES = st.floats(1e-6, 1e9)


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [(130.4, 2, "130"), (0.00512, 2, "0.0051"), (5.04, 2, "5"), (12_345.6, 3, "12300"), (2e22, 3, "2e+22")],
)
def test_a_number_is_written_as_people_do(value: float, digits: int, text: str) -> None:
    assert plain(value, digits) == text


@pytest.mark.parametrize(
    ("value", "limit", "texts"),
    [
        (0.0503, 0.05, ("0.0503", "0.05")),
        (12.2, 11.8, ("12.2", "11.8")),
        (14.7, 14.69, ("14.7", "14.69")),
        (0.13, 0.0052, ("0.13", "0.0052")),
        (130.0, 3.0, ("130", "3")),
    ],
)
def test_a_size_shows_that_it_is_beyond_its_limit(value: float, limit: float, texts: tuple[str, str]) -> None:
    assert beyond(value, limit) == texts


@settings(deadline=None, derandomize=True)
@given(SIZES, SIZES)
def test_no_sentence_contradicts_its_limit(one: float, other: float) -> None:
    value, limit = max(one, other), min(one, other)
    size, most = beyond(value, limit)
    assert (float(size) > float(most)) == (value > limit)


def test_names_stand_as_a_list() -> None:
    assert [named(names) for names in ([], ["A"], ["A", "B"], ["A", "B", "C"])] == [
        "",
        "A",
        "A and B",
        "A, B and C",
    ]


def test_a_difference_has_a_sign() -> None:
    assert (signed(0.02), signed(-1234.0)) == ("+0.02", "-1230")


def test_quantities_are_called_as_in_files() -> None:
    assert (label("silicate"), label("line"), label("no such column")) == ("SILCAT", "line", "no such column")
    assert [unit_of(name) for name in ("silicate", "temperature", "bottle_salinity", "delta_carbon_13")] == [
        "umol/kg",
        "degC",
        "",
        "per mil",
    ]


def test_rows_are_called_as_the_kind_of_file_has_them() -> None:
    assert lines("a_hy1.csv", 5, 5) == "a_hy1.csv, line 5"
    assert lines("a_hy1.csv", 5, 9) == "a_hy1.csv, lines 5 to 9"
    assert lines("a.nc", 5, 9) == "a.nc, records 5 to 9"
    assert lines("a b.xlsx", 5, 9) == "a b.xlsx, rows 5 to 9"
