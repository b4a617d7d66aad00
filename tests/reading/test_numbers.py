"""Text to numbers: whichever way a column is read, each cell gives what it gives alone."""

from __future__ import annotations

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.reading.numbers import missing_codes, to_floats
from pipeline.variables import REGISTRY

CELLS = st.one_of(
    st.text("0123456789.-", max_size=6),
    st.sampled_from(["", "n/a", "-", ".", "+3", "1e5", "inf", "nan", "12.5.2009", " 3", "3,5", "٣"]),
)
NO_NUMBER = ["12.5.2009", "1-2", "--1", "inf", "3,5", "x"]


@settings(deadline=None, derandomize=True, max_examples=200)
@given(st.lists(CELLS, max_size=6), st.integers(0, 3))
def test_a_cell_is_read_as_it_is_alone(cells: list[str], start: int) -> None:
    whole, unreadable = to_floats(pa.array(["x", "7", ""][:start] + cells, pa.string()).slice(start))
    alone = [to_floats(pa.array(["x", cell])) for cell in cells]  # with a word beside it, the careful way
    np.testing.assert_array_equal(whole, [values[1] for values, _ in alone])
    assert unreadable.tolist() == [row for row, (_, bad) in enumerate(alone) if 1 in bad]


@pytest.mark.parametrize("cell", NO_NUMBER)
def test_what_is_no_number_is_told(cell: str) -> None:
    values, unreadable = to_floats(pa.array(["1.5", cell]))
    assert values[0] == 1.5
    assert np.isnan(values[1])
    assert unreadable.tolist() == [1]


def test_codes_are_missing_and_their_neighbours_are_not() -> None:
    values = np.array([-999.0, -999.9, -9.0, -9.5, -998.0, 3.0, np.nan])
    flags = np.array([9.0, 9.0, 9.0, 9.0, 9.0, 2.0, 9.0])
    assert missing_codes(values, REGISTRY["delta_carbon_13"], flags).tolist() == [
        True, True, True, False, False, False, False,
    ]  # fmt: skip
