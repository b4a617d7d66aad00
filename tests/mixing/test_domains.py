from __future__ import annotations

import datetime as dt
from typing import Any

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.mixing.absences import absent_properties
from pipeline.mixing.domains import in_mixed_layer, validity
from pipeline.mixing.entries import Domain
from pipeline.mixing.mixed_layer import mixed_layer_pressure
from pipeline.mixing.polygons import inside, polygon_fault
from pipeline.problems import CatalogueProblem
from pipeline.settings import Settings
from pipeline.tables import registry_field, with_columns

from .catalogues import NAME, catalogue, changed

SETTINGS = Settings()
VALID = "pressure = [1000.0, 6000.0]"
SQUARE = ((0.0, 0.0), (10.0, 0.0), (10.0, 10.0), (0.0, 10.0))
ACROSS = ((170.0, -10.0), (-170.0, -10.0), (-170.0, 10.0), (170.0, 10.0))

CROSSES = "found a polygon that crosses or touches itself"
ORDER = "expected the vertices in order round it; reorder them."


def table(*rows: dict[str, Any]) -> pa.Table:
    """Return samples of one cast at 3000 dbar, 40 S, 12 W, changed as said."""
    usual = {
        "expocode": "ZZV120090214", "station": "7", "cast": 1, "pressure": 3000.0, "depth": 2950.0,
        "sigma0": 27.8, "sigma2": 37.0, "sigma4": 45.9, "latitude": -40.0, "longitude": -12.0,
        "date": dt.date(2009, 2, 14), "time": None,
    }  # fmt: skip
    full = [{**usual, **row} for row in rows]
    fields = [registry_field(name) for name in usual]
    return pa.table(
        [pa.array([row[f.name] for row in full], type=f.type) for f in fields], schema=pa.schema(fields)
    )


def told(domain: dict[str, Any], row: dict[str, Any]) -> str:
    """Return whether a sample lies in a domain."""
    holds, unknown = validity(table(row), Domain.model_validate(domain), SETTINGS)
    assert not (holds & unknown).any()
    return "inside" if holds[0] else "unknown" if unknown[0] else "outside"


@pytest.mark.parametrize(
    ("domain", "row", "expected"),
    [
        ({"depth": (2000, 3000)}, {}, "inside"),
        ({"depth": (2000, 2900)}, {}, "outside"),
        ({"depth": (2000, 3000)}, {"depth": None}, "unknown"),
        ({"sigma2": (36.9, 37.0)}, {}, "inside"),
        ({"sigma2": (36.9, 36.99)}, {}, "outside"),
        ({"sigma4": (45.8, 46.0)}, {}, "inside"),
        ({"sigma4": (45.8, 45.85)}, {}, "outside"),
        ({"sigma4": (45.8, 46.0)}, {"sigma4": None}, "unknown"),
        ({"months": (1, 2, 12)}, {}, "inside"),
        ({"months": (3,)}, {}, "outside"),
        ({"months": (2,)}, {"date": None}, "unknown"),
        ({"months": (3,)}, {"date": None, "time": dt.datetime(2009, 3, 1, 0, 0, 1, tzinfo=dt.UTC)}, "inside"),
        ({"region": ACROSS}, {"longitude": 175.0, "latitude": 0.0}, "inside"),
        ({"region": ACROSS}, {"longitude": -175.0, "latitude": 0.0}, "inside"),
        ({"region": ACROSS}, {"longitude": 180.0, "latitude": 0.0}, "inside"),
        ({"region": ACROSS}, {"longitude": -180.0, "latitude": 0.0}, "inside"),
        ({"region": ACROSS}, {"longitude": 185.0, "latitude": 0.0}, "inside"),
        ({"region": ACROSS}, {"longitude": 165.0, "latitude": 0.0}, "outside"),
        ({"region": ACROSS}, {"longitude": 0.0, "latitude": 0.0}, "outside"),
        ({"region": ACROSS}, {"longitude": 180.0, "latitude": 11.0}, "outside"),
        ({"region": ACROSS}, {"longitude": None, "latitude": 0.0}, "unknown"),
        ({"region": ACROSS}, {"longitude": 180.0, "latitude": None}, "unknown"),
        ({"region": ACROSS, "depth": (0, 10)}, {"longitude": None}, "outside"),
    ],
)
def test_conditions(domain: dict[str, Any], row: dict[str, Any], expected: str) -> None:
    assert told(domain, row) == expected


