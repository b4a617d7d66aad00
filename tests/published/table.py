"""The one table of all checks."""

from __future__ import annotations

from typing import TYPE_CHECKING

from . import carbonate, casts, crossovers, cruises, eos80, isotopes, mixing, oxygen, scales, teos10, tracers

if TYPE_CHECKING:
    from .check import Check

TABLE: tuple[Check, ...] = (
    *eos80.ROWS,
    *scales.ROWS,
    *teos10.ROWS,
    *casts.ROWS,
    *cruises.ROWS,
    *crossovers.ROWS,
    *oxygen.ROWS,
    *tracers.ROWS,
    *carbonate.ROWS,
    *isotopes.ROWS,
    *mixing.ROWS,
)
