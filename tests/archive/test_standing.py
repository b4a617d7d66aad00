from __future__ import annotations

from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.archive.standing import Mark, Standing
from pipeline.tables import TABLE_NAMES

MARKS = st.builds(Mark, st.integers(1, 4), st.sampled_from("ab"))
STANDINGS = st.builds(
    Standing,
    st.dictionaries(st.sampled_from(TABLE_NAMES), MARKS | st.none()),
    st.dictionaries(
        st.integers(1, 4),
        st.frozensets(st.sampled_from(TABLE_NAMES), min_size=1) | st.just(frozenset(TABLE_NAMES)),
    ),
)
ALL = frozenset(TABLE_NAMES)


def same(revision: int, tables: tuple[str, ...] = TABLE_NAMES) -> dict[str, Mark | None]:
    return dict.fromkeys(tables, Mark(revision, "a"))


@settings(deadline=None, derandomize=True, max_examples=500)
@given(STANDINGS)
def test_every_published_table_has_one_fate_and_nothing_kept_is_overwritten(standing: Standing) -> None:
    fates = [*standing.leftovers, *standing.damaged, *(table for table, _ in standing.outgoing)]
    assert sorted(fates) == sorted(standing.published)
    assert standing.next > standing.last
    assert standing.next not in standing.superseded
    assert all(revision < standing.next for _, revision in standing.outgoing)
    # What no killed run can leave is never taken for its leftovers.
    if standing.current is not None:
        assert not standing.leftovers
        assert standing.last >= standing.current.revision


def test_nothing() -> None:
    standing = Standing({}, {})
    assert (standing.current, standing.last, standing.next) == (None, 0, 1)


def test_whole() -> None:
    standing = Standing(same(3), {1: ALL, 2: ALL})
    assert standing.current == Mark(3, "a")
    assert (standing.last, standing.next, standing.leftovers) == (3, 4, ())
    assert standing.outgoing == tuple((table, 3) for table in TABLE_NAMES)


def test_killed_while_the_old_is_moved_aside() -> None:
    standing = Standing(same(2, TABLE_NAMES[2:]), {1: ALL, 2: frozenset(TABLE_NAMES[:2])})
    assert (standing.current, standing.last, standing.next) == (None, 2, 3)
    assert standing.leftovers == ()
    assert standing.outgoing == tuple((table, 2) for table in TABLE_NAMES[2:])


def test_killed_while_the_new_is_moved_in() -> None:
    standing = Standing(same(3, TABLE_NAMES[:2]), {1: ALL, 2: ALL})
    assert (standing.last, standing.next) == (2, 3)
    assert standing.leftovers == TABLE_NAMES[:2]


def test_copied_but_not_yet_removed_as_an_object_store_moves() -> None:
    standing = Standing(same(2, TABLE_NAMES[1:]), {2: frozenset(TABLE_NAMES[:2])})
    assert (standing.last, standing.next, standing.leftovers) == (2, 3, ())


def test_five_tables_of_two_publications_are_not_whole() -> None:
    published: dict[str, Mark | None] = {**same(2), "rejects": Mark(2, "b")}
    assert Standing(published, {}).current is None
    assert Standing(published, {}).last == 0
