from __future__ import annotations

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.census.areas import linear_weights
from pipeline.census.taking import lay_out

from .invented import DEGREE, NONE, areas, samples, section

BOX = {0.0: (0, 500, 1000), 1.0: (0, 500, 1000), 2.0: (0, 500, 1000)}


def depths(table: pa.Table) -> np.ndarray:
    return np.array(table.column("depth").to_pylist())


def test_a_box_of_one_share_is_known_by_hand() -> None:
    table = samples(BOX, floor=1000.0)
    area, layout = areas(table, np.full(9, 0.25))
    assert layout.resolved[0] == pytest.approx(2 * DEGREE * 1.0, rel=1e-12)
    assert area[0] == pytest.approx(0.25 * 2 * DEGREE, rel=1e-12)
    assert not layout.unresolved


def test_a_share_linear_in_depth_and_along_the_track_is_integrated_exactly() -> None:
    table = samples({0.0: (0, 200, 1000), 1.5: (0, 600, 1000)}, floor=1000.0)
    along = np.array([0.0] * 3 + [1.0] * 3)
    area, _ = areas(table, 0.1 + 0.3 * depths(table) / 1000 + 0.4 * along, depth_gap=1000.0)
    assert area[0] == pytest.approx(1.5 * DEGREE * (0.1 + 0.15 + 0.2), rel=1e-12)


def test_a_slope_is_a_trapezoid() -> None:
    table = samples(
        {0.0: (0, 500), 1.0: (0, 500, 1000)}, changed={"bottom_depth": [500.0] * 2 + [1000.0] * 3}
    )
    _, layout = areas(table, np.zeros(5))
    assert layout.resolved[0] == pytest.approx(DEGREE * 0.75, rel=1e-12)


def test_classes_are_cut_where_the_density_is_linear_between_samples() -> None:
    table = samples(BOX, floor=1000.0)  # sigma2 = 30 + depth in km
    area, layout = areas(table, depths(table) / 1000, np.array([30.25, 30.75]))
    whole = 2 * DEGREE
    np.testing.assert_allclose(layout.resolved, whole * np.array([1.0, 0.25, 0.5, 0.25, 0.0]), rtol=1e-12)
    np.testing.assert_allclose(area, whole * np.array([0.5, 0.03125, 0.25, 0.21875, 0.0]), rtol=1e-12)


def test_an_inversion_of_density_loses_nothing() -> None:
    table = samples(BOX, floor=1000.0, changed={"sigma2": [30.0, 29.0, 31.0] * 3})
    area, layout = areas(table, np.full(9, 0.5), np.array([29.5, 30.5]))
    np.testing.assert_allclose(layout.resolved[1:].sum(), layout.resolved[0], rtol=1e-12)
    whole = 2 * DEGREE * 0.5  # km2 of half the depth: one half of it from 30 to 29, the other from 29 to 31
    expected = whole * np.array([0.5 + 0.25, 0.5 + 0.5, 0.25, 0.0])
    np.testing.assert_allclose(layout.resolved[1:], expected, rtol=1e-12)
    np.testing.assert_allclose(area[1:], 0.5 * expected, rtol=1e-12)


def test_water_without_density_is_a_class_of_its_own() -> None:
    table = samples(BOX, floor=1000.0, changed={"sigma2": [None] * 9})
    _, layout = areas(table, np.zeros(9), np.array([30.5]))
    assert layout.resolved[-1] == pytest.approx(2 * DEGREE, rel=1e-12)
    assert layout.resolved[1:-1].sum() == 0


def test_more_samples_come_nearer_to_what_is_curved() -> None:
    errors = []
    for count in (5, 9, 17):
        table = samples(dict.fromkeys((0.0, 1.0), np.linspace(0, 1000, count).tolist()), floor=1000.0)
        area, _ = areas(table, np.sin(np.pi * depths(table) / 1000))
        errors.append(abs(area[0] - DEGREE * 2 / np.pi))
    assert errors[1] < errors[0] / 3.9
    assert errors[2] < errors[1] / 3.9


def test_surface_and_sea_floor_are_filled_half_a_gap_away_and_no_further() -> None:
    table = samples(dict.fromkeys((0.0, 1.0), (100, 500)), floor=900.0)
    area, layout = areas(table, np.tile([0.2, 0.6], 2), depth_gap=800.0)
    assert layout.resolved[0] == pytest.approx(DEGREE * 0.9, rel=1e-12)
    assert area[0] == pytest.approx(DEGREE * (0.1 * 0.2 + 0.4 * 0.4 + 0.4 * 0.6), rel=1e-12)
    _, layout = areas(table, np.zeros(4), depth_gap=799.0)
    assert layout.resolved[0] == pytest.approx(DEGREE * 0.5, rel=1e-12)
    assert layout.unresolved["depth_gap"][0] == pytest.approx(DEGREE * 0.4, rel=1e-12)


