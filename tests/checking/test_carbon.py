"""DIC and alkalinity of one sample that do not fit together: which samples, in which words, with which flags."""

from __future__ import annotations

import pytest

from pipeline.checking import check
from pipeline.findings import Severity
from pipeline.settings import Settings
from tests.checking.cases import marks_of
from tests.checking.oceans import ocean, row
from tests.checking.planted_chemistry import shifted

NAME = "alkalinity-less-dic"


@pytest.mark.parametrize(
    ("name", "label", "by"),
    [("alkalinity", "ALKALI", -230.0), ("alkalinity", "ALKALI", 420.0), ("dic", "TCARBN", 260.0)],
)
def test_both_are_doubted_and_the_one_that_is_unlike_its_neighbours_is_named(
    name: str, label: str, by: float
) -> None:
    table, rows = shifted(name, (4, 1000, by))
    checked = check(table, Settings(), names={NAME})
    (finding,) = checked.findings
    assert finding.severity is Severity.DOUBT
    assert "TCARBN and ALKALI do not fit together: " in finding.message
    assert f"umol/kg, and of the two {label} is unlike the samples beside it; expected 50 to 450 umol/kg" in (
        finding.message
    )
    for column in ("dic_check", "alkalinity_check"):
        assert [i for i, flag in enumerate(checked.flags[column]) if flag == 3] == sorted(rows)


def test_where_both_are_unlike_their_neighbours_both_are_named() -> None:
    table, _ = shifted("alkalinity", (4, 1000, -150.0))
    (mark,) = marks_of(NAME, shifted("dic", (4, 1000, 100.0), table=table)[0])
    assert str(mark.values[0]).endswith(", and TCARBN and ALKALI are both unlike the samples beside them")


def test_a_cast_that_is_so_throughout_is_the_sea() -> None:
    table, _ = shifted("alkalinity", *((4, pressure, -230.0) for pressure in (800, 1000, 1250, 1500)))
    assert [mark.rows.tolist() for mark in marks_of(NAME, table)] == []


def test_one_bottle_alone_and_one_quantity_alone_are_not_judged() -> None:
    single = ocean(n_cast=1, levels=(1000,), changes={"alkalinity": lambda at: 1900.0 + 0.0 * at.p})
    assert marks_of(NAME, single) == []
    assert marks_of(NAME, ocean().drop_columns(["dic"])) == []


def test_neighbours_that_are_wrong_in_their_own_way_are_no_support() -> None:
    """Two bottles above each other, one far below and one far above: each is unlike the other."""
    table, rows = shifted("alkalinity", (4, 1000, -2100.0), (4, 1250, 480.0))
    (mark,) = marks_of(NAME, table)
    assert set(mark.rows.tolist()) == rows == {row(4, 1000), row(4, 1250)}
