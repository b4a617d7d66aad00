from __future__ import annotations

import functools
import subprocess
import sys
from pathlib import Path
from typing import TYPE_CHECKING

import gsw
import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline import seawater
from pipeline.settings import UseSettings
from pipeline.tables import floats, with_columns
from pipeline.usable import usable
from pipeline.variables import REGISTRY, SEAWATER

if TYPE_CHECKING:
    from pipeline.tables import FloatArray

quick = settings(deadline=None, derandomize=True, max_examples=60)

INPUTS = ("practical_salinity", "temperature", "pressure", "latitude", "longitude")
ANYTHING = st.floats(allow_nan=True, allow_infinity=True) | st.sampled_from(
    [1e30, -1e30, -999.0, -5.0, 95.0, 1e300, float("inf"), float("-inf"), float("nan"), 0.0, -0.0, 5e-324]
)
OCEAN = st.fixed_dictionaries(
    {
        "practical_salinity": st.floats(2.0, 42.0),
        "temperature": st.floats(-2.0, 32.0),
        "pressure": st.floats(0.0, 11000.0),
        "latitude": st.floats(-80.0, 88.0),
        "longitude": st.floats(-180.0, 360.0),
    }
)


def table_of(rows: list[dict[str, float]], casts: list[int] | None = None) -> pa.Table:
    keys = casts if casts is not None else [1] * len(rows)
    columns = {name: np.array([row[name] for row in rows], dtype=np.float64) for name in INPUTS}
    texts = {"expocode": ["X"] * len(rows), "station": ["1"] * len(rows), "cast": keys}
    return with_columns(pa.table(texts), columns)


def columns(table: pa.Table) -> dict[str, FloatArray]:
    return seawater.columns(table, functools.partial(floats, table))


def a_cast(count: int = 30, seed: int = 3) -> list[dict[str, float]]:
    """Return a stably layered cast: warm and fresh above, cold and salty below."""
    depths = np.sort(np.random.default_rng(seed).uniform(5.0, 5000.0, count))
    return [
        {
            "practical_salinity": 34.0 + 0.8 * (1 - np.exp(-p / 700)),
            "temperature": 1.0 + 24 * np.exp(-p / 500),
            "pressure": p,
            "latitude": -30.0,
            "longitude": -20.0,
        }
        for p in depths
    ]


def test_gives_every_derived_column_of_the_registry_and_no_other() -> None:
    found = columns(table_of(a_cast()))
    chosen_elsewhere = {"practical_salinity", "oxygen", "practical_salinity_source", "oxygen_source"}
    assert set(found) == set(SEAWATER) - chosen_elsewhere
    assert set(found) <= set(REGISTRY)
    assert all(values.shape == (30,) and values.dtype == np.float64 for values in found.values())


def test_equals_gsw_called_row_by_row() -> None:
    rows = a_cast(12)
    found = columns(table_of(rows))
    for i, row in enumerate(rows):
        sp, t, p, lat, lon = (row[name] for name in INPUTS)
        sa = gsw.SA_from_SP(sp, p, lon, lat)
        ct = gsw.CT_from_t(sa, t, p)
        assert found["absolute_salinity"][i] == sa
        assert found["preformed_salinity"][i] == gsw.Sstar_from_SP(sp, p, lon, lat)
        assert found["conservative_temperature"][i] == ct
        assert found["potential_temperature"][i] == gsw.pt0_from_t(sa, t, p)
        assert found["depth"][i] == -gsw.z_from_p(p, lat)
        assert found["sigma0"][i] == pytest.approx(gsw.sigma0(sa, ct), abs=1e-12)
        assert found["sigma2"][i] == pytest.approx(gsw.sigma2(sa, ct), abs=1e-12)
        assert found["sigma4"][i] == pytest.approx(gsw.sigma4(sa, ct), abs=1e-12)
        assert found["spiciness0"][i] == gsw.spiciness0(sa, ct)


@quick
@given(st.lists(st.tuples(OCEAN, st.sampled_from(INPUTS), ANYTHING), min_size=1, max_size=8))
def test_no_input_raises_or_warns_and_no_answer_is_infinite(
    spoiled: list[tuple[dict[str, float], str, float]],
) -> None:
    found = columns(table_of([row | {name: value} for row, name, value in spoiled]))
    assert not any(np.isinf(values).any() for values in found.values())


