from __future__ import annotations

from dataclasses import replace

import numpy as np
import pyarrow as pa
import pytest

from pipeline.census import Resolved, census_table, compare, take_census
from pipeline.mixing import resolve
from pipeline.problems import ArchiveProblem, UsageProblem
from pipeline.settings import Settings
from pipeline.tables import with_columns
from tests.mixing.catalogues import catalogue
from tests.mixing.test_analysis import NORTH, SOUTH

from .invented import DEGREE, EXPOCODE, samples


def resolved(north: tuple[float, ...], expocode: str = EXPOCODE, **changed: object) -> Resolved:
    """Return three stations of three samples that have these shares of northern water, from the surface down."""
    settings = Settings.model_validate(
        {"mixing": changed.pop("mixing", {}), "census": changed.pop("census", {})}
    )
    table = samples(dict.fromkeys((0.0, 1.0, 2.0), (0, 500, 1000)), floor=1000.0)
    share = np.tile(north, 3)
    values = {name: share * NORTH[name] + (1 - share) * SOUTH[name] for name in NORTH}
    table = with_columns(
        table, {"expocode": [expocode] * 9, "pressure": [3000.0] * 9, "sigma0": [27.8] * 9, **values}
    )
    answer = resolve(table, catalogue(), settings)
    return Resolved(expocode, with_columns(table, answer.columns), catalogue(), settings)


def test_areas_of_known_shares() -> None:
    found = take_census(resolved((0.2, 0.4, 0.8)))
    assert found.sources == ("NOR", "SOU")
    assert found.shares.share[0] == pytest.approx([0.45, 0.55], abs=1e-6)
    assert found.shares.area[0] == pytest.approx([0.45 * 2 * DEGREE, 0.55 * 2 * DEGREE], rel=1e-6)


def test_the_order_of_the_rows_shows_in_no_bit() -> None:
    cruise, other = resolved((0.2, 0.4, 0.8)), resolved((0.3, 0.4, 0.6), "ZZV220210218")
    shuffled = [
        replace(one, samples=one.samples.take(pa.array([4, 8, 0, 2, 6, 1, 7, 3, 5])))
        for one in (cruise, other)
    ]
    assert census_table(compare(cruise, other)).equals(census_table(compare(shuffled[0], shuffled[1])))


def test_a_change_is_known_better_than_either_share() -> None:
    """Errors of the sources, which are most of it here, cancel: measurements are taken as nearly exact."""
    exact = {"uncertainty": dict.fromkeys(NORTH, 1e-6)}
    one, other = (
        resolved((0.2, 0.4, 0.8), mixing=exact),
        resolved((0.3, 0.5, 0.9), "ZZV220210218", mixing=exact),
    )
    found = compare(one, other)
    assert found.change.difference[0] == pytest.approx([0.1, -0.1], abs=1e-6)
    assert found.change.uncertainty[0, 0] < 0.3 * found.one.shares.share_uncertainty[0, 0]
    assert found.change.uncertainty[0, 0] < 0.3 * found.change.independent[0, 0]


def test_density_classes_are_those_of_the_catalogue_where_none_are_given() -> None:
    cruise = resolved((0.2, 0.4, 0.8))
    of = catalogue(("pressure = [1000.0, 6000.0]", "pressure = [1000.0, 6000.0]\nsigma2 = [30.25, 30.75]"))
    found = take_census(replace(cruise, catalogue=of))
    assert list(found.boundaries) == [30.25, 30.75]
    given = cruise.settings.model_copy(
        update={"census": cruise.settings.census.model_copy(update={"boundaries": (30.5,)})}
    )
    assert list(take_census(replace(cruise, catalogue=of, settings=given)).boundaries) == [30.5]


def test_an_archive_without_an_ensemble_gets_one() -> None:
    found = take_census(resolved((0.2, 0.4, 0.8), mixing={"members": 0}))
    assert found.members == 100
    assert found.shares.share_uncertainty[0, 0] > 0.001


def test_tables_of_another_version_are_refused() -> None:
    cruise = resolved((0.2, 0.4, 0.8))
    changed = with_columns(cruise.samples, {"leading_share": [0.5] * 9})
    with pytest.raises(ArchiveProblem, match="not those that this version computes"):
        take_census(replace(cruise, samples=changed))


def test_other_sources_or_seeds_are_not_compared() -> None:
    one, other = resolved((0.2, 0.4, 0.8)), resolved((0.3, 0.4, 0.6), "ZZV220210218", mixing={"seed": 7})
    with pytest.raises(UsageProblem, match="made with different seeds of the ensemble"):
        compare(one, other)
