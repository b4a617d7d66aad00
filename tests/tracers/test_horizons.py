"""Saturation horizons and extremes read off the bottles of a station."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.carbonate_settings import ProfileSettings
from pipeline.settings import Settings
from pipeline.tracers.extremes import extreme_forms, extremes
from pipeline.tracers.horizons import horizon_findings, horizons
from pipeline.tracers.profiles import profiles, station_groups
from pipeline.tracers.samples import sample_tracers
from pipeline.variables import EXTREMES

from .carbon_cases import DEEP, rows

if TYPE_CHECKING:
    from collections.abc import Sequence

    from pipeline.tables import FloatArray
    from pipeline.tracers.horizons import Horizons

quick = settings(deadline=None, derandomize=True, max_examples=60)
CHOICE = ProfileSettings()
DEPTHS = (10.0, 200.0, 500.0, 900.0, 1400.0)


def horizons_of(
    depth: Sequence[float], saturation: Sequence[float], station: Sequence[int] | None = None
) -> Horizons:
    n = len(depth)
    stations = np.array(station if station is not None else [0] * n, dtype=np.int64)
    return horizons(stations, np.array(depth), np.array(saturation), np.full(n, 0.03), CHOICE)


def extremes_of(depth: Sequence[float], **values: Sequence[float]) -> dict[str, FloatArray]:
    n = len(depth)
    given_values = {name: np.array(own, dtype=np.float64) for name, own in values.items()}
    return extremes(
        np.zeros(n, dtype=np.int64),
        np.array(depth),
        lambda name: given_values.get(name, np.full(n, np.nan)),
        CHOICE,
    )


def test_the_horizon_is_linear_between_two_bottles_and_in_every_row_of_the_station() -> None:
    found = horizons_of(DEPTHS, (3.0, 2.0, 1.2, 0.7, 0.6))
    assert found.depth == pytest.approx([500.0 + 400.0 * 0.2 / 0.5] * 5)
    assert found.uncertainty == pytest.approx([0.03 / (0.5 / 400.0)] * 5)


def test_the_uncertainty_follows_the_profile_and_not_its_slope_between_two_bottles() -> None:
    """Nearly level between two bottles, steep beside them: first order would give hundreds of metres."""
    found = horizons_of((10.0, 300.0, 500.0, 700.0, 900.0), (3.0, 1.5, 1.001, 0.999, 0.5))
    assert found.depth[0] == pytest.approx(600.0)
    upper = 300.0 + 200.0 * (1.47 - 1.0) / (1.47 - 0.971)
    lower = 700.0 + 200.0 * (1.029 - 1.0) / (1.029 - 0.53)
    assert found.uncertainty[0] == pytest.approx(0.5 * (lower - upper))
    assert found.uncertainty[0] < 0.03 / (0.002 / 200.0) / 20


def test_a_horizon_that_its_own_uncertainty_moves_out_of_the_bottles_has_none_and_is_told() -> None:
    depth, saturation = (10.0, 400.0, 900.0, 1600.0), (1.01, 1.008, 1.004, 0.996)
    found = horizons_of(depth, saturation)
    assert found.depth[0] == pytest.approx(1250.0)
    assert np.isnan(found.uncertainty).all()
    data = rows([{"station": "17"}] * 4)
    (told,) = horizon_findings(data, station_groups(data.table), "calcite", found, CHOICE)
    assert told.message.startswith(
        "the calcite saturation horizon of station 17 is hardly known: saturation is so near"
    )
    assert (
        "by more than 800 m, or beyond the bottles; expected less (profiles.horizon_uncertainty"
        in told.message
    )
    sharp = horizons_of(DEPTHS, (3.0, 2.0, 1.2, 0.7, 0.6))
    assert not horizon_findings(data, station_groups(data.table), "calcite", sharp, CHOICE)


def test_a_horizon_that_is_uncertain_by_very_much_is_told() -> None:
    depth = (10.0, 100.0, 1500.0, 3000.0, 3100.0)
    choice = ProfileSettings(gap=2000.0)
    found = horizons(np.zeros(5, dtype=np.int64), np.array(depth), np.array((2.0, 1.02, 1.0, 0.985, 0.5)),
                     np.full(5, 0.03), choice)  # fmt: skip
    assert found.uncertainty[0] > 800.0
    data = rows([{"station": "4"}] * 5)
    (told,) = horizon_findings(data, station_groups(data.table), "aragonite", found, choice)
    assert "is hardly known" in told.message


def test_a_bottle_at_one_exactly_is_the_horizon() -> None:
    assert horizons_of(DEPTHS, (3.0, 2.0, 1.0, 0.7, 0.6)).depth[0] == 500.0


@pytest.mark.parametrize(
    "saturation", [(3.0, 2.0, 1.5, 1.3, 1.1), (0.9, 0.8, 0.7, 0.7, 0.6), (0.5, 0.8, 1.5, 1.7, 1.9)]
)
def test_no_horizon_where_saturation_never_falls_below_one(saturation: tuple[float, ...]) -> None:
    found = horizons_of(DEPTHS, saturation)
    assert np.isnan(found.depth).all()
    assert not found.of_station


def test_of_several_the_deepest_is_told_and_that_there_are_several() -> None:
    saturation = (1.5, 0.8, 1.2, 0.8, 0.7)
    found = horizons_of(DEPTHS, saturation)
    assert found.depth[0] == pytest.approx(700.0)
    assert found.of_station[0].crossings == 2
    data = rows([{"station": "17"}] * 5)
    (finding,) = horizon_findings(data, station_groups(data.table), "aragonite", found, CHOICE)
    assert finding.message.startswith("saturation of aragonite falls below one more than once in station 17;")


def test_a_horizon_in_too_wide_a_gap_is_left_out_and_its_station_named() -> None:
    found = horizons_of((10.0, 1000.0, 1900.0), (3.0, 1.1, 0.8))
    assert np.isnan(found.depth).all()
    data = rows([{"station": "9A"}] * 3)
    (finding,) = horizon_findings(data, station_groups(data.table), "calcite", found, CHOICE)
    assert finding.message == (
        "the calcite saturation horizon of station 9A lies between two bottles up to 900 m apart; expected at most"
        " 800 m (profiles.gap of the settings); its depth was left out."
    )


def test_bottles_of_one_level_are_averaged_and_make_no_crossing() -> None:
    found = horizons_of((10.0, 500.0, 501.0, 501.9, 900.0), (3.0, 1.15, 0.95, 1.05, 0.8))
    assert found.of_station[0].crossings == 1
    level, value = (500.0 + 501.0 + 501.9) / 3, (1.15 + 0.95 + 1.05) / 3
    assert found.depth[0] == pytest.approx(level + (900.0 - level) * (value - 1.0) / (value - 0.8))


def test_the_casts_of_a_station_are_one_profile_and_stations_are_apart() -> None:
    data = rows(
        [
            {"station": "1", "cast": 1},
            {"station": "2", "cast": 1},
            {"station": "1", "cast": 2},
            {"station": "2", "cast": 1},
        ]
    )
    station = station_groups(data.table)
    assert list(station) == [0, 1, 0, 1]
    found = horizons(
        station,
        np.array([400.0, 100.0, 600.0, 300.0]),
        np.array([1.5, 1.5, 0.5, 1.2]),
        np.full(4, 0.03),
        CHOICE,
    )
    assert found.depth == pytest.approx([500.0, np.nan, 500.0, np.nan], nan_ok=True)


@quick
@given(st.integers(0, 999))
def test_the_order_of_the_bottles_changes_nothing(seed: int) -> None:
    random = np.random.default_rng(seed)
    depth = random.choice([5.0, 6.0, 100.0, 101.0, 400.0, 700.0, 1100.0], 12)
    saturation, station = random.uniform(0.3, 2.0, 12), random.integers(0, 2, 12)
    order = random.permutation(12)
    here = horizons_of(list(depth), list(saturation), list(station))
    there = horizons_of(list(depth[order]), list(saturation[order]), list(station[order]))
    np.testing.assert_array_equal(there.depth, here.depth[order])
    np.testing.assert_array_equal(there.uncertainty, here.uncertainty[order])


def test_missing_values_are_no_levels_and_no_rows_are_no_stations() -> None:
    found = horizons_of((10.0, np.nan, 200.0, 500.0, 900.0), (3.0, 0.1, np.nan, 1.2, 0.8))
    assert found.depth[0] == pytest.approx(700.0)
    assert horizons_of((), ()).depth.shape == (0,)
    empty = rows([])
    assert not list(profiles(station_groups(empty.table), *(np.array([]) for _ in range(3)), same_depth=2.0))
    assert sample_tracers(empty, Settings()).columns["oxygen_minimum"].shape == (0,)


def test_the_oxygen_minimum_has_a_depth_a_value_and_a_layer() -> None:
    found = extremes_of(DEPTHS, oxygen=(220.0, 100.0, 40.0, 20.0, 140.0))
    assert found["oxygen_minimum"][0] == 20.0
    assert found["oxygen_minimum_depth"][0] == 900.0
    top, bottom = 200.0 + 300.0 * 40.0 / 60.0, 900.0 + 500.0 * 40.0 / 120.0
    assert found["oxygen_minimum_thickness"] == pytest.approx([bottom - top] * 5)


def test_a_minimum_above_the_limit_has_a_layer_of_nothing() -> None:
    assert (
        extremes_of(DEPTHS, oxygen=(220.0, 180.0, 160.0, 150.0, 190.0))["oxygen_minimum_thickness"][0] == 0.0
    )


def test_a_layer_that_reaches_the_last_bottle_has_no_thickness() -> None:
    found = extremes_of(DEPTHS, oxygen=(220.0, 100.0, 40.0, 20.0, 50.0))
    assert found["oxygen_minimum"][0] == 20.0
    assert np.isnan(found["oxygen_minimum_thickness"][0])


@pytest.mark.parametrize(
    "oxygen",
    [
        (220.0, 200.0, 150.0, 120.0, 100.0),  # falls to the last bottle
        (100.0, 120.0, 150.0, 180.0, 200.0),  # rises from the first
        (220.0, 201.0, 200.5, 200.0, 201.5),  # level below, as far as a bottle repeats
        (220.0, 201.0, 200.0, 200.5, 201.5),  # the last bottle alone is higher
        (220.0, 200.0, np.nan, np.nan, np.nan),
    ],
)
def test_a_profile_that_brackets_no_minimum_has_none(oxygen: tuple[float, ...]) -> None:
    found = extremes_of(DEPTHS, oxygen=oxygen)
    assert all(np.isnan(values).all() for values in found.values())


def test_a_minimum_that_a_person_sees_is_found_though_its_rise_is_within_the_accuracy_of_oxygen() -> None:
    """Off by a standard are all bottles of a station alike: two per cent of it make no minimum and hide none."""
    depth = (10.0, 500.0, 1000.0, 1500.0, 2000.0, 2500.0, 3000.0, 3500.0, 4000.0)
    oxygen = np.array((230.0, 190.0, 175.0, 160.0, 153.0, 153.9, 154.8, 155.1, 155.2))
    for standard in (0.98, 1.0, 1.02):
        assert extremes_of(depth, oxygen=(standard * oxygen).tolist())["oxygen_minimum_depth"][0] == 2000.0
    one_bottle = np.where(np.array(depth) == 3500.0, 157.0, np.minimum(oxygen, 153.0 + (oxygen > 160) * 99))
    assert np.isnan(extremes_of(depth, oxygen=one_bottle.tolist())["oxygen_minimum_depth"][0])


def test_noise_makes_an_extreme_of_a_level_profile_as_seldom_as_is_said() -> None:
    """Of ten level bottles, in one of a hundred stations: what the description of profiles.extreme_rise says."""
    chance = np.random.default_rng(3)
    n_station, n_level = 2000, 10
    depth = np.tile(np.arange(2 * n_level) * 100.0, n_station)
    station = np.repeat(np.arange(n_station), 2 * n_level)
    falling = np.concatenate([np.linspace(230.0, 160.0, n_level), np.full(n_level, 150.0)])
    oxygen = np.tile(falling, n_station) + CHOICE.repeatability.oxygen * chance.standard_normal(len(depth))
    nothing = np.full(len(depth), np.nan)
    found = extremes(station, depth, lambda name: oxygen if name == "oxygen" else nothing, CHOICE)[
        "oxygen_minimum"
    ]
    part = float((~np.isnan(found)).mean())
    assert 0.003 < part < 0.02


def test_the_rule_of_an_extreme_is_in_its_metadata() -> None:
    forms = extreme_forms(CHOICE)
    assert forms["oxygen_minimum"]["form"].startswith(
        "more than 4 times 0.3 umol/kg, what one bottle repeats to"
    )
    assert forms["delta_carbon_13_minimum_depth"]["form"].startswith("more than 4 times 0.03 per mil")
    assert forms["oxygen_minimum_thickness"] == {"form": "limit 60 umol/kg"}
    assert set(forms) == {v.name for v in EXTREMES}


def test_phosphate_has_a_maximum_and_carbon_13_a_minimum() -> None:
    found = extremes_of(
        DEPTHS, phosphate=(0.2, 1.5, 2.6, 2.9, 2.5), delta_carbon_13=(1.8, 0.6, -0.1, 0.1, 0.4)
    )
    assert (found["phosphate_maximum"][0], found["phosphate_maximum_depth"][0]) == (2.9, 900.0)
    assert (found["delta_carbon_13_minimum"][0], found["delta_carbon_13_minimum_depth"][0]) == (-0.1, 500.0)
    assert np.isnan(found["oxygen_minimum"]).all()


def test_a_horizon_is_where_the_computed_saturation_is_one() -> None:
    """One water column: the horizon by interpolation lies where water of that depth has a saturation of one."""
    depths = np.arange(2000.0, 4600.0, 200.0)
    column = [{**DEEP, "pressure": 1.015 * z, "depth": z, "temperature": 2.5 - z / 3e3} for z in depths]
    found = sample_tracers(rows(column), Settings()).columns
    depth = float(found["calcite_saturation_depth"][0])
    at = {**DEEP, "pressure": 1.015 * depth, "depth": depth, "temperature": 2.5 - depth / 3e3}
    there = sample_tracers(rows([at]), Settings()).columns["calcite_saturation"][0]
    assert there == pytest.approx(1.0, abs=2e-3)
    assert found["aragonite_saturation_depth"][0] < depth or np.isnan(found["aragonite_saturation_depth"][0])
