"""What reading gives: a delivered file as one table with its rejects, findings and row count."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from enum import StrEnum
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.problems import BrokenPromise

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pipeline.findings import Finding, Reject
    from pipeline.reading.spread import Spread


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
    spread: tuple[Spread, ...] = ()  # the findings that speak of many rows, in the order of ``findings``
    words: Mapping[str, str] = field(default_factory=dict)  # quantity to what the file calls it

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

        A finding about a whole file or column goes with every cruise that has rows of it, with the number of its own;
        rejects that name no cruise go with the first one of the file.
        """
        if self.cruises == (expocode,):
            return self
        if expocode not in self.cruises:
            return replace(
                self,
                table=self.table.slice(0, 0),
                rejects=(),
                findings=(),
                rows=0,
                refused_members=0,
                spread=(),
            )
        first = self.cruises[0] == expocode
        table = self.table.filter(pc.equal(self.table.column("expocode"), expocode))
        rejects = tuple(
            r for r in self.rejects if r.expocode == expocode or (first and r.expocode not in self.cruises)
        )
        return replace(
            self,
            table=table,
            rejects=rejects,
            findings=self._findings_of(expocode),
            rows=table.num_rows + len(rejects),
            refused_members=self.refused_members if first else 0,
            spread=(),
        )

    def _findings_of(self, expocode: str) -> tuple[Finding, ...]:
        """Return the findings that concern one of several cruises."""
        cruises = self.cruises
        cruise_at = {
            (r.file, r.line): r.expocode if r.expocode in cruises else cruises[0] for r in self.rejects
        }
        columns = (self.table.column(name).to_pylist() for name in ("file", "line", "expocode"))
        cruise_at |= {(file, line): code for file, line, code in zip(*columns, strict=True)}
        mine: dict[str, list[int]] = {}
        for (file, line), code in cruise_at.items():
            if code == expocode and line is not None:
                mine.setdefault(file, []).append(line)
        files = {file for file, _ in cruise_at}
        spread = {one.finding: one for one in self.spread}
        found: list[Finding | None] = []
        for finding in self.findings:
            file = finding.file or ""
            if finding in spread:
                found.append(spread[finding].within(np.array(mine.get(file, []), dtype=np.int64)))
            elif (file, finding.line) in cruise_at:
                found.append(finding if cruise_at[file, finding.line] == expocode else None)
            elif file in mine or (file not in files and expocode == cruises[0]):
                found.append(finding)
        return tuple(one for one in found if one is not None)


def stack(tables: list[pa.Table]) -> pa.Table:
    """Return tables of different columns one above the other, missing where one has no such column.

    A column that is number in one and text in another becomes text.
    """
    kinds: dict[str, set[pa.DataType]] = {}
    for table in tables:
        for one in table.schema:
            kinds.setdefault(one.name, set()).add(one.type)
    mixed = {name for name, types in kinds.items() if len(types) > 1}
    if mixed:
        tables = [_as_text(table, mixed) for table in tables]
    return pa.concat_tables(tables, promote_options="default")


def _as_text(table: pa.Table, names: set[str]) -> pa.Table:
    for position, one in enumerate(table.schema):
        if one.name in names and not pa.types.is_string(one.type):
            column = table.column(position).cast(pa.string())
            table = table.set_column(position, one.with_type(pa.string()), column)
    return table
