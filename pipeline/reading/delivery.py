"""What reading gives: a delivered file as one table with its rejects, findings and row count."""

from __future__ import annotations

from dataclasses import dataclass, replace
from enum import StrEnum
from typing import TYPE_CHECKING

import pyarrow as pa
import pyarrow.compute as pc

from pipeline.problems import BrokenPromise

if TYPE_CHECKING:
    from pipeline.findings import Finding, Reject


class DeliveryKind(StrEnum):
    """What a delivered file holds."""

    BOTTLE = "bottle"
    CTD = "ctd"


@dataclass(frozen=True, slots=True)
class Delivery:
    """One delivered file, read.

    ``rows`` counts the data rows of the file (and one for each member of a zip that is refused);
    each of them is in ``table`` or in ``rejects``, or was set aside because another edition stands.
    """

    name: str
    sha256: str
    size: int
    kind: DeliveryKind
    table: pa.Table
    rows: int
    rejects: tuple[Reject, ...] = ()
    findings: tuple[Finding, ...] = ()
    refused_members: int = 0
    set_aside: int = 0
    described_by: str = ""  # SHA-256 of the cruise.toml that says what is in it, if one does

    def __post_init__(self) -> None:
        """Hold the promise that no row is lost."""
        accounted = self.table.num_rows + len(self.rejects) + self.set_aside
        if self.rows != accounted:
            raise BrokenPromise(f"{self.name}: {self.rows} rows in, but {accounted} accounted for")

    @property
    def cruises(self) -> tuple[str, ...]:
        """Expocodes in the file, in the order of their first row."""
        return tuple(pc.unique(self.table.column("expocode")).to_pylist())

    def of_cruise(self, expocode: str) -> Delivery:
        """Return the part of the delivery that belongs to one cruise, of no rows where it has none of it.

        Rejects and findings that name no cruise's row go with the first cruise of the file.
        """
        if self.cruises == (expocode,):
            return self
        if expocode not in self.cruises:
            return replace(
                self, table=self.table.slice(0, 0), rejects=(), findings=(), rows=0, refused_members=0
            )
        first = self.cruises[0] == expocode
        table = self.table.filter(pc.equal(self.table.column("expocode"), expocode))
        others = {
            (file, line)
            for file, line, code in zip(
                self.table.column("file").to_pylist(),
                self.table.column("line").to_pylist(),
                self.table.column("expocode").to_pylist(),
                strict=True,
            )
            if code != expocode
        }
        mine = {(file, line) for file, line in zip(*_places(table), strict=True)}
        rejects = tuple(
            r for r in self.rejects if r.expocode == expocode or (first and r.expocode not in self.cruises)
        )
        findings = tuple(
            f for f in self.findings if (f.file, f.line) in mine or (first and (f.file, f.line) not in others)
        )
        return replace(
            self,
            table=table,
            rejects=rejects,
            findings=findings,
            rows=table.num_rows + len(rejects),
            refused_members=self.refused_members if first else 0,
        )


def _places(table: pa.Table) -> tuple[list[str], list[int]]:
    return table.column("file").to_pylist(), table.column("line").to_pylist()


def stack(tables: list[pa.Table]) -> pa.Table:
    """Return tables of different columns one above the other, missing where one has no such column.

    A column that is number in one and text in another becomes text.
    """
    kinds: dict[str, set[pa.DataType]] = {}
    for table in tables:
        for field in table.schema:
            kinds.setdefault(field.name, set()).add(field.type)
    mixed = {name for name, types in kinds.items() if len(types) > 1}
    if mixed:
        tables = [_as_text(table, mixed) for table in tables]
    return pa.concat_tables(tables, promote_options="default")


def _as_text(table: pa.Table, names: set[str]) -> pa.Table:
    for position, field in enumerate(table.schema):
        if field.name in names and not pa.types.is_string(field.type):
            column = table.column(position).cast(pa.string())
            table = table.set_column(position, field.with_type(pa.string()), column)
    return table
