from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

import pytest

from pipeline import tables as known
from pipeline.archive import Account, accounts, open_archive, publish
from pipeline.archive.accounting import SOLVED, imbalances
from pipeline.archive.provenance import DeliveredFile, Provenance
from pipeline.mixing.status import MixingStatus
from pipeline.problems import BrokenPromise
from pipeline.process import process_cruise
from pipeline.settings import Settings
from tests.invented import EXPOCODE, bottle_file, cast_file, read, zipped

from .invented import provenance, tables

if TYPE_CHECKING:
    from pathlib import Path

    import pyarrow as pa


def rows(**columns: list[Any]) -> pa.Table:
    return known.with_columns(known.empty([]), columns)


def test_every_row_is_counted_in_every_step() -> None:
    table = rows(
        nitrate_check=[1, 3, 4, 9, 3, None],
        phosphate_check=[1, 1, 3, 9, 4, None],
        conservative_temperature=[1.0, 2.0, None, 4.0, 5.0, 6.0],
        oxygen_solubility=[1.0] * 6,  # needs no oxygen: no tracer by itself
        aou=[None, 1.0, None, None, 1.0, None],
        n_star=[None, 1.0, None, 2.0, None, None],
        mixing_status=["solved", "solved", "incomplete", "outside", "outside", "solved"],
    )
    first, second = accounts(table, [("a", 4, ["no-station", "field-count", "no-station"]), ("b", 2, [])])
    assert first == Account(
        rejected={"field-count": 1, "no-station": 2},
        unquestioned=2, doubted=1, faulted=1, with_teos10=3, with_tracers=2,
        mixing={"incomplete": 1, "outside": 1, "solved": 2},
    )  # fmt: skip
    assert (first.kept, first.given_to_mixing, first.resolved) == (4, 4, 2)
    assert first.unresolved == {"incomplete": 1, "outside": 1}
    assert second == Account(
        unquestioned=1, faulted=1, with_teos10=2, with_tracers=1, mixing={"outside": 1, "solved": 1}
    )


def test_a_table_of_other_rows_than_the_files_breaks_the_promise() -> None:
    table = rows(nitrate_check=[1, 1])
    with pytest.raises(BrokenPromise, match="a: 3 rows were kept, 2 are in the table"):
        accounts(table, [("a", 3, [])])
    with pytest.raises(BrokenPromise, match="resolved and not resolved: found 1, expected 2"):
        accounts(rows(mixing_status=["solved", None]), [("a", 2, [])])


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"unquestioned": 9}, "unquestioned, doubted and faulted: found 11, expected 10"),
        ({"rejected": {"no-cast": 1}}, "rejected by reason: found 1, expected 2"),
        ({"mixing": {"solved": 9}}, "resolved and not resolved: found 9, expected 10"),
        ({"with_teos10": 11}, "with TEOS-10: found 11, expected at most 10"),
        ({"with_tracers": -1}, "found a count below zero"),
    ],
)
def test_what_does_not_add_up_is_told_and_not_published(
    change: dict[str, Any], said: str, tmp_path: Path
) -> None:
    good = Account({"no-cast": 2}, 8, 1, 1, 10, 10, {"solved": 10})
    assert imbalances(good, 12, 10, 2) == []
    assert imbalances(replace(good, **change), 12, 10, 2) == [said]
    assert imbalances(good, 13, 10, 2) == ["rows kept and rejected: found 12, expected 13"]
    made = provenance()
    bottle, casts = made.deliveries
    whole = Account({"no-cast": bottle.rejected}, bottle.kept, 0, 0, 0, 0)
    spoiled = replace(whole, faulted=1)
    with pytest.raises(BrokenPromise, match=r"a_hy1.csv: unquestioned, doubted and faulted"):
        publish(
            open_archive(tmp_path, create=True),
            replace(made, deliveries=(replace(bottle, account=spoiled), casts)),
            tables(),
        )


def test_samples_resolved_must_be_those_that_the_accounts_tell(tmp_path: Path) -> None:
    made = provenance()
    bottle, casts = made.deliveries
    told = Account({"no-cast": bottle.rejected}, bottle.kept, mixing={"solved": bottle.kept})
    cruise = tables()
    status = ["solved"] * (bottle.kept - 1) + ["outside"]
    cruise["samples"] = known.with_columns(cruise["samples"], {"mixing_status": status})
    with pytest.raises(BrokenPromise, match="found 11 samples resolved, expected 12"):
        publish(
            open_archive(tmp_path, create=True),
            replace(made, deliveries=(replace(bottle, account=told), casts)),
            cruise,
        )


def test_the_label_of_a_solved_sample_is_the_solver_s() -> None:
    assert MixingStatus.SOLVED.label == SOLVED


def test_a_cruise_of_several_files_is_accounted_for_file_by_file() -> None:
    one = read(bottle_file({"SALNTY": "12623"}, {"STNNBR": ""}, {}), "a_hy1.csv")
    other = read(bottle_file({"STNNBR": "2"}), "b_hy1.csv")
    members = {"x_ct1.csv": cast_file(), "y_ct1.csv": cast_file(header={"STNNBR": "2"}), "../z_ct1.csv": b""}
    casts = read(zipped(members), "c_ct1.zip")
    made = process_cruise(EXPOCODE, [casts, one, other], Settings())
    zipped_account, first, second = made.accounts
    assert zipped_account.rejected == {"member-path": 1}
    assert zipped_account.kept == 4
    assert first.rejected == {"no-station": 1}
    assert (first.kept, first.faulted) == (2, 1)
    assert (second.kept, second.with_teos10, second.given_to_mixing) == (1, 1, 0)


def test_an_account_survives_json_and_older_records_have_none() -> None:
    account = Account({"no-cast": 2}, 8, 1, 1, 10, 10, {"solved": 10})
    file = DeliveredFile("a", "0" * 64, 1, "bottle", 12, 10, 2, account=account)
    record = replace(provenance(), deliveries=(file,))
    assert Provenance.from_json(record.to_json()) == record
    older = record.to_json().replace('"account":{', '"accounts":{')
    (read_file,) = Provenance.from_json(older).deliveries
    assert read_file == replace(file, account=None)
    later = record.to_json().replace('"doubted"', '"weather":"fair","doubted"')
    assert Provenance.from_json(later) == record
    with pytest.raises(ValueError, match="no provenance record"):
        Provenance.from_json(record.to_json().replace('"account":{', '"account":[1],"x":{'))
