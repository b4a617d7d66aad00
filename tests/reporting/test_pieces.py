"""Colours, density lines, thinning, words."""

from __future__ import annotations

import gsw
import numpy as np
import pytest
from bokeh.palettes import Colorblind8

from pipeline.reporting.colours import SOURCE_COLOURS, SOURCE_MARKERS, source_looks
from pipeline.reporting.density_lines import density_lines
from pipeline.reporting.thinning import thinned
from pipeline.reporting.wording import (
    listed,
    plus_minus,
    quantity_words,
    rounded,
    short,
    signed,
    unit_words,
    visible,
)
from pipeline.tables import empty, with_columns
from pipeline.variables import REGISTRY


def test_colours_are_those_of_the_published_set() -> None:
    assert set(SOURCE_COLOURS) == set(Colorblind8) - {"#000000"}


def test_a_source_looks_as_its_place_in_the_catalogue_says_and_no_two_are_alike() -> None:
    looks = source_looks([(str(k), str(k), np.nan, np.nan) for k in range(12)])
    assert looks[0].colour == "#0072B2"
    assert len({(look.colour, look.marker) for look in looks}) == 12
    assert len(set(SOURCE_MARKERS)) == 12


def test_density_lines_are_of_equal_density() -> None:
    lines = density_lines((34.0, 36.0), (-1.0, 25.0))
    assert 5 <= len({line.sigma for line in lines}) <= 12
    for line in lines:
        sigma = gsw.sigma0(line.absolute_salinity, line.conservative_temperature)
        np.testing.assert_allclose(sigma, line.sigma, atol=0.005)


def test_thinning_keeps_ends_and_spreads_evenly() -> None:
    pressure = np.concatenate([np.arange(1000.0)[::-1], [5.0, 1.0]])
    casts = with_columns(
        empty([]),
        {
            "expocode": ["Z"] * 1002,
            "station": ["1"] * 1000 + ["2"] * 2,
            "cast": [1] * 1002,
            "pressure": pressure,
        },
    )
    few = thinned(casts, most_of_cast=50).column("pressure").to_numpy()
    assert len(few) == 52
    assert {0.0, 999.0, 5.0, 1.0} <= set(few)
    assert np.diff(np.sort(few[:50])).max() <= 22
    assert thinned(casts, most=100).num_rows == 52
    assert thinned(casts.slice(0, 0)).num_rows == 0


@pytest.mark.parametrize(
    ("unit", "words"),
    [
        ("umol kg-1", "µmol kg⁻¹"), ("degree_C", "°C"), ("1", ""), ("kg m-3", "kg m⁻³"), ("s-2", "s⁻²"),
        ("uatm", "µatm"), ("km2", "km²"), ("ug kg-1", "µg kg⁻¹"), ("tritium_unit", "tritium unit"), ("dbar", "dbar"),
    ],
)  # fmt: skip
def test_units_are_printed_as_people_write_them(unit: str, words: str) -> None:
    assert unit_words(unit) == words


def test_every_quantity_has_short_words() -> None:
    assert all(quantity_words(name) for name in REGISTRY)
    assert quantity_words("residual_nitrate") == "Nitrate, fitted less observed"
    assert quantity_words("broecker_no") == "NO"


@pytest.mark.parametrize(
    ("made", "wanted"),
    [
        (short(0.0), "0"), (short(34.69204), "34.69"), (short(-0.05), "−0.05"), (short(123456.0), "123456"),
        (short(float("nan")), "unknown"), (short(1e-7), "1e-07"),
        (rounded(-77.324, 3.1), "−77.3 ± 3.1"), (rounded(0.4548, 0.01823), "0.455 ± 0.018"), (rounded(2.0, 0.0), "2"),
        (rounded(1234.0, 56.0), "1234 ± 56"), (plus_minus(0.937, 0.052), "0.94 ± 0.05"), (signed(-0.104), "−0.10"),
        (plus_minus(0.5, float("nan")), "0.50"), (listed(["a"]), "a"), (listed([]), "none"),
        (listed(["a", "b", "c"]), "a, b and c"), (listed(list("abcdefgh"), 3), "a, b and 6 others"),
        (visible("a\nb\u202ec\x00"), "a\\nb\\u202ec\\u0000"), (visible("\N{WATER WAVE} Ærø"), "\N{WATER WAVE} Ærø"),
    ],
)  # fmt: skip
def test_words(made: str, wanted: str) -> None:
    assert made == wanted
