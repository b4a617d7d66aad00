from __future__ import annotations

import numpy as np
import pytest

from pipeline.reporting.colours import source_looks
from pipeline.reporting.line import unit_vectors
from pipeline.reporting.occupations import LAYERS, Occupation, compare, interpolated, layer_means

LOOKS = source_looks([("OVF", "Overflow", np.nan, np.nan), ("DEP", "Deep", np.nan, np.nan)])


def visit(
    expocode: str, time: float, shift: float, overflow: float, *, catalogue: str = "c", n: int = 12
) -> Occupation:
    """Return a visit whose shares go evenly along the line, in the layers below 2000 dbar."""
    longitude = np.arange(n, dtype=np.float64) * 0.7 + shift
    shares = np.full((n, len(LAYERS) - 1, 2), np.nan)
    shares[:, 5:7, 0] = (overflow - 0.02 * longitude)[:, None]
    shares[:, 5:7, 1] = 1 - shares[:, 5:7, 0]
    places = unit_vectors(np.full(n, -30.0), longitude)
    return Occupation(expocode, "V", time, "2009-01-01", catalogue, LOOKS, places, shares)


def test_a_change_is_found_though_the_casts_lie_between_each_other() -> None:
    (found,) = compare([visit("B", 2.0, 0.35, 0.6), visit("A", 1.0, 0.0, 0.7)])
    assert (found.earlier.expocode, found.later.expocode) == ("A", "B")
    for change in found.changes:
        assert change.difference == pytest.approx(-0.1 if change.code == "OVF" else 0.1, abs=1e-3)
        assert change.is_notable
    # the first cast of the earlier visit lies outside the later one, and not near
    assert {change.places for change in found.changes} == {11}
    assert "OVF by −0.10" in found.sentence()


def test_no_change_is_told_as_none() -> None:
    same = [visit("A", 1.0, 0.0, 0.7), visit("B", 2.0, 0.0, 0.7)]
    (found,) = compare(same)
    assert "no share changed" in found.sentence()


@pytest.mark.parametrize(
    "other",
    [
        visit("B", 2.0, 0.0, 0.6, catalogue="other"),
        visit("B", 2.0, 40.0, 0.6),
        visit("B", 2.0, 0.0, 0.6, n=2),
    ],
    ids=["other sources", "other place", "too few"],
)
def test_what_cannot_be_compared_is_not(other: Occupation) -> None:
    assert compare([visit("A", 1.0, 0.0, 0.7), other]) == []


def test_nothing_is_interpolated_over_a_wide_gap() -> None:
    along, values = np.array([0.0, 100.0, 400.0, np.nan]), np.array([0.0, 1.0, 2.0, 9.0])
    found = interpolated(np.array([50.0, 250.0, 385.0, 410.0, 500.0, np.nan]), along, values)
    np.testing.assert_allclose(found, [0.5, np.nan, 1.95, 2.0, np.nan, np.nan])


def test_layer_means_leave_out_what_is_missing() -> None:
    share = np.array([[0.2], [0.4], [np.nan], [1.0]])
    means = layer_means(share, np.array([0, 0, 0, 1]), np.array([1, 1, 1, 3]), 2)
    assert means[0, 1, 0] == pytest.approx(0.3)
    assert means[1, 3, 0] == 1.0
    assert np.isfinite(means).sum() == 2
