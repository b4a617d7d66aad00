from __future__ import annotations

import gsw
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pipeline.crossovers.neighbours import near_pairs, places, unit_vectors
from pipeline.crossovers.profiles import Profile, compare, make_profile

WIDE = 10_000.0


def profile(surface: list[float], value: list[float], pressure: list[float] | None = None) -> Profile:
    made = make_profile(np.array(surface), np.array(pressure or surface), np.array(value), 1e-6)
    assert made is not None
    return made


def test_samples_are_met_and_nothing_is_extrapolated_or_overshot() -> None:
    made = profile([4.0, 1.0, 3.0, 2.0], [8.0, 1.0, 1.0, 1.0])
    levels = np.array([0.9, 1.0, 1.5, 2.5, 3.5, 4.0, 4.1])
    found = made.at(levels, WIDE)
    assert np.isnan(found[[0, -1]]).all()
    assert found[[1, 2, 3, 5]].tolist() == [1.0, 1.0, 1.0, 8.0]  # flat where the samples are
    assert 1.0 < found[4] < 8.0


def test_a_gap_that_is_too_wide_is_not_bridged_and_its_ends_stay() -> None:
    made = profile([1.0, 2.0, 3.0], [1.0, 2.0, 3.0], pressure=[1500.0, 1900.0, 2900.0])
    found = made.at(np.array([1.5, 2.0, 2.5, 3.0]), 800.0)
    assert np.isfinite(found).tolist() == [True, True, False, True]


def test_samples_of_one_level_are_their_mean_and_missing_ones_none() -> None:
    made = make_profile(
        np.array([1.0, 1.0004, 2.0, np.nan, 3.0]),
        np.arange(5.0),
        np.array([4.0, 6.0, 1.0, 1.0, np.nan]),
        1e-3,
    )
    assert made is not None
    assert made.surface.tolist() == pytest.approx([1.0002, 2.0])
    assert made.value.tolist() == [5.0, 1.0]
    assert make_profile(np.array([np.nan]), np.zeros(1), np.zeros(1), 1e-3) is None


def test_the_difference_is_taken_at_the_samples_of_both() -> None:
    line = profile([0.0, 1.0, 2.0, 3.0], [0.0, 1.0, 2.0, 3.0])
    other = profile([0.5, 1.5, 2.5, 3.5], [10.5, 11.5, 12.5, 13.5])
    found = compare(line, other, WIDE)
    assert found is not None
    assert found.surface.tolist() == [0.5, 1.0, 1.5, 2.0, 2.5, 3.0]
    assert found.offset.tolist() == pytest.approx([-10.0] * 6)
    assert found.independent == 3
    assert compare(line, profile([4.0, 5.0], [1.0, 1.0]), WIDE) is None
    assert compare(line, other, WIDE, least_span=2.6) is None


@given(
    st.lists(st.tuples(st.floats(0, 1), st.floats(-1e3, 1e3)), min_size=1, max_size=12),
    st.lists(st.tuples(st.floats(0, 1), st.floats(-1e3, 1e3)), min_size=1, max_size=12),
)
def test_swapping_two_profiles_changes_the_sign(
    one: list[tuple[float, float]], other: list[tuple[float, float]]
) -> None:
    made = []
    for rows in (one, other):
        surface, value = np.array(rows).T
        made.append(make_profile(surface, surface, value, 1e-3))
    a, b = made
    assert a is not None
    assert b is not None
    forth, back = compare(a, b, WIDE), compare(b, a, WIDE)
    assert (forth is None) == (back is None)
    if forth is not None and back is not None:
        np.testing.assert_allclose(forth.offset, -back.offset)


def test_near_stations_are_those_within_the_arc_everywhere_on_the_sphere() -> None:
    random = np.random.default_rng(20_264)
    latitude = np.degrees(np.arcsin(random.uniform(-1, 1, 120)))
    longitude = random.uniform(-180, 180, 120)
    points = unit_vectors(latitude, longitude)
    found = {tuple(pair) for pair in near_pairs(points[:60], points[60:], 15.0, 60).tolist()}
    radius = 6371e3
    slow = {
        (a, b)
        for a in range(60)
        for b in range(60)
        if gsw.distance(longitude[[a, 60 + b]], latitude[[a, 60 + b]])[0] <= np.radians(15.0) * radius
    }
    assert found == slow
    assert found


def test_a_station_has_so_many_partners_at_most_and_pairs_both_ways() -> None:
    points = unit_vectors(np.linspace(0, 1, 50), np.zeros(50))
    pairs = near_pairs(points, points, 2.0, 3)
    assert 50 * 3 <= len(pairs) <= 2 * 50 * 3
    assert len(near_pairs(points[:1], points, 2.0, 3)) == 50  # every one of the others has it as a partner


def test_places_are_no_wider_than_the_arc_and_pole_and_date_line_are_none_of_their_edges() -> None:
    latitude, longitude = [0.0, 0.5, 10.0, 0.2, 89.5, 89.6], [179.9, -179.9, 0.0, 180.0, 0.0, 170.0]
    points = unit_vectors(np.array(latitude), np.array(longitude))
    assert places(points, 2.0).tolist() == [0, 0, 1, 0, 2, 2]