@pytest.mark.parametrize("shift", [0.0, 360.0, -180.0])
def test_a_polygon_holds_its_edges_and_corners(shift: float) -> None:
    moved = tuple((((x + shift + 180.0) % 360.0) - 180.0, y) for x, y in SQUARE)
    x = np.array([0.0, 10.0, 5.0, 0.0, 10.0, -0.001, 10.001, 5.0, 5.0]) + shift
    y = np.array([0.0, 10.0, 0.0, 5.0, 5.0, 5.0, 5.0, -0.001, 10.001])
    assert inside(moved, x, y).tolist() == [True] * 5 + [False] * 4


def test_a_polygon_that_is_hollow_on_one_side() -> None:
    notched = ((0.0, 0.0), (10.0, 0.0), (10.0, 10.0), (5.0, 2.0), (0.0, 10.0))
    x, y = np.array([5.0, 5.0, 1.0, 9.0, 5.0]), np.array([1.0, 5.0, 5.0, 5.0, 2.0])
    assert polygon_fault(notched) is None
    assert inside(notched, x, y).tolist() == [True, False, True, True, True]


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    st.lists(st.floats(0.5, 40.0), min_size=3, max_size=9),
    st.floats(-180.0, 179.0),
    st.booleans(),
    st.integers(0, 8),
)
def test_a_star_is_what_its_rays_say(radii: list[float], centre: float, turned: bool, first: int) -> None:
    """A star round a point holds what is nearer to the point than its edge, wherever it begins and turns."""
    n = len(radii)
    angle = 2 * np.pi * np.arange(n) / n
    corners = np.column_stack([np.array(radii) * np.cos(angle), np.array(radii) * np.sin(angle)])
    vertices = [(float((x + centre + 180.0) % 360.0 - 180.0), float(y)) for x, y in corners]
    vertices = vertices[first % n :] + vertices[: first % n]
    vertices = vertices[::-1] if turned else vertices
    assert polygon_fault(vertices) is None
    for i in range(n):
        one, other = corners[i], corners[(i + 1) % n]
        for part, expected in ((0.9, True), (1.1, False)):
            x, y = part * (0.6 * one + 0.4 * other)
            assert inside(vertices, np.array([x + centre]), np.array([y])).tolist() == [expected]


@pytest.mark.parametrize(
    ("region", "sentence"),
    [
        (
            "[[0, 0], [10, 10], [10, 0], [0, 10]]",
            f"{CROSSES}, from [0, 0] to [10, 10] and from [10, 0] to [0, 10]; {ORDER}",
        ),
        (
            "[[175, 0], [-175, 10], [-175, 0], [175, 10]]",
            f"{CROSSES}, from [175, 0] to [-175, 10] and from [-175, 0] to [175, 10]; {ORDER}",
        ),
        (
            "[[0, 0], [1, 1], [2, 2]]",
            "found a polygon without an area: its vertices lie on one line; expected some beside it; correct one.",
        ),
        (
            "[[0, 0], [5, 0], [5, 5], [0, 0]]",
            "found the vertex [0, 0] twice in a row; expected every vertex once, the last joins the first by itself; "
            "remove one.",
        ),
        (
            "[[0, -60], [120, -60], [-120, -60]]",
            "found a polygon that goes round a pole; expected one that encloses an area between meridians; give a "
            "range of latitude instead.",
        ),
        (
            "[[0, 0], [180, 0], [90, 20]]",
            "found 180 degrees of longitude from [0, 0] to [180, 0], which has no shorter way; expected less; put a "
            "vertex between them.",
        ),
        (
            "[[170, -10], [-170, -10], [-170, 10], [170, 10]]\nlongitude = [0, 90]",
            "found a region that lies outside the range of longitude, which leaves an empty domain; expected both to "
            "overlap; correct one or remove it.",
        ),
        (
            "[[170, -10], [-170, -10], [-170, 10], [170, 10]]\nlatitude = [20, 30]",
            "found a region that lies outside the range of latitude, which leaves an empty domain; expected both to "
            "overlap; correct one or remove it.",
        ),
    ],
)
def test_regions_that_cannot_be_used(region: str, sentence: str) -> None:
    with pytest.raises(CatalogueProblem) as refusal:
        catalogue((VALID, f"region = {region}"))
    assert str(refusal.value) == f"{NAME}, line 31: set 'deep': {sentence}"