@quick
@given(st.lists(st.fixed_dictionaries(dict.fromkeys(INPUTS, ANYTHING)), min_size=1, max_size=8))
def test_no_row_of_rubbish_raises_or_warns(rows: list[dict[str, float]]) -> None:
    found = columns(table_of(rows))
    assert not any(np.isinf(values).any() for values in found.values())


@quick
@given(st.lists(OCEAN, min_size=1, max_size=8))
def test_a_row_of_the_ocean_is_computed(rows: list[dict[str, float]]) -> None:
    found = columns(table_of(rows))
    assert not any(np.isnan(v).any() for n, v in found.items() if n != "buoyancy_frequency_squared")


@pytest.mark.parametrize(
    ("name", "value"),
    [
        ("practical_salinity", 1e30), ("practical_salinity", -5.0), ("practical_salinity", np.nan),
        ("temperature", 1e30), ("temperature", -999.0), ("pressure", 1e30), ("pressure", -999.0),
        ("pressure", np.inf), ("latitude", 95.0), ("latitude", np.nan), ("longitude", 1e30), ("longitude", 400.0),
    ],
)  # fmt: skip
def test_one_bad_row_is_missing_and_leaves_the_others_alone(name: str, value: float) -> None:
    rows = a_cast(6)
    clean = columns(table_of(rows))
    spoiled = columns(table_of([row | {name: value} if i == 2 else row for i, row in enumerate(rows)]))
    needs_it = {
        "sigma0",
        "sigma2",
        "sigma4",
        "spiciness0",
        "conservative_temperature",
        "potential_temperature",
    }
    if name != "temperature":
        needs_it |= {"absolute_salinity", "preformed_salinity"}
    if name in {"pressure", "latitude"}:
        needs_it |= {"depth"}
    assert all(np.isnan(spoiled[column][2]) for column in needs_it)
    for column in needs_it | {"absolute_salinity", "preformed_salinity", "depth"}:
        np.testing.assert_array_equal(np.delete(spoiled[column], 2), np.delete(clean[column], 2))


def test_an_infinite_longitude_does_not_take_the_process_down() -> None:
    """In a process of its own: without the bound, gsw 3.6.23 ends by a segmentation fault."""
    code = (
        "import numpy as np; from pipeline import seawater; "
        "print(seawater.absolute_salinity(35.0, 1000.0, np.array([np.inf, 180.0]), 10.0)[0])"
    )
    root = Path(__file__).parents[1]
    done = subprocess.run([sys.executable, "-c", code], cwd=root, capture_output=True, text=True, check=False)
    assert (done.returncode, done.stdout.strip()) == (0, "nan"), done.stderr


def test_depth_needs_no_salinity_and_counts_downward() -> None:
    found = columns(table_of([row | {"practical_salinity": np.nan} for row in a_cast(5)]))
    assert (np.diff(found["depth"]) > 0).all()
    assert (found["depth"] > 0).all()
    assert np.isnan(found["absolute_salinity"]).all()


@quick
@given(st.floats(-180.0, -0.001), st.floats(-70.0, 70.0), st.floats(0.0, 5000.0))
def test_both_ways_of_writing_a_longitude_agree(west: float, latitude: float, pressure: float) -> None:
    for function in (seawater.absolute_salinity, seawater.preformed_salinity):
        one = function(35.0, pressure, west, latitude)
        other = function(35.0, pressure, west + 360.0, latitude)
        np.testing.assert_allclose(one, other, rtol=0, atol=1e-9)


def test_longitude_and_latitude_are_not_exchanged() -> None:
    """Exchanged, this place of the deep North Pacific would lie outside the atlas or on other values."""
    anomaly = seawater.absolute_salinity(34.68, 4000.0, 180.0, 45.0) - gsw.SR_from_SP(34.68)
    assert anomaly == pytest.approx(0.02305, abs=1e-4)


def test_preformed_salinity_is_below_absolute_salinity_where_nutrients_were_added() -> None:
    deep_pacific = (34.68, 4000.0, 180.0, 45.0)
    reference = gsw.SR_from_SP(34.68)
    assert seawater.preformed_salinity(*deep_pacific) < reference < seawater.absolute_salinity(*deep_pacific)


