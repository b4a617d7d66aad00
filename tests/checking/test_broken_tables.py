"""No table, however broken, makes a check raise, warn or take long."""

from __future__ import annotations

import time
from typing import TYPE_CHECKING

import numpy as np
import pytest

from pipeline.checking import CHECKS, check
from pipeline.tables import floats, with_columns
from pipeline.usable import Rows
from pipeline.variables import MEASURED
from tests.checking.cases import SETTINGS, clean_casts, clean_samples

if TYPE_CHECKING:
    import pyarrow as pa

GARBAGE = np.array([np.nan, 0.0, -5.0, 3.5, 35.0, 35.0, 1e5, -1e300, 1e300, np.inf, -np.inf, 5e-324])
KINDS = {"samples": clean_samples, "levels": clean_casts}


def garbage(kind: str, seed: int) -> pa.Table:
    table = KINDS[kind]().slice(0, 800)
    random = np.random.default_rng(seed)
    names = [name for name in (*MEASURED, "bottom_depth") if name in table.column_names]
    return with_columns(table, {name: random.choice(GARBAGE, table.num_rows) for name in names})


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("seed", range(3))
def test_garbage_is_told_and_nothing_breaks(kind: str, seed: int) -> None:
    table = garbage(kind, seed)
    result = check(table, SETTINGS)
    assert result.findings
    assert all(len(flags) == table.num_rows for flags in result.flags.values())


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("count", [0, 1, 2, 3])
def test_few_rows_are_enough(kind: str, count: int) -> None:
    assert check(KINDS[kind]().slice(0, count), SETTINGS).findings == ()


@pytest.mark.parametrize("kind", KINDS)
def test_a_table_without_any_value_says_nothing(kind: str) -> None:
    table = KINDS[kind]().slice(0, 200)
    names = [name for name in (*MEASURED, "time", "bottom_depth") if name in table.column_names]
    empty = with_columns(table, {name: [None] * table.num_rows for name in names})
    flags = [name for name in empty.column_names if name.endswith("_flag")]
    assert check(with_columns(empty, {name: [9] * empty.num_rows for name in flags}), SETTINGS).findings == ()


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("name", CHECKS)
def test_no_check_takes_long_over_one_value_in_every_row(kind: str, name: str) -> None:
    table = KINDS[kind]()
    names = [column for column in MEASURED if column in table.column_names and column != "pressure"]
    table = with_columns(table, {column: np.full(table.num_rows, 35.0) for column in names})
    start = time.process_time()
    CHECKS[name].run(Rows(table, SETTINGS.use), SETTINGS)
    assert time.process_time() - start < 2.0


def test_the_order_of_the_rows_changes_no_doubt() -> None:
    table = clean_casts().slice(0, 800)
    names = ("temperature", "ctd_salinity", "ctd_oxygen")
    hit = np.random.default_rng(1).random((len(names), table.num_rows)) < 0.05
    table = with_columns(
        table, {name: np.where(hit[i], 20.0, floats(table, name)) for i, name in enumerate(names)}
    )
    order = np.random.default_rng(0).permutation(table.num_rows)
    for name in ("spike", "gradient", "density-inversion", "stuck-values"):
        straight, mixed = (
            {
                (mark.variable, str(mark.severity), line)
                for mark in CHECKS[name].run(Rows(rows, SETTINGS.use), SETTINGS)
                for line in np.array(rows.column("line").to_pylist())[mark.rows].tolist()
            }
            for rows in (table, table.take(order))
        )
        assert straight == mixed, name
        assert straight or name == "stuck-values"
