"""The bottles of stations as profiles, against looking at one bottle after the other."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest

from pipeline.tracers.profiles import profiles

if TYPE_CHECKING:
    from pipeline.tables import FloatArray

SAME = 5.0  # m


def slowly(depth: FloatArray, value: FloatArray) -> tuple[list[float], list[float]]:
    """Return the levels of one station, from bottles in the order of their depth."""
    levels: list[list[int]] = []
    for i in np.lexsort((value, depth)):
        if levels and depth[i] - depth[levels[-1][0]] <= SAME:
            levels[-1].append(int(i))
        else:
            levels.append([int(i)])
    return [float(depth[level].mean()) for level in levels], [float(value[level].mean()) for level in levels]


@pytest.mark.parametrize("apart", [1.0, 4.0, 100.0])
def test_bottles_that_are_close_are_one_level_and_only_in_their_station(apart: float) -> None:
    chance = np.random.default_rng(3)
    station = np.repeat([0, 1, 2, 4], 20)
    depth = np.concatenate([np.arange(20) * (apart if n % 2 else 50.0) + n for n in range(4)])
    order = chance.permutation(len(depth))
    station, depth = station[order], depth[order]
    value = chance.normal(size=len(depth))
    value[chance.random(len(depth)) < 0.2] = np.nan
    found = dict(profiles(station, depth, value, np.abs(value), same_depth=SAME))
    for number in np.unique(station).tolist():
        mine = (station == number) & ~np.isnan(value)
        depths, values = slowly(depth[mine], value[mine])
        np.testing.assert_allclose(found[number].depth, depths, rtol=1e-12)
        np.testing.assert_allclose(found[number].value, values, rtol=1e-9, atol=1e-12)
    assert sorted(found) == [0, 1, 2, 4]


def test_stations_with_too_few_levels_have_no_profile() -> None:
    station, depth = np.array([0, 0, 0, 1, 1]), np.array([1.0, 2.0, 3.0, 1.0, 100.0])
    found = [number for number, _ in profiles(station, depth, depth, depth, same_depth=SAME)]
    assert found == [1]
    assert list(profiles(station, np.full(5, np.nan), depth, depth, same_depth=SAME)) == []