def test_unusable_values_are_not_used() -> None:
    table = with_columns(
        table_of(a_cast(4)),
        {"temperature_flag": [2, 4, 2, 3], "temperature_check": [1, 1, 4, 1]},
    )
    found = seawater.columns(table, functools.partial(usable, table, use=UseSettings()))
    assert np.isnan(found["conservative_temperature"]).tolist() == [False, True, True, True]


def stability(table: pa.Table) -> FloatArray:
    return columns(table)["buoyancy_frequency_squared"]


def test_buoyancy_frequency_is_gsws_in_pressure_order() -> None:
    table = table_of(a_cast(20))
    found = columns(table)
    expected, _ = gsw.Nsquared(
        found["absolute_salinity"], found["conservative_temperature"], floats(table, "pressure"), lat=-30.0
    )
    np.testing.assert_allclose(found["buoyancy_frequency_squared"][:-1], expected, rtol=1e-14)
    assert np.isnan(found["buoyancy_frequency_squared"][-1])


@quick
@given(st.integers(0, 10_000), st.integers(2, 30))
def test_buoyancy_frequency_of_a_stable_column_is_positive(seed: int, count: int) -> None:
    found = stability(table_of(a_cast(count, seed)))
    assert (found[:-1] > 0).all()


def test_buoyancy_frequency_of_an_overturned_column_is_negative() -> None:
    rows = a_cast(2)
    salty = rows[0] | {"practical_salinity": 39.0}
    assert stability(table_of([salty, rows[1]]))[0] < 0


@quick
@given(st.lists(st.tuples(OCEAN, st.integers(1, 3)), min_size=1, max_size=12), st.integers(0, 2**32))
def test_order_of_delivery_changes_no_answer(rows: list[tuple[dict[str, float], int]], seed: int) -> None:
    # Equal pressures are the hard case: make some.
    rows = [(row | {"pressure": round(row["pressure"], -3)}, cast) for row, cast in rows]
    order = np.random.default_rng(seed).permutation(len(rows))
    straight = columns(table_of([r for r, _ in rows], [c for _, c in rows]))
    shuffled = columns(table_of([rows[i][0] for i in order], [rows[i][1] for i in order]))
    for name, values in straight.items():
        if name != "buoyancy_frequency_squared":
            np.testing.assert_array_equal(shuffled[name], values[order])
    # Rows alike in everything may stand for each other.
    name = "buoyancy_frequency_squared"
    ours = sorted(np.nan_to_num(straight[name], nan=9.0).tolist())
    assert sorted(np.nan_to_num(shuffled[name], nan=9.0).tolist()) == ours
    if len({(*row.values(), cast) for row, cast in rows}) == len(rows):
        np.testing.assert_array_equal(shuffled[name], straight[name][order])


@quick
@given(st.lists(OCEAN, min_size=2, max_size=12), st.integers(1, 11))
def test_splitting_a_batch_between_casts_changes_no_answer(rows: list[dict[str, float]], at: int) -> None:
    at = min(at, len(rows) - 1)
    casts = [1] * at + [2] * (len(rows) - at)
    together = columns(table_of(rows, casts))
    first, second = columns(table_of(rows[:at], casts[:at])), columns(table_of(rows[at:], casts[at:]))
    for name, values in together.items():
        np.testing.assert_array_equal(values, np.concatenate([first[name], second[name]]))


def test_no_interval_reaches_from_one_cast_into_the_next() -> None:
    rows = a_cast(6)
    found = stability(table_of(rows, [1, 2, 1, 2, 1, 2]))
    assert np.isnan(found).tolist() == [False, False, False, False, True, True]


def test_equal_pressures_have_no_interval() -> None:
    rows = a_cast(3)
    twin = rows[1] | {"practical_salinity": rows[1]["practical_salinity"] + 0.001}
    found = stability(table_of([rows[0], rows[1], twin, rows[2]]))
    assert np.isnan(found).tolist() == [False, True, False, True]


def test_a_level_without_salinity_does_not_break_the_chain() -> None:
    rows = a_cast(3)
    gap = [rows[0], rows[1] | {"practical_salinity": np.nan}, rows[2]]
    found = stability(table_of(gap))
    assert np.isnan(found).tolist() == [False, True, True]
    assert found[0] == stability(table_of([rows[0], rows[2]]))[0]


def test_no_rows_give_no_rows() -> None:
    assert all(values.shape == (0,) for values in columns(table_of([])).values())
