from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.reporting.line import EARTH_RADIUS, along_line, great_circle, unit_vectors

ONE_DEGREE = EARTH_RADIUS * np.pi / 180


def test_distance_is_along_the_great_circle() -> None:
    line = along_line(np.array([0.0, 1.0, 3.0]), np.zeros(3), np.arange(3.0))
    np.testing.assert_allclose(line.distance, ONE_DEGREE * np.array([0.0, 1.0, 3.0]))


def test_one_wrong_time_does_not_tear_the_line() -> None:
    longitude = np.arange(12.0)
    time = np.arange(12.0)
    time[4] = 99.0
    line = along_line(np.zeros(12), longitude, time)
    assert line.order.tolist() == list(range(12))
    assert line.distance[-1] == pytest.approx(11 * ONE_DEGREE)


def test_order_of_time_is_kept_where_it_makes_the_shorter_line() -> None:
    # out along one parallel and back along another
    latitude = np.array([0.0] * 6 + [3.0] * 6)
    longitude = np.array([*range(6), *range(5, -1, -1)], dtype=float)
    assert along_line(latitude, longitude, np.arange(12.0)).order.tolist() == list(range(12))


def test_a_wrong_position_is_left_out() -> None:
    longitude = np.arange(12.0)
    latitude = np.zeros(12)
    latitude[7] = 40.0
    line = along_line(latitude, longitude, np.arange(12.0))
    assert line.off.tolist() == [7]
    assert line.order.tolist() == [k for k in range(12) if k != 7]


def test_no_cast_of_a_short_line_is_left_out() -> None:
    line = along_line(np.array([0.0, 0.0, 0.0, 50.0]), np.arange(4.0), np.arange(4.0))
    assert len(line.off) == 0


def test_two_visits_in_opposite_directions_are_laid_beside_each_other() -> None:
    east, west = np.arange(170.0, 190.0) % 360.0, np.arange(189.0, 169.0, -1.0) % 360.0
    for longitude in (east, west):
        line = along_line(np.full(20, -30.0), longitude, np.arange(20.0))
        assert longitude[line.order].tolist() == east.tolist()
    north = along_line(np.arange(5.0)[::-1], np.zeros(5), np.arange(5.0))
    assert north.order.tolist() == [4, 3, 2, 1, 0]


def test_casts_of_one_place_stand_in_one_column() -> None:
    line = along_line(np.zeros(3), np.array([0.0, 0.005, 1.0]), np.arange(3.0))
    assert line.distance[1] == 0.0


def test_a_line_crosses_the_date_line_the_short_way() -> None:
    line = along_line(np.zeros(3), np.array([179.0, -180.0, -179.0]), np.arange(3.0))
    assert line.distance[-1] == pytest.approx(2 * ONE_DEGREE)


@settings(max_examples=60, deadline=None)
@given(
    st.lists(
        st.tuples(st.floats(-90, 90), st.floats(-180, 180), st.one_of(st.just(np.nan), st.floats(0, 1e9))),
        max_size=25,
    )
)
def test_every_cast_is_on_the_line_or_off_it(casts: list[tuple[float, float, float]]) -> None:
    latitude, longitude, time = (np.array([cast[k] for cast in casts], dtype=float) for k in range(3))
    line = along_line(latitude, longitude, time)
    assert sorted([*line.order, *line.off]) == list(range(len(casts)))
    assert (np.diff(line.distance) >= 0).all()
    assert len(line.distance) == len(line.order)
    again = along_line(latitude, longitude, time)
    assert (again.order == line.order).all()


def test_great_circle_of_poles() -> None:
    poles = unit_vectors(np.array([90.0, -90.0]), np.zeros(2))
    assert great_circle(poles[:1], poles[1:])[0] == pytest.approx(np.pi * EARTH_RADIUS)