def test_a_gap_in_depth_is_listed_and_not_filled() -> None:
    table = samples(dict.fromkeys((0.0, 1.0), (0, 100, 900, 1000)), floor=1000.0)
    area, layout = areas(table, np.ones(8))
    assert area[0] == pytest.approx(DEGREE * 0.2, rel=1e-12)
    assert layout.unresolved["depth_gap"][0] == pytest.approx(DEGREE * 0.8, rel=1e-12)


def test_a_gap_between_stations_is_listed_with_its_area_and_its_ends() -> None:
    table = samples({0.0: (0, 500, 1000), 1.0: (0, 500, 1000), 4.0: (0, 500), 5.0: (0, 500)}, floor=None)
    _, layout = areas(table, np.zeros(10))
    ((start, end, length),) = layout.gaps
    assert (start, end) == ("2", "3")
    assert length == pytest.approx(3 * DEGREE)
    assert layout.unresolved["station_gap"][0] == pytest.approx(3 * DEGREE * 0.75, rel=1e-12)
    assert layout.resolved[0] == pytest.approx(DEGREE * 1.5, rel=1e-12)


def test_water_of_no_set_stands_for_its_own_part_and_a_bottle_without_values_for_none() -> None:
    status = ["outside", "solved", "solved"]
    table = samples(
        dict.fromkeys((0.0, 1.0), (0, 500, 1000)), floor=1000.0, changed={"mixing_status": status * 2}
    )
    area, layout = areas(table, np.tile([9.0, 0.2, 0.4], 2))
    assert layout.unresolved["outside"][0] == pytest.approx(DEGREE * 0.25, rel=1e-12)
    assert area[0] == pytest.approx(DEGREE * (0.25 * 0.2 + 0.5 * 0.3), rel=1e-12)
    status = ["solved", "incomplete", "solved"]
    table = samples(
        dict.fromkeys((0.0, 1.0), (0, 250, 500)), floor=500.0, changed={"mixing_status": status * 2}
    )
    area, layout = areas(table, np.tile([0.2, 9.0, 0.4], 2))
    assert not layout.unresolved
    assert area[0] == pytest.approx(DEGREE * 0.5 * 0.3, rel=1e-12)


def test_a_bottle_without_values_is_the_reason_of_a_gap_that_is_too_large() -> None:
    status = ["solved", "incomplete", "undetermined", "solved"]
    table = samples(
        dict.fromkeys((0.0, 1.0), (0, 400, 600, 1000)), floor=1000.0, changed={"mixing_status": status * 2}
    )
    _, layout = areas(table, np.zeros(8))
    assert {reason: area[0] for reason, area in layout.unresolved.items()} == {
        "incomplete": pytest.approx(DEGREE * 0.5), "undetermined": pytest.approx(DEGREE * 0.5),
    }  # fmt: skip
    assert section(table).unresolved == {"incomplete": 2, "undetermined": 2}


def test_what_the_sources_do_not_explain_is_not_resolved() -> None:
    tag = ["mixed", "unexplained", "mixed"]
    table = samples(BOX, floor=1000.0, changed={"tag": tag * 3})
    _, layout = areas(table, np.zeros(9))
    assert layout.unresolved["unexplained"][0] == pytest.approx(2 * DEGREE * 0.5, rel=1e-12)


def test_bottles_of_one_depth_share_what_it_stands_for() -> None:
    table = samples(dict.fromkeys((0.0, 1.0), (0, 500, 500)), floor=500.0)
    area, layout = areas(table, np.tile([0.0, 0.2, 0.6], 2))
    assert layout.resolved[0] == pytest.approx(DEGREE * 0.5, rel=1e-12)
    assert area[0] == pytest.approx(DEGREE * 0.5 * 0.2, rel=1e-12)


@pytest.mark.parametrize("stations", [{7.0: (0, 500, 1000)}, {0.0: (0, 500, 1000), 9.0: (0, 500, 1000)}])
def test_without_neighbours_there_are_columns_and_no_area(stations: dict[float, tuple[int, ...]]) -> None:
    table = samples(stations, floor=1000.0)
    shares = np.tile([0.0, 0.5, 1.0], len(stations))
    area, layout = areas(table, shares)
    assert not layout.has_width
    assert area[0] / layout.resolved[0] == pytest.approx(0.5, rel=1e-12)
    assert not layout.gaps


