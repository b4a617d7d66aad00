"""What the registry says of one quantity: the form of its rows. The rows are in ``variables``."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


class Kind(StrEnum):
    """How the values of a column are stored."""

    NUMBER = "number"
    INTEGER = "integer"
    FLAG = "flag"
    TEXT = "text"
    DATE = "date"
    TIME = "time"


class FlagScheme(StrEnum):
    """Which table of WHP quality flags a column's flags are read with (Joyce and Corry 1994, WHP 90-1)."""

    BOTTLE = "bottle"
    WATER = "water"
    CTD = "ctd"


@dataclass(frozen=True, slots=True)
class Uncertainty:
    """Usual standard uncertainty of a measurement: ``hypot(absolute, relative * value)``."""

    absolute: float
    relative: float
    source: str

    def at(self, value: float) -> float:
        """Return the standard uncertainty at ``value``, in the unit of the variable."""
        return float((self.absolute**2 + (self.relative * value) ** 2) ** 0.5)


@dataclass(frozen=True, slots=True)
class Variable:
    """One quantity: what its column is called and means."""

    name: str
    long_name: str
    unit: str  # UDUNITS; "1" for pure numbers; "" where a unit has no meaning (text, flags, dates)
    standard_name: str | None = None
    kind: Kind = Kind.NUMBER
    exchange: tuple[str, ...] = ()  # names in exchange files, the canonical one first
    exchange_unit: str = ""  # the unit as exchange files write it
    flags: FlagScheme | None = None
    plausible: tuple[float, float] | None = None
    uncertainty: Uncertainty | None = None
    source: str = ""  # the formula's reference, for derived quantities
