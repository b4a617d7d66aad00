from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline import tables as known
from pipeline.archive.changes import TableChanges, compare_tables
from pipeline.archive.listing import Change
from pipeline.archive.pairing import pair_levels
from pipeline.problems import BrokenPromise
from pipeline.tables import CHANGES, registry_field

VALUES = ("pressure", "nitrate", "phosphate", "bottle_oxygen")
FLAGS = ("nitrate_flag", "phosphate_flag")


def samples(rows: list[dict[str, Any]], extra: dict[str, pa.Array] | None = None) -> pa.Table:
    """Return a table of samples; what a row does not say is missing."""
    names = ["expocode", "station", "cast", "sample", "file", "line", *VALUES, *FLAGS, "aou"]
    given_rows = [{"expocode": "ZZV120090214", "file": "a_hy1.csv", **row} for row in rows]
    columns = {name: [row.get(name) for row in given_rows] for name in names}
    table = known.with_columns(known.empty([]), columns)
    for name, values in (extra or {}).items():
        table = table.append_column(name, values)
    return table


def levels(*casts: tuple[str, list[float]], shift: float = 0.0) -> pa.Table:
    rows = [(station, p + shift) for station, pressures in casts for p in pressures]
    return known.with_columns(
        known.empty([]),
        {
            "expocode": ["ZZV120090214"] * len(rows),
            "station": [station for station, _ in rows],
            "cast": [1] * len(rows),
            "pressure": [p for _, p in rows],
            "temperature": [20.0 - position for position in range(len(rows))],
        },
    )


def said(changes: TableChanges) -> list[tuple[Any, ...]]:
    """Return what is listed, as (change, station, cast, sample, variable, before, after)."""
    names = ("change", "station", "cast", "sample", "variable", "before", "after")
    return [tuple(row[name] for name in names) for row in changes.listing.to_pylist()]


ONE = {
    "station": "1",
    "cast": 1,
    "sample": "7",
    "line": 4,
    "nitrate": 30.0,
    "nitrate_flag": 2,
    "pressure": 10.0,
}


@pytest.mark.parametrize(
    ("change", "expected"),
    [
        ({}, []),
        ({"line": 9}, []),  # where a row stands in the file is no value of it
        ({"nitrate": 31.5}, [("value", "1", 1, "7", "nitrate", "30", "31.5")]),
        (
            {"nitrate": np.nextafter(30.0, 31.0)},
            [("value", "1", 1, "7", "nitrate", "30", "30.000000000000004")],
        ),
        ({"nitrate": None}, [("vanished", "1", 1, "7", "nitrate", "30", None)]),
        ({"phosphate": -0.0}, [("appeared", "1", 1, "7", "phosphate", None, "-0")]),
        ({"nitrate_flag": 3}, [("flag", "1", 1, "7", "nitrate_flag", "2", "3")]),
        ({"nitrate_flag": None}, [("flag", "1", 1, "7", "nitrate_flag", "2", None)]),
        (
            {"sample": "8"},
            [("gone", "1", 1, "7", None, None, None), ("added", "1", 1, "8", None, None, None)],
        ),
        ({"aou": 12.0}, []),  # computed: counted, not listed
    ],
)
def test_one_change_of_one_sample(change: dict[str, Any], expected: list[tuple[Any, ...]]) -> None:
    changes = compare_tables("samples", samples([ONE]), samples([{**ONE, **change}]))
    assert said(changes) == expected
    assert changes.is_same == (not expected and "aou" not in change)


def test_the_listing_has_the_columns_of_the_registry() -> None:
    changes = compare_tables("samples", samples([ONE]), samples([{**ONE, "nitrate": 31.5}]))
    assert changes.listing.schema == pa.schema([registry_field(name) for name in CHANGES])
    (row,) = changes.listing.to_pylist()
    assert (row["difference"], row["pressure"], row["line"], row["occurrence"]) == (1.5, 10.0, 4, 1)


def test_computed_columns_are_counted_and_not_listed() -> None:
    before = samples([{**ONE, "sample": str(n), "aou": 10.0} for n in range(3)])
    after = samples([{**ONE, "sample": str(n), "aou": 10.0 - n} for n in range(3)])
    changes = compare_tables("samples", before, after)
    assert changes.listing.num_rows == 0
    (aou,) = changes.computed
    assert (aou.name, aou.count, aou.largest) == ("aou", 2, -2.0)
    assert aou.at == {"station": "1", "cast": 1, "sample": "2", "pressure": 10.0}


def test_a_sample_that_stands_twice_is_paired_by_order_and_this_is_told() -> None:
    before = samples([ONE, {**ONE, "nitrate": 1.0}, {**ONE, "station": "2"}])
    after = samples([{**ONE, "station": "2"}, ONE, {**ONE, "nitrate": 2.0}, {**ONE, "nitrate": 3.0}])
    changes = compare_tables("samples", before, after)
    assert said(changes) == [
        ("added", "1", 1, "7", None, None, None),
        ("value", "1", 1, "7", "nitrate", "1", "2"),
    ]
    assert changes.listing.column("occurrence").to_pylist() == [3, 2]
    assert changes.pairing.repeated_keys == 1


