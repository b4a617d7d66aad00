from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pytest

from pipeline.mixing import resolve
from pipeline.mixing.member_sums import member_sums
from pipeline.settings import Settings
from pipeline.tables import with_columns

from .catalogues import catalogue
from .test_analysis import mixed, samples

if TYPE_CHECKING:
    import pyarrow as pa

    from pipeline.mixing.entries import Catalogue
    from pipeline.mixing.member_sums import Errors, MemberSums

SECOND = """
[[set]]
name = "shallow"
sources = ["SOU", "NOR"]
properties = ["conservative_temperature", "preformed_salinity", "oxygen"]
[set.valid]
pressure = [0.0, 900.0]
"""


def archived(
    *rows: dict[str, Any], of: Catalogue | None = None, settings: Settings | None = None
) -> pa.Table:
    table = samples(*rows)
    answer = resolve(table, of or catalogue(), settings or Settings())
    return with_columns(table, answer.columns)


def sums(
    table: pa.Table, weights: Any, errors: Errors = "independent", of: Catalogue | None = None, **mixing: Any
) -> MemberSums:
    settings = Settings.model_validate({"mixing": mixing})
    return member_sums(
        table, of or catalogue(), settings, np.array(weights, dtype=float), errors=errors, members=100
    )


def test_the_spread_of_every_share_is_the_one_in_the_tables() -> None:
    """Weights of one sample each: the same ensemble, solved member by member by the other solver."""
    rows = [
        mixed(0.7, 0.2), mixed(0.02), mixed(0.99, 0.1), mixed(1.2), mixed(0.5, nitrate=None),
        mixed(0.3, pressure=400.0), mixed(0.5, pressure=950.0),
    ]  # fmt: skip
    of = catalogue(end=SECOND)
    table = samples(*rows)
    answer = resolve(table, of, Settings())
    found = sums(with_columns(table, answer.columns), np.eye(len(rows)), of=of)
    spread = found.members.std(axis=0, ddof=1)
    order = {code: found.sources.index(code) for code in ("NOR", "SOU")}
    mixtures = answer.mixtures.to_pylist()
    assert len(mixtures) == 12
    for row in mixtures:
        sample, source = int(row["sample"]) - 1, order[row["source"]]
        assert found.best[sample, source] == row["share"]
        assert spread[sample, source] == pytest.approx(row["share_uncertainty"], abs=1e-12)
    assert not spread[6].any(), "a sample that no set is valid for has no shares"
    assert found.largest_difference == 0.0


def test_the_error_of_a_mean_is_not_that_of_its_samples_over_the_root_of_their_number() -> None:
    rows = [mixed(0.5 + k / 1000) for k in range(60)]
    found = sums(archived(*rows), np.full((1, 60), 1 / 60))
    one = sums(archived(*rows), np.eye(60)).members.std(axis=0, ddof=1).mean()
    mean = found.members.std(axis=0, ddof=1)[0, 0]
    assert mean > 4 * one / np.sqrt(60)
    assert mean < one


def test_common_errors_of_measurement_do_not_average_out() -> None:
    rows = [mixed(0.5 + k / 1000) for k in range(60)]
    table, weights = archived(*rows), np.full((1, 60), 1 / 60)
    own, common = (
        sums(table, weights, errors).members.std(axis=0, ddof=1)[0, 0] for errors in ("independent", "common")
    )
    assert common > 1.1 * own


def test_the_difference_of_two_cruises_has_no_error_that_both_have() -> None:
    rows = [mixed(0.6), mixed(0.4)]
    table = archived(*rows)
    other = table.set_column(0, table.schema.field(0), [["ZZV220210218"] * 2])
    uncertain = dict.fromkeys(
        ("conservative_temperature", "preformed_salinity", "oxygen", "phosphate", "nitrate"), 1e-9
    )
    first, second = (sums(each, [[0.5, 0.5]], "common", uncertainty=uncertain) for each in (table, other))
    np.testing.assert_allclose(first.members, second.members, atol=1e-6)
    first, second = (sums(each, [[0.5, 0.5]], "common") for each in (table, other))
    apart = (second.members - first.members).std(axis=0, ddof=1)[0, 0]
    alone = first.members.std(axis=0, ddof=1)[0, 0]
    assert 0.01 * alone < apart < alone


def test_more_members_begin_with_the_fewer() -> None:
    table = archived(mixed(0.6), mixed(0.4))
    few, many = (
        member_sums(table, catalogue(), Settings(), np.eye(2), errors="common", members=count)
        for count in (10, 30)
    )
    np.testing.assert_array_equal(many.members[:10], few.members)


def test_tables_of_other_shares_are_noticed() -> None:
    table = archived(mixed(0.6), mixed(0.4))
    changed = table.set_column(
        table.column_names.index("oxygen"), table.schema.field("oxygen"), [[279.0, 266.0]]
    )
    assert sums(changed, np.eye(2)).largest_difference > 1e-4


def test_no_resolved_sample_gives_nothing() -> None:
    found = sums(archived(mixed(0.6, pressure=10.0)), np.eye(1))
    assert not found.best.any()
    assert not found.members.any()
