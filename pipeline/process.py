"""One cruise from what was delivered to the archive's five tables: the composition of the rooms.

Everything here is a pure function of its arguments: no clock, no environment, no file system.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import pyarrow as pa
import pyarrow.compute as pc

from pipeline import seawater, tracers
from pipeline.checking import Checked, check
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
    from collections.abc import Mapping, Sequence

    from pipeline.findings import Finding
    from pipeline.mixing import Catalogue
    from pipeline.settings import Settings

_KEYS = {DeliveryKind.BOTTLE: ("station", "cast", "sample"), DeliveryKind.CTD: ("station", "cast")}
_CORES = {DeliveryKind.BOTTLE: SAMPLES_CORE, DeliveryKind.CTD: CASTS_CORE}


@dataclass(frozen=True, slots=True)
class ProcessedCruise:
    """The five tables of one cruise, by name, and what was noticed on the way."""

    tables: Mapping[str, pa.Table]
    findings: tuple[Finding, ...]


def process_cruise(
    expocode: str, deliveries: Sequence[Delivery], settings: Settings, catalogue: Catalogue | None = None
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

    """
    samples, sample_findings = _described(deliveries, DeliveryKind.BOTTLE, settings)
    casts, cast_findings = _described(deliveries, DeliveryKind.CTD, settings)
    mixtures = empty(MIXTURES)
    mixing_findings: tuple[Finding, ...] = ()
    if catalogue is not None:
        mixing_findings = absent_properties(samples, catalogue, settings)
        resolution = resolve(samples, catalogue, settings)
        samples = with_columns(samples, resolution.columns)
        mixtures = resolution.mixtures
    else:
        samples = with_columns(samples, {name: [None] * samples.num_rows for name in MIXING})
    delivered = [finding for delivery in deliveries for finding in delivery.findings]
    findings = (*delivered, *sample_findings, *cast_findings, *mixing_findings)
    return ProcessedCruise(
        tables={
            "samples": arranged(samples),
            "casts": arranged(casts),
            "mixtures": mixtures,
            "findings": findings_table(expocode, findings),
            "rejects": rejects_table(expocode, [r for d in deliveries for r in d.rejects]),
        },
        findings=findings,
    )


def _described(
    deliveries: Sequence[Delivery], kind: DeliveryKind, settings: Settings
) -> tuple[pa.Table, tuple[Finding, ...]]:
    """Return the rows of one kind, checked and with every quantity computed from them."""
    mine = [delivery for delivery in deliveries if delivery.kind is kind]
    tables = [delivery.table for delivery in mine]
    table = stack(tables) if tables else empty((*_CORES[kind], "pressure"))
    told = [finding for delivery in mine for finding in delivery.findings]
    checked = check(table, settings, told) if tables else Checked({}, ())
    table = with_columns(table, checked.flags)
    table = with_columns(table, working_columns(Rows(table, settings.use)))
    table = with_columns(table, seawater.columns(table, Rows(table, settings.use).usable))
    table = with_columns(table, tracers.columns(Rows(table, settings.use).usable, settings.tracers))
    return with_metadata(table, tracers.forms(settings.tracers)), checked.findings


def shared_rows(one: Delivery, other: Delivery) -> int:
    """Return how many samples (or casts) two deliveries of the same kind both hold."""
    if one.kind is not other.kind:
        return 0
    keys = _KEYS[one.kind]
    return len(_row_keys(one.table, keys) & _row_keys(other.table, keys))


def refuse_two_editions(deliveries: Sequence[Delivery]) -> None:
    """Refuse deliveries of one cruise that hold the same samples or casts: nothing tells which one stands.

    Raises
    ------
    DeliveryProblem
        That names both files.

    """
    for position, one in enumerate(deliveries):
        for other in deliveries[position + 1 :]:
            shared = shared_rows(one, other)
            if shared:
                what = "samples" if one.kind is DeliveryKind.BOTTLE else "casts"
                raise DeliveryProblem(
                    "two-editions",
                    f"{one.name} and {other.name}: both hold {shared} of the same {what} of cruise"
                    f" {', '.join(one.cruises)}; expected one edition of a cruise; remove the one that does not stand.",
                )


def _row_keys(table: pa.Table, names: Sequence[str]) -> set[str]:
    columns = [table.column(name).cast(pa.string()) for name in names]
    joined = pc.binary_join_element_wise(*columns, "\x1f", null_handling="replace")
    return set(joined.to_pylist())
