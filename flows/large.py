"""How the casts of a cruise are read and described: all at once, or put aside where there may be too many."""

from __future__ import annotations

import hashlib
from contextlib import closing, contextmanager
from dataclasses import replace
from io import BytesIO
from typing import TYPE_CHECKING, Protocol

import numpy as np
import pyarrow as pa

from flows import spilling
from flows.places import place
from pipeline.archive import layout
from pipeline.large_cruise import describe_in_blocks
from pipeline.process import Casts, process_cruise
from pipeline.reading import (
    DeliveryKind,
    ZipAccount,
    is_workbook,
    read_delivery,
    read_members,
    stack,
    unpacked_size,
)
from pipeline.tables import cast_groups

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from flows.plan import Job
    from pipeline.archive import Store
    from pipeline.mixing import Catalogue
    from pipeline.process import ProcessedCruise
    from pipeline.reading import Delivery, Description
    from pipeline.settings import ReadingSettings, Settings

# A line of a cast is rarely shorter, with its pressure, temperature, salinity and flags.
_BYTES_PER_LEVEL = 20


class Way(Protocol):
    """How the deliveries of one cruise are read, and made into its tables."""

    def read(
        self, name: str, data: bytes, limits: ReadingSettings, description: Description | None
    ) -> Delivery:
        """Return a delivery, as ``read_delivery`` does; of its rows perhaps only the first of every cast."""

    def process(
        self,
        expocode: str,
        deliveries: Sequence[Delivery],
        settings: Settings,
        catalogue: Catalogue | None,
    ) -> ProcessedCruise:
        """Make the tables, as ``process_cruise`` does, of deliveries that were read here."""

    def kept(self, delivery: Delivery) -> int:
        """Return how many rows of a delivery are kept."""


class AtOnce:
    """Every row is held."""

    read = staticmethod(read_delivery)
    process = staticmethod(process_cruise)

    def kept(self, delivery: Delivery) -> int:
        """See ``Way``."""
        return int(delivery.table.num_rows)


class InBlocks:
    """The rows of casts in zips are put aside; where they turn out to be few, all are held in the end."""

    def __init__(self, expocode: str) -> None:
        self._expocode = expocode
        self._aside: dict[tuple[str, str], spilling.Casts] = {}
        self._described: spilling.Kept | None = None

    def close(self) -> None:
        """Give the disk back."""
        for aside in (*self._aside.values(), self._described):
            if aside is not None:
                aside.close()

    def read(
        self, name: str, data: bytes, limits: ReadingSettings, description: Description | None = None
    ) -> Delivery:
        """See ``Way``."""
        if unpacked_size(BytesIO(data)) is None or is_workbook(data):
            return read_delivery(name, data, limits, description)
        sha256 = hashlib.sha256(data).hexdigest()
        casts = self._aside[name, sha256] = spilling.Casts()
        account = ZipAccount(name, limits)
        firsts = []
        for member, read in read_members(name, data, limits, description):
            table = account.taken(member, read)
            if table is None:
                continue
            casts.add(table)
            firsts.append(first_rows(table))
            if set(table.column("expocode").unique().to_pylist()) - {self._expocode}:
                self._aside.pop((name, sha256)).close()
                return read_delivery(name, data, limits, description)  # of several cruises: to be divided
        return account.delivery(sha256, len(data), firsts)

    def process(
        self,
        expocode: str,
        deliveries: Sequence[Delivery],
        settings: Settings,
        catalogue: Catalogue | None,
    ) -> ProcessedCruise:
        """See ``Way``."""
        ctd = [delivery for delivery in deliveries if delivery.kind is DeliveryKind.CTD]
        if sum(self.kept(delivery) for delivery in ctd) <= settings.reading.levels_at_once:
            return process_cruise(expocode, [self._whole(d) for d in deliveries], settings, catalogue)
        firsts = [d if self._casts_of(d) else _with_table(d, first_rows(d.table)) for d in ctd]
        columns = stack([table for delivery in ctd for table in self._columns(delivery)])
        kept = self._described = spilling.Kept()
        findings, accounts = describe_in_blocks(
            expocode, firsts, columns, self._numbered(ctd), settings, kept.add
        )
        casts = Casts(kept, findings, accounts)
        return process_cruise(expocode, deliveries, settings, catalogue, casts)

    def kept(self, delivery: Delivery) -> int:
        """See ``Way``."""
        casts = self._casts_of(delivery)
        return delivery.table.num_rows if casts is None else casts.num_rows

    def _casts_of(self, delivery: Delivery) -> spilling.Casts | None:
        return self._aside.get((delivery.name, delivery.sha256))

    def _whole(self, delivery: Delivery) -> Delivery:
        casts = self._casts_of(delivery)
        if casts is None:
            return delivery
        return _with_table(delivery, stack(list(casts)))

    def _columns(self, delivery: Delivery) -> list[pa.Table]:
        casts = self._casts_of(delivery)
        return [delivery.table.slice(0, 0)] if casts is None else casts.columns

    def _numbered(self, ctd: Sequence[Delivery]) -> Iterator[tuple[int, pa.Table]]:
        for number, delivery in enumerate(ctd):
            casts = self._casts_of(delivery)
            for table in [delivery.table] if casts is None else casts:
                yield number, table


@contextmanager
def way_of(job: Job, store: Store, limits: ReadingSettings) -> Iterator[Way]:
    """Choose how a cruise is read and described, by what its zips say that they unpack to."""
    unpacked = sum(_unpacked(job, store))
    # Of two editions of a cruise the one that stands is told by all their rows.
    if unpacked <= _BYTES_PER_LEVEL * limits.levels_at_once or any(f.beside.stands for f in job.files):
        yield AtOnce()
        return
    with closing(InBlocks(job.expocode)) as way:
        yield way


def _unpacked(job: Job, store: Store) -> Iterator[int]:
    for file in job.files:
        try:
            with place(file.path).open("rb") as stream:
                yield unpacked_size(stream) or 0
        except OSError:
            continue  # of which it is told when its turn comes
    for archived in job.archived:
        try:
            yield unpacked_size(store.source(layout.raw_key(archived.sha256))) or 0
        except OSError:
            continue


def _with_table(delivery: Delivery, table: pa.Table) -> Delivery:
    return replace(delivery, table=table, rows=delivery.rows - delivery.table.num_rows + table.num_rows)


def first_rows(table: pa.Table) -> pa.Table:
    """Return the first row of every cast of a table."""
    return table.take(pa.array(np.sort(np.unique(cast_groups(table), return_index=True)[1])))
