from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pytest

from pipeline.checking.neighbours import (
    ABOVE,
    AFTER,
    BEFORE,
    BELOW,
    above_and_below,
    neighbours,
    plausible,
    unlike,
)
from pipeline.usable import Rows
from tests.checking.cases import SETTINGS
from tests.checking.oceans import ocean, row

if TYPE_CHECKING:
    from numpy.typing import NDArray


def rows_of(table: pa.Table) -> Rows:
    return Rows(table, SETTINGS.use)


def slowly(data: Rows, values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return neighbours by looking at one sample after the other."""
    pressure = data.floats("pressure")
    known = [i for i in range(len(data)) if not np.isnan(values[i])]
    casts = sorted({int(data.casts[i]) for i in known})
    levels = {c: sorted((i for i in known if data.casts[i] == c), key=lambda i: pressure[i]) for c in casts}
    beside = np.full((len(data), 5), np.nan)
    for position, cast in enumerate(casts):
        for place, i in enumerate(levels[cast]):
            above = levels[cast][place - 1] if place else None
            below = levels[cast][place + 1] if place + 1 < len(levels[cast]) else None
            if above is not None:
                beside[i, 0] = values[above]
            if below is not None:
                beside[i, 1] = values[below]
            if above is not None and below is not None:
                beside[i, 2] = np.interp(pressure[i], pressure[[above, below]], values[[above, below]])
            for column, other in ((3, position - 1), (4, position + 1)):
                if 0 <= other < len(casts):
                    there = levels[casts[other]]
                    reach = max(25.0, 0.1 * pressure[i])
                    if pressure[there[0]] - reach <= pressure[i] <= pressure[there[-1]] + reach:
                        beside[i, column] = np.interp(pressure[i], pressure[there], values[there])
    return beside


@pytest.mark.parametrize("seed", range(5))
def test_neighbours_are_those_that_a_slow_search_finds(seed: int) -> None:
    chance = np.random.default_rng(seed)
    table = ocean(n_cast=5)
    table = table.take(pa.array(chance.permutation(table.num_rows)))
    data = rows_of(table)
    values = np.where(chance.random(len(data)) < 0.3, np.nan, chance.normal(size=len(data)))
    np.testing.assert_allclose(neighbours(data, values), slowly(data, values), atol=1e-12)


@pytest.mark.parametrize("seed", range(3))
def test_some_rows_have_the_neighbours_that_they_have_among_all(seed: int) -> None:
    chance = np.random.default_rng(seed)
    data = rows_of(ocean(n_cast=5))
    values = np.where(chance.random(len(data)) < 0.3, np.nan, chance.normal(size=len(data)))
    beside = neighbours(data, values)
    for rows in (np.flatnonzero(chance.random(len(data)) < 0.2), np.empty(0, dtype=np.int64)):
        np.testing.assert_array_equal(neighbours(data, values, rows), beside[rows])
    np.testing.assert_array_equal(above_and_below(data, values), beside[:, [ABOVE, BELOW]])


def test_casts_without_the_quantity_are_passed_over() -> None:
    data = rows_of(ocean(n_cast=3))
    values = np.where(data.casts == 1, np.nan, data.casts.astype(float))
    beside = neighbours(data, values)
    assert beside[row(0, 500), AFTER] == 2.0
    assert beside[row(2, 500), BEFORE] == 0.0
    assert np.isnan(beside[row(1, 500)]).all()


def test_one_sample_alone_is_like_nothing_and_unlike_nothing() -> None:
    data = rows_of(ocean(n_cast=1, levels=(500,)))
    assert np.isnan(unlike(data.floats("nitrate"), neighbours(data, data.floats("nitrate")))).all()


def test_two_samples_alike_excuse_each_other() -> None:
    data = rows_of(ocean())
    values = np.zeros(len(data))
    values[[row(4, 500), row(4, 600)]] = 7.0
    assert unlike(values, neighbours(data, values)).max() == 0.0
    values[row(4, 600)] = 0.0
    assert unlike(values, neighbours(data, values))[row(4, 500)] == 7.0


def test_what_no_ocean_has_takes_no_part() -> None:
    table = ocean(n_cast=1, levels=(5, 100, 200))
    values = pa.array([30.0, 4000.0, None])
    data = rows_of(table.set_column(table.schema.get_field_index("nitrate"), "nitrate", values))
    assert plausible(data, "nitrate").tolist() == [
        30.0,
        pytest.approx(np.nan, nan_ok=True),
        pytest.approx(np.nan, nan_ok=True),
    ]
