"""One cruise from what was delivered to the archive's five tables: the composition of the rooms.

Everything here is a pure function of its arguments: no clock, no environment, no file system.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import combinations
from typing import TYPE_CHECKING, Any

import pyarrow as pa
import pyarrow.compute as pc

from pipeline import seawater, tracers
from pipeline.archive import accounts
from pipeline.checking import CHECKS, Checked, check
from pipeline.corrections import corrected, correction_findings
from pipeline.findings import Finding, Severity
from pipeline.mixing import absent_properties, resolve
from pipeline.problems import DeliveryProblem
from pipeline.reading import Delivery, DeliveryKind, stack
from pipeline.tables import (
    CASTS_CORE,
    MIXING,
    MIXTURES,
    SAMPLES_CORE,
    arranged,
    empty,
    findings_table,
    rejects_table,
    with_columns,
    with_metadata,
)
from pipeline.usable import Rows
from pipeline.working import working_columns

if TYPE_CHECKING:
    from collections.abc import Collection, Iterable, Mapping, Sequence

    from pipeline.archive import Account
    from pipeline.crossover_settings import Correction
    from pipeline.mixing import Catalogue
    from pipeline.settings import Settings

_KEYS = {DeliveryKind.BOTTLE: ("station", "cast", "sample"), DeliveryKind.CTD: ("station", "cast")}
_CORES = {DeliveryKind.BOTTLE: SAMPLES_CORE, DeliveryKind.CTD: CASTS_CORE}


@dataclass(frozen=True, slots=True)
class ProcessedCruise:
    """The five tables of one cruise, by name, and what was noticed on the way."""

    tables: Mapping[str, pa.Table]
    findings: tuple[Finding, ...]
    accounts: tuple[Account, ...] = ()  # what became of the rows of each delivery, in their order


@dataclass(frozen=True, slots=True)
class Casts:
    """The CTD levels of a cruise, described: their table as the archive keeps it, or what stands for a large one."""

    table: Any  # has ``num_rows`` and ``schema``, as a table
    findings: tuple[Finding, ...]
    accounts: tuple[Account, ...]  # of each CTD delivery, in their order


@dataclass(frozen=True, slots=True)
class DescribedCruise:
    """The rows of one cruise before their sources are asked for, and all that was noticed in them."""

    samples: pa.Table
    casts: Casts
    findings: tuple[Finding, ...]  # beside those of reading


def describe_cruise(
    expocode: str, deliveries: Sequence[Delivery], settings: Settings, casts: Casts | None = None
) -> DescribedCruise:
    """Check the rows of one cruise and compute every quantity, for a run and for a look at a file alike.

    Parameters
    ----------
    expocode, deliveries, settings, casts
        As of `process_cruise`.

    """
    corrections = settings.corrections.get(expocode, {})
    samples, noticed = _described(deliveries, DeliveryKind.BOTTLE, settings, corrections)
    casts = casts or _casts(deliveries, settings, corrections)
    told = correction_findings(expocode, {"sample": samples, "CTD level": casts.table}, corrections)
    return DescribedCruise(samples, casts, (*noticed, *casts.findings, *told))


def process_cruise(
    expocode: str,
    deliveries: Sequence[Delivery],
    settings: Settings,
    catalogue: Catalogue | None = None,
    casts: Casts | None = None,
) -> ProcessedCruise:
    """Make the tables of one cruise.

    Parameters
    ----------
    expocode
        The cruise.
    deliveries
        The parts of its delivered files that belong to it, no two of which hold the same sample or cast.
    settings
        The effective settings.
    catalogue
        The source waters, or None: then no sample is resolved.
    casts
        The CTD levels, where they were described before; else they are here.

    """
    cruise = describe_cruise(expocode, deliveries, settings, casts)
    samples, casts = cruise.samples, cruise.casts
    mixtures = empty(MIXTURES)
    mixing_findings: tuple[Finding, ...] = ()
    if catalogue is not None:
        mixing_findings = absent_properties(samples, catalogue, settings)
        resolution = resolve(samples, catalogue, settings)
        mixing_findings += resolution.findings
        samples = with_columns(samples, resolution.columns)
        mixtures = resolution.mixtures
    else:
        samples = with_columns(samples, {name: [None] * samples.num_rows for name in MIXING})
    delivered = [finding for delivery in deliveries for finding in delivery.findings]
    findings = (*delivered, *cruise.findings, *mixing_findings)
    return ProcessedCruise(
        tables={
            "samples": arranged(samples),
            "casts": casts.table,
            "mixtures": mixtures,
            "findings": findings_table(expocode, findings),
            "rejects": rejects_table(expocode, [r for d in deliveries for r in d.rejects]),
        },
        findings=findings,
        accounts=_in_order(deliveries, _accounts(deliveries, DeliveryKind.BOTTLE, samples), casts.accounts),
    )


def _casts(
    deliveries: Sequence[Delivery], settings: Settings, corrections: Mapping[str, Correction]
) -> Casts:
    table, findings = _described(deliveries, DeliveryKind.CTD, settings, corrections)
    return Casts(arranged(table), findings, tuple(_accounts(deliveries, DeliveryKind.CTD, table)))


def _described(
    deliveries: Sequence[Delivery],
    kind: DeliveryKind,
    settings: Settings,
    corrections: Mapping[str, Correction],
) -> tuple[pa.Table, tuple[Finding, ...]]:
    """Return the rows of one kind, described; of a kind that nobody delivered a table without rows."""
    mine = [delivery for delivery in deliveries if delivery.kind is kind]
    tables = [delivery.table for delivery in mine]
    table = stack(tables) if tables else empty((*_CORES[kind], "pressure"))
    told = [finding for delivery in mine for finding in delivery.findings]
    return described(table, kind, settings, corrections, told, CHECKS if tables else ())


def described(
    table: pa.Table,
    kind: DeliveryKind,
    settings: Settings,
    corrections: Mapping[str, Correction],
    told: Sequence[Finding],
    checks: Collection[str],
) -> tuple[pa.Table, tuple[Finding, ...]]:
    """Return rows checked as delivered, corrected, and with every quantity computed from them, and what was noticed.

    Parameters
    ----------
    table
        Whole casts, as read.
    kind, settings, corrections
        What they are, the effective settings, and its corrections of the cruise.
    told
        What reading noticed of them.
    checks
        Which checks are made; without any there are no check flags either.

    """
    checked = check(table, settings, told, checks) if checks else Checked({}, ())
    table = with_columns(table, checked.flags)
    table = corrected(table, corrections)
    table = with_columns(table, working_columns(Rows(table, settings.use)))
    table = with_columns(table, seawater.columns(table, Rows(table, settings.use).usable))
    table = with_columns(table, tracers.columns(Rows(table, settings.use).usable, settings.tracers))
    table = with_metadata(table, tracers.forms(settings.tracers))
    if kind is DeliveryKind.CTD:
        return table, checked.findings
    own = tracers.sample_tracers(Rows(table, settings.use), settings)
    table = with_metadata(with_columns(table, own.columns), own.forms)
    return table, (*checked.findings, *own.findings)


def _accounts(deliveries: Sequence[Delivery], kind: DeliveryKind, table: pa.Table) -> list[Account]:
    """Return the account of every delivery of a kind; the table has its rows in the order of the deliveries."""
    return accounts(
        table,
        [
            (d.name, d.table.num_rows, [reject.reason for reject in d.rejects])
            for d in deliveries
            if d.kind is kind
        ],
    )


def _in_order(
    deliveries: Sequence[Delivery], bottles: Iterable[Account], casts: Iterable[Account]
) -> tuple[Account, ...]:
    """Return the accounts of two kinds of delivery in the order of all deliveries."""
    by_kind = {DeliveryKind.BOTTLE: iter(bottles), DeliveryKind.CTD: iter(casts)}
    return tuple(next(by_kind[delivery.kind]) for delivery in deliveries)


def shared_rows(one: Delivery, other: Delivery) -> int:
    """Return how many samples (or casts) two deliveries of the same kind both hold."""
    if one.kind is not other.kind:
        return 0
    keys = _KEYS[one.kind]
    return len(_row_keys(one.table, keys) & _row_keys(other.table, keys))


def settle_editions(
    deliveries: Sequence[Delivery], standing: Collection[str] = (), absent: Sequence[str] = ()
) -> list[Delivery]:
    """Settle which of the deliveries of one cruise that hold the same samples or casts stands.

    Parameters
    ----------
    deliveries
        In any order.
    standing
        Names of the files of which a ``cruise.toml`` says that they stand.
    absent
        Names of which it says so too, and that no file has.

    Returns
    -------
        The deliveries; of one that gives way to a standing one, only a finding that says so is left.

    Raises
    ------
    DeliveryProblem
        That names both files.

    """
    settled = list(deliveries)
    for one, other in combinations(range(len(settled)), 2):
        shared = shared_rows(settled[one], settled[other])
        if shared:
            stands = [settled[i].name in standing for i in (one, other)]
            if stands[0] == stands[1]:
                raise _two_editions(settled[one], settled[other], shared, _what_to_do(stands[0], absent))
            giving_way, stayer = (other, one) if stands[0] else (one, other)
            settled[giving_way] = _given_way(settled[giving_way], settled[stayer], shared)
    return settled


def _what_to_do(both: bool, absent: Sequence[str]) -> str:
    """Return what is wrong with what is said of editions, or how to say which stands."""
    if both:
        return "cruise.toml says of both that they stand; leave one of them there"
    if absent:
        named = ", ".join(f"'{name}'" for name in absent)
        return (
            f"cruise.toml names {named} as the one that stands, and there is no such file;"
            " name one of these two there"
        )
    return (
        "remove the one that does not stand, or name the one that does in a cruise.toml beside them (stands)"
    )


def _two_editions(one: Delivery, other: Delivery, shared: int, to_do: str) -> DeliveryProblem:
    return DeliveryProblem(
        "two-editions",
        f"{one.name} and {other.name}: both hold {shared} of the same {_rows_of(one)} of cruise"
        f" {', '.join(one.cruises)}; expected one edition of a cruise; {to_do}.",
    )


def _given_way(delivery: Delivery, stayer: Delivery, shared: int) -> Delivery:
    """Return a delivery of which nothing is used, because another edition stands."""
    rows = delivery.table.num_rows + len(delivery.rejects)
    told = Finding(
        "edition-set-aside", Severity.NOTE,
        f"{delivery.name}: holds {shared} of the same {_rows_of(delivery)} as {stayer.name}, which stands by the"
        f" cruise.toml beside them; it was kept, and none of its {rows} rows was used.",
        value=str(shared), file=delivery.name, count=rows,
    )  # fmt: skip
    return replace(delivery, table=delivery.table.slice(0, 0), rejects=(), findings=(told,), set_aside=rows)


def _rows_of(delivery: Delivery) -> str:
    return "samples" if delivery.kind is DeliveryKind.BOTTLE else "casts"


def _row_keys(table: pa.Table, names: Sequence[str]) -> set[str]:
    columns = [table.column(name).cast(pa.string()) for name in names]
    joined = pc.binary_join_element_wise(*columns, "\x1f", null_handling="replace")
    return set(joined.to_pylist())