@pytest.mark.parametrize(
    ("valid", "sentence"),
    [
        (
            "months = []",
            "found [] as 'months' of set 'deep', valid; expected a list of months, 1 to 12; correct it.",
        ),
        (
            "months = [13]",
            "found [13] as 'months' of set 'deep', valid; expected a list of months, 1 to 12; correct it.",
        ),
        (
            "months = [13, 14, 0]",
            "found [13, 14, 0] as 'months' of set 'deep', valid; expected a list of months, 1 to 12; correct it.",
        ),
        (
            "months = [12, 12, 1]",
            "set 'deep': found the month 12 twice; expected it once; remove one.",
        ),
        (
            "latitude = [100.0, -100.0]",
            "set 'deep': found 100 and -100 as an end of the latitudes it is valid in; expected -90 to 90; correct it.",
        ),
        (
            "pressure = [nan, nan]",
            "found [nan, nan] as 'pressure' of set 'deep', valid; expected two numbers, [low, high]; correct it.",
        ),
        (
            "pressure = []",
            "found [] as 'pressure' of set 'deep', valid; expected two numbers, [low, high]; correct it.",
        ),
        (
            "sigma2 = [37.1, 36.9]",
            "set 'deep': found the empty range [37.1, 36.9] of sigma2; expected [low, high]; swap the ends.",
        ),
        (
            "sigma0 = [1027.0, 1028.0]",
            "set 'deep': found the range [1027, 1028] of sigma0, in which no sea water is; expected a part of -10 to "
            "60; correct it.",
        ),
        (
            "region = [[0, 0], [1, 1]]",
            "found [[0, 0], [1, 1]] as 'region' of set 'deep', valid; expected 3 to 500 vertices, [[longitude, "
            "latitude], ...], from -180 to 360 and -90 to 90 degrees; correct it.",
        ),
        (
            "region = [[0, 0], [1, nan], [1, 1]]",
            "found [[0, 0], [1, nan], [1, 1]] as 'region' of set 'deep', valid; expected 3 to 500 vertices, "
            "[[longitude, latitude], ...], from -180 to 360 and -90 to 90 degrees; correct it.",
        ),
        (
            'mixed_layer = "no"',
            "found 'no' as 'mixed_layer' of set 'deep', valid; expected \"exclude\" or \"include\"; correct it.",
        ),
    ],
)
def test_domains_that_cannot_be_used(valid: str, sentence: str) -> None:
    with pytest.raises(CatalogueProblem) as refusal:
        catalogue((VALID, valid))
    assert str(refusal.value) == f"{NAME}, line 31: {sentence}"


def test_a_region_that_meets_a_range_across_the_date_line_is_no_fault() -> None:
    written = "region = [[170, -10], [-170, -10], [-170, 10], [170, 10]]\nlongitude = [185, 200]"
    assert catalogue((VALID, written)).set[0].valid.longitude == (185.0, 200.0)
    assert changed((VALID, written)).count("region") == 1


PROFILE = {5.0: 25.0, 15.0: 25.02, 60.0: 25.03, 100.0: 25.10, 300.0: 26.5, 1000.0: 27.4}


def ends(profile: dict[float, float | None], excess: float = 0.03) -> float:
    n = len(profile)
    density = np.array([np.nan if value is None else value for value in profile.values()])
    found = mixed_layer_pressure(np.zeros(n, dtype=np.int64), np.array([*profile]), density, excess)
    assert np.unique(found).size == 1, "all samples of a cast have the same"
    return float(found[0])


