"""One check against the outside world: what was computed from what, what is expected, and who says so."""

from __future__ import annotations

import math
from dataclasses import dataclass
from decimal import Decimal
from enum import StrEnum
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping


class Status(StrEnum):
    """How the expected number is known. Only the first two are published numbers."""

    VERIFIED = "verified"  # read in the source, or in a public text that quotes it
    FROM_MEMORY = "from memory"  # stands in the source as far as is remembered; not read again
    COMMON = "common practice, no source"
    COMPUTED = "computed"  # output of the general-purpose library that the source names, digit for digit
    EXACT = "exact"  # follows from the published definition by arithmetic


@dataclass(frozen=True, slots=True)
class Check:
    """One row of the table."""

    quantity: str  # with its unit
    inputs: Mapping[str, float | str]
    by: Callable[..., float]  # called with the inputs
    expected: str  # as printed
    source: str
    status: Status
    within: float | None = None  # stated tolerance; None: half a unit of the last printed digit

    @property
    def tolerance(self) -> float:
        """Largest difference that passes."""
        if self.within is not None:
            return self.within
        exponent = Decimal(self.expected).as_tuple().exponent
        assert isinstance(exponent, int), f"{self.expected} is no finite number"
        return 0.5 * 10.0**exponent

    def computed(self) -> float:
        """Return what the code gives now."""
        return float(self.by(**self.inputs))

    def holds(self, computed: float) -> bool:
        """Return whether ``computed`` agrees with what is expected; NaN never does."""
        return math.isfinite(computed) and abs(computed - float(self.expected)) <= self.tolerance

    def __str__(self) -> str:
        inputs = " ".join(f"{name}={value}" for name, value in self.inputs.items())
        return f"{self.quantity} [{inputs}] by {self.by.__module__.rpartition('.')[2]}.{self.by.__name__}"