def test_samples_without_a_number_are_one_key() -> None:
    nameless = {**ONE, "sample": None}
    changes = compare_tables("samples", samples([nameless]), samples([nameless, {**ONE, "sample": ""}]))
    assert said(changes) == [("added", "1", 1, "", None, None, None)]


def test_columns_that_come_and_go_are_told_once() -> None:
    before = samples([ONE, {**ONE, "sample": "8"}], {"MERCURY": pa.array([1.0, None])})
    after = samples([ONE, {**ONE, "sample": "8"}], {"ARGON": pa.array([1.0, 2.0])})
    after = after.append_column(registry_field("n_star"), pa.array([1.0, 2.0]))
    changes = compare_tables("samples", before, after)
    assert said(changes) == [
        ("column-gone", None, None, None, "MERCURY", "1 value", None),
        ("column-added", None, None, None, "ARGON", None, "2 values"),
    ]
    assert changes.computed_added == ("n_star",)


def test_a_column_that_turned_into_text_is_compared_as_numbers_where_it_holds_some() -> None:
    rows = [{**ONE, "sample": str(n)} for n in range(4)]
    before = samples(rows, {"MERCURY": pa.array([1.0, 2.5, None, 4.0])})
    after = samples(rows, {"MERCURY": pa.array(["1.00", "2.6", None, "lost"])})
    changes = compare_tables("samples", before, after)
    assert said(changes) == [
        ("value", "1", 1, "1", "MERCURY", "2.5", "2.6"),
        ("value", "1", 1, "3", "MERCURY", "4", "lost"),
    ]
    back = compare_tables("samples", after, before)
    assert [row[-2:] for row in said(back)] == [("2.6", "2.5"), ("lost", "4")]


def converted(table: pa.Table, unit: str, numbers: list[float], factor: float) -> pa.Table:
    """Return a table whose oxygen came as OXYGEN in another unit."""
    oxygen = registry_field("bottle_oxygen").with_metadata({"delivered_units": unit, "conversion": "times"})
    position = table.column_names.index("bottle_oxygen")
    table = table.set_column(position, oxygen, pa.array([n * factor for n in numbers]))
    return table.append_column("OXYGEN", pa.array(numbers))


def test_a_converted_quantity_is_told_once_as_delivered() -> None:
    before = converted(samples([ONE]), "ML/L", [5.0], 43.57)
    after = converted(samples([ONE]), "ML/L", [5.5], 43.57)
    changes = compare_tables("samples", before, after)
    assert said(changes) == [("value", "1", 1, "7", "OXYGEN", "5", "5.5")]
    assert [one.name for one in changes.computed] == ["bottle_oxygen"]
    rounded = converted(samples([ONE]), "ML/L", [5.0], 43.58)  # another density, the same delivered number
    assert said(compare_tables("samples", before, rounded)) == []


def test_quantities_in_two_units_are_compared_in_the_registry_s() -> None:
    before = converted(samples([ONE]), "ML/L", [5.0], 40.0)
    after = converted(samples([ONE]), "MG/L", [7.0], 30.0)
    changes = compare_tables("samples", before, after)
    assert said(changes) == [("value", "1", 1, "7", "bottle_oxygen", "200", "210")]


def test_levels_are_paired_by_pressure_and_a_new_one_is_added() -> None:
    before = levels(("1", [0.0, 10.0, 20.0]), ("2", [0.0]))
    after = levels(("1", [-0.0, 10.0, 15.0, 20.0]))
    changes = compare_tables("casts", before, after)
    listed = [(r["change"], r["station"], r["pressure"], r["variable"]) for r in changes.listing.to_pylist()]
    assert listed == [
        ("gone", "2", 0.0, None),
        ("added", "1", 15.0, None),
        ("value", "1", 20.0, "temperature"),  # it was 18 and is 17
    ]


def test_a_cast_with_other_pressures_throughout_is_paired_by_order() -> None:
    before = levels(("1", [0.0, 10.0, 20.0]), ("2", [0.0, 10.0]))
    after = pa.concat_tables([levels(("1", [0.0, 10.0, 20.0]), shift=0.5), before.slice(3)])
    changes = compare_tables("casts", before, after)
    assert [(one.name, one.changed, one.largest) for one in changes.delivered] == [("pressure", 3, 0.5)]
    assert changes.pairing.casts_by_order == 1
    assert {row["change"] for row in changes.listing.to_pylist()} == {"value"}


def test_empty_tables_and_a_table_that_cannot_be_compared() -> None:
    assert compare_tables("samples", samples([]), samples([])).is_same
    assert said(compare_tables("samples", samples([ONE]), samples([]))) == [
        ("gone", "1", 1, "7", None, None, None)
    ]
    assert compare_tables("casts", levels(), levels(("1", [0.0, 1.0]))).rows_after == 2
    with pytest.raises(BrokenPromise, match="found the table 'mixtures'"):
        compare_tables("mixtures", samples([]), samples([]))