@pytest.mark.parametrize(
    ("profile", "expected"),
    [
        # 25.01 at 10 dbar, so it ends at 25.04: a seventh of the way from 60 to 100 dbar.
        (PROFILE, 60 + 40 / 7),
        ({20.0: 25.0, 60.0: 25.02, 100.0: 25.10}, 60 + 40 / 8),  # the first sample's, since it is deeper
        ({20.0: 25.0, 30.0: 25.12, 100.0: 25.2}, 22.5),
        ({5.0: 25.0, 8.0: 25.0, 9.0: 25.01}, 9.0),  # nowhere below: to its last sample
        ({5.0: 25.0, 50.0: 25.0, 500.0: 25.01, 900.0: 25.02}, 900.0),  # deep convection
        ({5.0: 25.0, 50.0: 25.0, 551.0: 25.01, 900.0: 25.02}, 50.0),  # nothing is known of the gap
        ({5.0: 25.0, 50.0: None, 90.0: 25.0, 100.0: 25.10}, 93.0),
        (
            {5.0: 25.0, 40.0: 25.2, 90.0: 25.0, 100.0: 25.10},
            10 + 30 * 0.03 / (0.2 * 30 / 35),
        ),  # an inversion below
        ({51.0: 25.0, 60.0: 25.0, 100.0: 25.0}, np.nan),  # begins too deep to tell of the surface
        ({5.0: 25.0, 3000.0: 25.0}, np.nan),  # two samples are no profile
        ({5.0: None, 3000.0: None}, np.nan),
    ],
)
def test_where_the_mixed_layer_ends(profile: dict[float, float | None], expected: float) -> None:
    assert ends(profile) == pytest.approx(expected, nan_ok=True)


def test_each_cast_has_its_own_mixed_layer_in_any_order_of_rows() -> None:
    pressure = np.array([*PROFILE, *PROFILE, 20.0])
    density = np.array([*PROFILE.values(), *(25.0, 25.0, 25.0, 25.0, 26.0, 27.0), np.nan])
    cast = np.array([4] * 6 + [9] * 6 + [7])
    expected = mixed_layer_pressure(cast, pressure, density, 0.03)
    assert expected[0] == pytest.approx(60 + 40 / 7)
    assert expected[6] == pytest.approx(100 + 200 * 0.03)
    assert np.isnan(expected[-1])
    order = np.random.default_rng(1).permutation(len(cast))
    np.testing.assert_array_equal(
        mixed_layer_pressure(cast[order], pressure[order], density[order], 0.03), expected[order]
    )


def test_samples_of_the_mixed_layer_are_outside_unless_they_are_asked_for() -> None:
    rows: list[dict[str, float | None]] = [{"pressure": p, "sigma0": s} for p, s in PROFILE.items()]
    rows += [{"pressure": 62.0, "sigma0": None}, {"pressure": 70.0, "sigma0": None}, {"pressure": None}]
    samples = table(*rows)
    assert in_mixed_layer(samples, SETTINGS).tolist() == [True] * 3 + [False] * 3 + [True, False, False]
    holds, unknown = validity(samples, Domain(), SETTINGS)
    assert holds.tolist() == [False] * 3 + [True] * 3 + [False, True, True]
    assert not unknown.any()
    holds, _ = validity(samples, Domain(mixed_layer="include"), SETTINGS)
    assert holds.all()


def test_how_much_denser_ends_it_is_a_setting() -> None:
    wide = Settings.model_validate({"mixing": {"mixed_layer_density": 0.125}})
    samples = table(*[{"pressure": p, "sigma0": s} for p, s in PROFILE.items()])
    assert in_mixed_layer(samples, wide).tolist() == [True] * 4 + [False] * 2


def test_no_samples() -> None:
    holds, unknown = validity(table({}).slice(0, 0), Domain(region=SQUARE, months=(1,)), SETTINGS)
    assert holds.shape == unknown.shape == (0,)


def test_a_property_that_no_sample_of_a_domain_has_is_told_once() -> None:
    columns = ("conservative_temperature", "preformed_salinity", "oxygen", "phosphate")
    samples = with_columns(table({}, {}, {"pressure": 10.0}), {name: [1.0] * 3 for name in columns})
    some: dict[str, list[float | None]] = {"nitrate": [None, None, 14.0], "phosphate": [None, 1.0, None]}
    samples = with_columns(samples, some)
    (told,) = absent_properties(samples, catalogue(), SETTINGS)
    assert (told.variable, told.count, told.severity) == ("nitrate", 2, "note")
    assert told.message == (
        "source set 'deep': none of the 2 samples in its domain has a nitrate that may be used; expected some; deliver "
        "it, or use a set without it."
    )
    flagged = with_columns(samples, {"nitrate": [14.0] * 3, "nitrate_flag": [4, 4, 2]})
    assert [finding.variable for finding in absent_properties(flagged, catalogue(), SETTINGS)] == ["nitrate"]
    assert absent_properties(samples.slice(2), catalogue(), SETTINGS) == (), "no sample is asked for any"