def test_the_date_line_is_no_gap() -> None:
    here = samples({-1.0: (0, 500), 0.0: (0, 500), 1.0: (0, 500)}, floor=500.0)
    there = samples({179.0: (0, 500), 180.0: (0, 500), -179.0: (0, 500)}, floor=500.0)
    assert areas(there, np.ones(6))[0][0] == pytest.approx(areas(here, np.ones(6))[0][0], rel=1e-12)


def test_a_wrong_date_does_not_tear_the_section_apart() -> None:
    table = samples(dict.fromkeys(np.arange(6.0), (0, 500)), floor=500.0)
    dates = table.column("date").to_pylist()
    dates[4:6] = [dates[0].replace(year=2008)] * 2
    table = samples(dict.fromkeys(np.arange(6.0), (0, 500)), floor=500.0, changed={"date": dates})
    assert section(table).names == ("1", "2", "3", "4", "5", "6")
    assert areas(table, np.ones(12))[0][0] == pytest.approx(5 * DEGREE * 0.5, rel=1e-12)


def test_a_station_number_used_again_elsewhere_is_another_station() -> None:
    table = samples(
        {0.0: (0, 500), 1.0: (0, 500), 2.0: (0, 500)}, floor=500.0, changed={"station": list("112211")}
    )
    assert section(table).names == ("1", "2", "1")


def test_samples_without_a_place_are_counted() -> None:
    table = samples(BOX, floor=1000.0, changed={"latitude": [None] + [0.0] * 8})
    assert section(table).unresolved == {"no_depth": 1}


@settings(max_examples=15, deadline=None)
@given(st.permutations(range(16)))
def test_the_order_of_the_rows_shows_in_no_bit(order: list[int]) -> None:
    stations = {0.0: (3, 121, 121, 507), 0.7: (5, 333, 800, 901), 1.9: (1, 2, 3, 4), 3.1: (7, 77, 777, 999)}
    status = ["solved", "incomplete", "solved", "outside"] * 4
    table = samples(stations, floor=1010.0, changed={"mixing_status": status})
    one, other = (
        lay_out(section(each), np.array([30.2, 30.6])) for each in (table, table.take(pa.array(order)))
    )
    np.testing.assert_array_equal(one.weights, other.weights)
    np.testing.assert_array_equal(one.resolved, other.resolved)
    weights = section(table).of_samples(one.weights)
    np.testing.assert_array_equal(
        section(table.take(pa.array(order))).of_samples(other.weights), weights[:, order]
    )


@settings(max_examples=50, deadline=None)
@given(
    st.lists(st.lists(st.floats(0, 6000), min_size=1, max_size=6), min_size=1, max_size=5),
    st.lists(st.sampled_from(["solved", "outside", "incomplete", "absurd"]), min_size=30, max_size=30),
)
def test_nothing_is_lost_and_nothing_counted_twice(columns: list[list[float]], status: list[str]) -> None:
    """Resolved and not, all classes together: the area between the surface and the sea floor."""
    stations = {float(k): column for k, column in enumerate(columns)}
    table = samples(stations, floor=5000.0, changed={"mixing_status": status[: sum(map(len, columns))]})
    found = section(table)
    layout = lay_out(found, np.array([31.0, 33.0]))
    half = np.array([0.5 * ((k > 0) + (k < len(columns) - 1)) for k in range(len(columns))])
    width = half * DEGREE if len(columns) > 1 else np.ones(1)
    whole = float((width * np.array([max(5000.0, *column) for column in columns])).sum()) / 1000
    everything = layout.resolved + sum(layout.unresolved.values(), np.zeros(5))
    assert everything[0] == pytest.approx(whole, rel=1e-9)
    assert everything[1:].sum() == pytest.approx(whole, rel=1e-9)
    assert layout.weights[0].sum() == pytest.approx(layout.resolved[0], rel=1e-9)
    assert (layout.weights >= 0).all()


def test_linear_weights_are_the_integrals() -> None:
    first, second = linear_weights(np.array([0.25]), np.array([0.75]))
    t = np.linspace(0.25, 0.75, 100_001)
    assert first[0] == pytest.approx(np.trapezoid(1 - t, t))
    assert second[0] == pytest.approx(np.trapezoid(t, t))
    assert [one[0] for one in linear_weights(np.array([0.8]), np.array([0.2]))] == [0.0, 0.0]


def test_an_empty_cruise_has_no_area() -> None:
    table = samples({})
    layout = lay_out(section(table), NONE)
    assert layout.resolved[0] == 0
