"""What a ``cruise.toml`` says of a file: which column is which quantity, in what unit, under whose flags."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pipeline.reading.delivery import DeliveryKind


@dataclass(frozen=True, slots=True)
class ColumnEntry:
    """One delivered column."""

    column: str  # as delivered
    quantity: str  # a name of the registry
    unit: str | None = None  # None: as the file says, else the registry's
    flag: str | None = None  # the column of its flags, as delivered
    flag_scheme: str = "whp"


@dataclass(frozen=True, slots=True)
class Description:
    """All that is said of one file, or of files of one pattern."""

    files: str  # a name or a pattern of names, such as *.xlsx
    kind: DeliveryKind | None = None
    columns: tuple[ColumnEntry, ...] = ()
    constants: Mapping[str, str] = field(
        default_factory=dict
    )  # identity that all rows share, by registry name