@dataclass
class Edits:
    """A table, what was done to it, and what must be told of it."""

    before: list[dict[str, Any]]
    after: list[dict[str, Any]] = field(default_factory=list)
    expected: set[tuple[Any, ...]] = field(default_factory=set)


NUMBERS = st.floats(allow_nan=False, width=64) | st.none()


@st.composite
def edits(draw: st.DrawFn) -> Edits:
    """Draw a table of unique keys, and edits of it: values, flags, rows gone, rows added, rows in another order."""
    keys = draw(
        st.lists(
            st.tuples(st.sampled_from("1 2 x 02".split()), st.integers(1, 3), st.sampled_from("1 2 3 01 a".split())),
            unique=True, max_size=12,
        )
    )  # fmt: skip
    new = draw(
        st.lists(st.tuples(st.just("9"), st.integers(1, 2), st.sampled_from("1 2 3".split())), unique=True)
    )

    def row(key: tuple[str, int, str]) -> dict[str, Any]:
        values = {name: draw(NUMBERS) for name in ("nitrate", "phosphate")}
        flags = {name: draw(st.sampled_from([None, 2, 3, 9])) for name in FLAGS}
        return {"station": key[0], "cast": key[1], "sample": key[2], **values, **flags}

    made = Edits([row(key) for key in keys])
    for key, old in zip(keys, made.before, strict=True):
        if draw(st.sampled_from([False, False, True])):
            made.expected.add(("gone", *key, None, None, None))
            continue
        changed = dict(old)
        for name in draw(st.sets(st.sampled_from(["nitrate", "phosphate", *FLAGS]))):
            changed[name] = draw(NUMBERS if name in VALUES else st.sampled_from([None, 2, 3, 9]))
            if changed[name] != old[name]:
                what = Change.VALUE
                if name in FLAGS:
                    what = Change.FLAG
                elif old[name] is None:
                    what = Change.APPEARED
                elif changed[name] is None:
                    what = Change.VANISHED
                made.expected.add((what.value, *key, name, old[name], changed[name]))
        made.after.append(changed)
    for key in new:
        made.after.append(row(key))
        made.expected.add(("added", *key, None, None, None))
    made.after = draw(st.permutations(made.after))
    return made


@settings(deadline=None, derandomize=True, max_examples=200)
@given(edits())
def test_what_was_edited_is_exactly_what_is_told(made: Edits) -> None:
    changes = compare_tables("samples", samples(made.before), samples(made.after))
    told = said(changes)
    numbers = {(*row[:5], *(None if text is None else float(text) for text in row[5:])) for row in told}
    assert numbers == made.expected
    assert len(told) == len(made.expected)
    turned = said(compare_tables("samples", samples(made.after), samples(made.before)))
    other = {"gone": "added", "added": "gone", "appeared": "vanished", "vanished": "appeared"}
    assert sorted(map(str, turned)) == sorted(
        str((other.get(row[0], row[0]), *row[1:5], row[6], row[5])) for row in told
    )


KEYS = st.tuples(st.sampled_from("1 2".split()), st.sampled_from([1.0, 2.0, 3.0, -0.0, 0.0]))


@settings(deadline=None, derandomize=True, max_examples=150)
@given(st.lists(KEYS, max_size=12), st.lists(KEYS, max_size=12))
def test_levels_are_paired_as_a_slow_loop_pairs_them(
    before: list[tuple[str, float]], after: list[tuple[str, float]]
) -> None:
    one, other = (levels(*((station, [pressure]) for station, pressure in keys)) for keys in (before, after))
    found = pair_levels(one, other)
    # every row stands in one place
    assert sorted([*found.before, *found.gone]) == list(range(len(before)))
    assert sorted([*found.after, *found.added]) == list(range(len(after)))
    assert list(found.after) == sorted(found.after)
    shifted = {station for station in "12" if _is_shifted(station, before, after)}
    assert found.casts_by_order == len(shifted)

    def name(keys: list[tuple[str, float]], row: int) -> tuple[Any, ...]:
        station, pressure = keys[row]
        key = (station,) if station in shifted else (station, pressure)
        same = [n for n, (s, p) in enumerate(keys) if ((s,) if s in shifted else (s, p)) == key]
        return (*key, same.index(row))

    expected = {name(before, row): row for row in range(len(before))}
    pairs = {(expected[key], row) for row in range(len(after)) if (key := name(after, row)) in expected}
    assert set(zip(found.before.tolist(), found.after.tolist(), strict=True)) == pairs


def _is_shifted(station: str, before: list[tuple[str, float]], after: list[tuple[str, float]]) -> bool:
    one, other = ([p for s, p in keys if s == station] for keys in (before, after))
    shared = sum(min(one.count(p), other.count(p)) for p in set(one))
    return 0 < len(one) == len(other) and 2 * shared < len(one)
