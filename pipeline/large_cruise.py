"""The CTD levels of a cruise that has too many to be held: described in blocks of whole casts.

What is asked of a value and of a cast is asked as of any cruise, and what is asked of the casts as they follow
one another as well: for that a row of each is enough. What is asked of all levels together (whether a column
looks like another unit, casts that repeat another, the casts before and after) is asked within a block. Blocks
follow from the levels and the settings alone, so that the same deliveries give the same tables.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import replace
from typing import TYPE_CHECKING

from pipeline.archive.accounting import account
from pipeline.checking import CHECKS, TRACK_CHECKS, check
from pipeline.process import described
from pipeline.reading import DeliveryKind, stack
from pipeline.tables import arranged

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator, Sequence

    import pyarrow as pa

    from pipeline.archive import Account
    from pipeline.findings import Finding
    from pipeline.reading import Delivery
    from pipeline.settings import Settings

    Numbered = tuple[int, pa.Table]  # a cast, and the number of its delivery


def describe_in_blocks(
    expocode: str,
    deliveries: Sequence[Delivery],
    columns: pa.Table,
    casts: Iterable[Numbered],
    settings: Settings,
    keep: Callable[[pa.Table], None],
) -> tuple[tuple[Finding, ...], tuple[Account, ...]]:
    """Describe the CTD levels of a cruise and return what was noticed, and the account of each delivery.

    Parameters
    ----------
    expocode
        The cruise.
    deliveries
        Those of CTD casts, (n_delivery,), each with the first row of each of its casts as its table.
    columns
        A table of no rows with the columns of all casts together.
    casts
        All casts whole, as read, and which delivery each is of, in their order.
    settings
        The effective settings.
    keep
        Is given the described rows, block after block: tables of the same columns.

    """
    corrections = settings.corrections.get(expocode, {})
    told = [finding for delivery in deliveries for finding in delivery.findings]
    track = check(stack([delivery.table for delivery in deliveries]), settings, told, TRACK_CHECKS)
    findings = list(track.findings)
    within = CHECKS.keys() - set(TRACK_CHECKS)
    sums = [account(columns, [reject.reason for reject in delivery.rejects]) for delivery in deliveries]
    for block in blocks(casts, settings.reading.levels_at_once):
        table = stack([columns, *(table for _, table in block)]).combine_chunks()
        rows, noticed = described(table, DeliveryKind.CTD, settings, corrections, told, within)
        findings += noticed
        start = 0
        for number, count in _counts(block):
            sums[number] = _joined(sums[number], account(rows.slice(start, count), ()))
            start += count
        keep(arranged(rows))
    return tuple(findings), tuple(sums)


def blocks(casts: Iterable[Numbered], most_levels: int) -> Iterator[list[Numbered]]:
    """Yield casts, in their order, in blocks of at most so many levels; a longer cast is a block of its own."""
    block: list[Numbered] = []
    levels = 0
    for number, table in casts:
        if block and levels + table.num_rows > most_levels:
            yield block
            block, levels = [], 0
        block.append((number, table))
        levels += table.num_rows
    if block:
        yield block


def _counts(block: Iterable[Numbered]) -> list[tuple[int, int]]:
    """Return the deliveries of a block, as they follow one another, and how many levels each has in it."""
    counts: Counter[int] = Counter()
    for number, table in block:
        counts[number] += table.num_rows
    return list(counts.items())


def _joined(one: Account, other: Account) -> Account:
    """Return the account of rows that were accounted for in two parts; only one knows of rejected ones."""
    return replace(
        one,
        unquestioned=one.unquestioned + other.unquestioned,
        doubted=one.doubted + other.doubted,
        faulted=one.faulted + other.faulted,
        with_teos10=one.with_teos10 + other.with_teos10,
        with_tracers=one.with_tracers + other.with_tracers,
    )
