"""The kernels that the checks of profiles stand on, against slow twins and by hand."""

from __future__ import annotations

from typing import TYPE_CHECKING

import gsw
import numpy as np
import pytest

from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import findings_of
from pipeline.checking.profiles import FURTHEST_SLOPE, departure, limit_at
from pipeline.checking.stability import density_inversion, inversion
from pipeline.checking.track import _longest_ordered
from pipeline.limits import DepthLimit
from pipeline.usable import Rows
from tests.checking.cases import SETTINGS, clean_samples, marks_of, rows_of
from tests.checking.planted_profiles import bottles, sigma0_seems_unstable
from tests.invented import bottle_file, read

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]

CHECKS = SETTINGS.checks


def slow_departure(pressure: list[float], values: list[float], i: int, stride: int) -> float:
    n = len(values)
    if i - stride < 0 or i + stride >= n:
        return 0.0
    allowed = [values[i - stride], values[i + stride]]
    for way in (-1, 1):
        near, far = i + way * stride, i + 2 * way * stride
        if 0 <= far < n and pressure[near] != pressure[far]:
            ratio = abs((pressure[i] - pressure[near]) / (pressure[near] - pressure[far]))
            allowed.append(values[near] + (values[near] - values[far]) * min(ratio, FURTHEST_SLOPE))
    return max(values[i] - max(allowed), 0.0) - max(min(allowed) - values[i], 0.0)


@pytest.mark.parametrize("stride", [1, 2, 3])
@pytest.mark.parametrize("seed", range(5))
def test_departure_is_that_of_a_loop_over_casts(seed: int, stride: int) -> None:
    random = np.random.default_rng(seed)
    sizes = random.integers(1, 12, size=6)
    cast = np.repeat(np.arange(6), sizes)
    pressure = np.concatenate([np.sort(np.round(random.uniform(0, 30, n))) for n in sizes])
    values = random.normal(size=len(cast))
    expected = [
        slow_departure(pressure[cast == c].tolist(), values[cast == c].tolist(), i, stride)
        for c in range(6)
        for i in range(sizes[c])
    ]
    np.testing.assert_allclose(departure(cast, pressure, values, stride), expected, atol=1e-12)


@pytest.mark.parametrize("shape", [lambda p: p**2, lambda p: -np.abs(p), lambda p: 3.0 * p, lambda p: p**3])
def test_no_smooth_extremum_departs(shape: Callable[[FloatArray], FloatArray]) -> None:
    p = np.arange(-5.0, 6.0)
    assert not departure(np.zeros(11, dtype=np.int64), p, shape(p)).any()


def test_a_limit_goes_in_equal_ratios_from_the_upper_ocean_to_the_deep() -> None:
    limit = DepthLimit(upper=4.0, deep=0.01)
    middle = 0.5 * (CHECKS.upper_pressure + CHECKS.deep_pressure)
    found = limit_at(
        limit, np.array([0.0, CHECKS.upper_pressure, middle, CHECKS.deep_pressure, 9000.0]), CHECKS
    )
    assert found == pytest.approx([4.0, 4.0, 0.2, 0.01, 0.01])


def test_hydrography_is_computed_once_and_is_gsws() -> None:
    data = Rows(clean_samples(), SETTINGS.use)
    water = hydrography(data)
    assert hydrography(data) is water
    assert water.absolute_salinity is water.absolute_salinity
    where = (water.pressure, data.floats("longitude"), data.floats("latitude"))
    np.testing.assert_array_equal(water.absolute_salinity, gsw.SA_from_SP(water.salinity, *where))
    np.testing.assert_array_equal(
        water.potential_temperature,
        gsw.pt0_from_t(water.absolute_salinity, water.temperature, water.pressure),
    )


