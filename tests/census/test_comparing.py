from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pytest

from pipeline.census.comparing import find_common

from .invented import DEGREE, NONE, samples, section

if TYPE_CHECKING:
    from pipeline.census.comparing import Common

BOX = {0.0: (0, 500, 1000), 1.0: (0, 500, 1000), 2.0: (0, 500, 1000), 3.0: (0, 500, 1000)}


def common(one: pa.Table, other: pa.Table, boundaries: np.ndarray = NONE, apart: float = 100.0) -> Common:
    return find_common(section(one), section(other), boundaries, apart)


def area(table: pa.Table, weights: np.ndarray, shares: np.ndarray) -> float:
    return float((section(table).of_samples(weights) @ shares)[0])


def test_the_same_section_has_itself_in_common() -> None:
    table = samples(BOX, floor=1000.0)
    found = common(table, table)
    assert found.length == pytest.approx(3 * DEGREE, rel=1e-12)
    assert found.resolved[0][0] == pytest.approx(3 * DEGREE, rel=1e-12)
    np.testing.assert_allclose(found.weights[0], found.weights[1], rtol=1e-9)
    assert found.stations == (4, 4)
    assert found.off == pytest.approx(0, abs=1e-6)


def test_only_the_stretch_under_both_tracks_is_compared() -> None:
    one, other = (
        samples(BOX, floor=1000.0),
        samples({1.5: (0, 500, 1000), 2.7: (0, 1000), 4.0: (0, 1000)}, floor=1000.0),
    )
    found = find_common(section(one), section(other, depth_gap=1000.0), NONE, 100.0)
    # The station at 4.0 E lies 111 km off the end of the first track.
    assert found.length == pytest.approx(1.2 * DEGREE, rel=1e-9)
    for each in found.resolved:
        assert each[0] == pytest.approx(1.2 * DEGREE, rel=1e-9)
    longitude = np.repeat([0.0, 1.0, 2.0, 3.0], 3)
    assert area(one, found.weights[0], longitude) == pytest.approx(1.2 * DEGREE * 2.1, rel=1e-9)
    longitude = np.array([1.5] * 3 + [2.7] * 2 + [4.0] * 2)
    assert area(other, found.weights[1], longitude) == pytest.approx(1.2 * DEGREE * 2.1, rel=1e-9)


def test_only_depths_that_both_resolved_are_compared() -> None:
    one = samples(BOX, floor=1000.0)
    other = samples(dict.fromkeys(BOX, (0, 100, 800, 900)), floor=900.0)
    found = common(one, other)
    assert found.resolved[0][0] == pytest.approx(3 * DEGREE * 0.2, rel=1e-9)
    depth = np.array(one.column("depth").to_pylist())
    assert area(one, found.weights[0], depth) == pytest.approx(3 * DEGREE * (0.1 * 50 + 0.1 * 850), rel=1e-9)
    depth = np.array(other.column("depth").to_pylist())
    assert area(other, found.weights[1], depth) == pytest.approx(
        3 * DEGREE * (0.1 * 50 + 0.1 * 850), rel=1e-9
    )


def test_the_way_back_is_the_same_section() -> None:
    table = samples(BOX, floor=1000.0)
    back = samples(dict(reversed(BOX.items())), floor=1000.0)
    found = common(table, back)
    assert found.resolved[1][0] == pytest.approx(3 * DEGREE, rel=1e-9)
    west = np.repeat([0.0, 1.0, 2.0, 3.0], 3)
    assert area(table, found.weights[0], west) == pytest.approx(
        area(back, found.weights[1], west[::-1]), rel=1e-9
    )


def test_classes_may_grow_while_the_whole_stays() -> None:
    one = samples(BOX, floor=1000.0)
    other = samples(BOX, floor=1000.0, changed={"sigma2": [30.2, 30.7, 31.2] * 4})
    found = common(one, other, np.array([30.5]))
    assert found.resolved[0][0] == pytest.approx(found.resolved[1][0], rel=1e-12)
    np.testing.assert_allclose(found.resolved[0][1:], 3 * DEGREE * np.array([0.5, 0.5, 0.0]), rtol=1e-9)
    np.testing.assert_allclose(found.resolved[1][1:], 3 * DEGREE * np.array([0.3, 0.7, 0.0]), rtol=1e-9)


@pytest.mark.parametrize("latitude", [0.5, 2.0])
def test_how_far_apart_tracks_may_be_is_asked_of_the_settings(latitude: float) -> None:
    one = samples(BOX, floor=1000.0)
    other = samples(BOX, floor=1000.0, changed={"latitude": [latitude] * 12})
    found = common(one, other)
    if latitude == 0.5:
        assert found.off == pytest.approx(0.5 * DEGREE, rel=1e-6)
        # The first and the last station project on the ends, a hair inside the sphere's curvature.
        assert found.length == pytest.approx(3 * DEGREE, rel=1e-3)
    else:
        assert found.length == 0
        assert found.stations == (0, 0)
        assert np.isnan(found.off)


def test_stations_across_the_date_line_are_near() -> None:
    one = samples({179.0: (0, 500), 180.0: (0, 500), -179.0: (0, 500)}, floor=500.0)
    other = samples({179.5: (0, 500), -179.5: (0, 500)}, floor=500.0)
    assert common(one, other).length == pytest.approx(DEGREE, rel=1e-9)


def test_the_order_of_the_rows_shows_in_no_bit() -> None:
    one, other = samples(BOX, floor=1000.0), samples({0.3: (0, 400, 900), 1.7: (3, 555, 999)}, floor=1000.0)
    boundaries = np.array([30.4])
    first = common(one, other, boundaries)
    second = common(
        one.take(pa.array(range(11, -1, -1))), other.take(pa.array([3, 1, 5, 0, 2, 4])), boundaries
    )
    for before, after in zip(
        (*first.weights, *first.resolved), (*second.weights, *second.resolved), strict=True
    ):
        np.testing.assert_array_equal(before, after)