def test_the_bottle_is_taken_where_good_and_casts_come_sorted() -> None:
    rows = [
        {"CTDPRS": "900.0"},
        {"CTDPRS": "10.0", "SALNTY_FLAG_W": "4"},
        {"CTDPRS": "50.0", "STNNBR": "2"},
        {"CTDPRS": "400.0", "SALNTY": "-999", "SALNTY_FLAG_W": "9", "CTDSAL_FLAG_W": "4"},
    ]
    water = hydrography(Rows(read(bottle_file(*rows)).table, SETTINGS.use))
    np.testing.assert_array_equal(water.salinity, [34.501, 34.5, 34.501, np.nan])
    assert [cast.tolist() for cast in water.casts()] == [[1, 3, 0], [2]]


def test_an_empty_table_has_no_casts() -> None:
    water = hydrography(Rows(clean_samples().slice(0, 0), SETTINGS.use))
    assert list(water.casts()) == []
    assert len(water.absolute_salinity) == 0


def test_an_inversion_is_that_of_density_midway() -> None:
    salinity, heat = np.array([35.0, 35.1]), np.array([4.0, 6.0])
    pressure = np.array([1000.0, 3000.0])
    found = inversion(salinity, heat, pressure, np.array([0]), np.array([1]))
    assert found == pytest.approx(gsw.rho(35.0, 4.0, 2000.0) - gsw.rho(35.1, 6.0, 2000.0))


def test_deep_water_that_sigma0_calls_unstable_is_not() -> None:
    data = Rows(sigma0_seems_unstable(), SETTINGS.use)
    water = hydrography(data)
    sigma0 = gsw.sigma0(water.absolute_salinity, water.conservative_temperature)
    assert (np.diff(sigma0[water.order]) < -CHECKS.inversion_bottle.deep).any()
    assert density_inversion(data, SETTINGS) == []


def test_a_wrong_bottle_salinity_leaves_the_temperature_alone() -> None:
    table = bottles(
        (1000.0, 1500.0, 2000.0, 2500.0), CTDTMP=(4.0, 3.5, 3.1, 2.8), CTDSAL=(34.6, 34.7, 34.8, 34.85),
        SALNTY=(34.6, 34.7, 34.2, 34.85),
    )  # fmt: skip
    (mark,) = marks_of("density-inversion", table)
    assert (mark.variable, mark.rows.tolist()) == ("bottle_salinity", [2])
    (finding,) = findings_of(Rows(table, SETTINGS.use), [mark])
    assert finding.message.startswith("cruise_hy1.csv, line 6: SALNTY is part of a density inversion of 0.")
    assert finding.message.endswith("kg/m3 between 1500 and 2000 dbar; expected at most 0.02 kg/m3.")


def test_the_sentence_of_a_spike() -> None:
    table = bottles((2000.0, 2200.0, 2400.0, 2600.0, 2800.0), SALNTY=(34.7, 34.71, 35.72, 34.73, 34.74))
    data = Rows(table, SETTINGS.use)
    (finding,) = findings_of(data, marks_of("spike", table))
    assert finding.message == (
        "cruise_hy1.csv, line 6: SALNTY is 35.72 with 34.71 above it and 34.73 below it; expected at most 0.01 beyond"
        " what its neighbours allow."
    )


def test_the_neighbours_of_a_spike_are_left_alone() -> None:
    values = (36.0, 34.0, 44.0, 30.0, 28.0, 26.0, 24.0)
    table = bottles((2000.0, 2200.0, 2400.0, 2600.0, 2800.0, 3000.0, 3200.0), NITRAT=values)
    (mark,) = marks_of("spike", table)
    assert mark.rows.tolist() == [2]


@pytest.mark.parametrize("seed", range(20))
def test_the_longest_ordered_part_of_a_list(seed: int) -> None:
    values = np.random.default_rng(seed).integers(0, 9, size=9).astype(float)
    kept = _longest_ordered(values)
    assert (np.diff(values[kept]) >= 0).all()
    longest = max(
        mask.bit_count()
        for mask in range(1, 512)
        if (np.diff(values[[bool(mask >> i & 1) for i in range(9)]]) >= 0).all()
    )
    assert np.count_nonzero(kept) == longest


def test_rows_of_a_cast_go_down() -> None:
    pressure = np.array(clean_samples().column("pressure").to_pylist())[rows_of(clean_samples(), "5")]
    assert (np.diff(pressure) > 0).all()
