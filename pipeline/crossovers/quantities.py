"""What cruises are compared in: one table of quantities, how each may be off, and from when on it matters."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

from pipeline.variables import REGISTRY


class CorrectionKind(StrEnum):
    """How a quantity is off when a cruise is: by the same amount everywhere, or in proportion."""

    ADDITIVE = "additive"
    MULTIPLICATIVE = "multiplicative"


class Surface(StrEnum):
    """What two profiles are compared at equal values of: a column of the samples."""

    DENSITY = "sigma4"
    TEMPERATURE = "potential_temperature"
    PRESSURE = "pressure"


@dataclass(frozen=True, slots=True)
class Quantity:
    """A quantity that cruises are compared in.

    Where too few values are shared on its ``surface``, profiles are compared at equal pressure.
    """

    name: str  # its column
    kind: CorrectionKind
    limit: float  # least correction that is proposed: in the unit, or as a part of the value
    source: str  # of kind and limit
    surface: Surface = Surface.DENSITY
    least: float = 0.0  # of a multiplicative one: value, in its unit, under which no proportion is formed
    measured_at: tuple[str, float, float] | None = None  # column, its value and by how much it may differ
    written: str = ""  # in sentences, where its column's name will not do

    @property
    def unit(self) -> str:
        """Unit of the quantity."""
        return REGISTRY[self.name].unit

    @property
    def words(self) -> str:
        """What it is called in a sentence."""
        return self.written or self.name.removeprefix("bottle_").replace("_", " ")

    @property
    def calibrated(self) -> str | None:
        """The CTD's column of the same quantity, which is calibrated to the bottles; None where there is none."""
        other = self.name.replace("bottle_", "ctd_")
        return other if other != self.name and other in REGISTRY else None


_LIMITS = "initial minimum adjustments of GLODAPv2.2023, Lauvset et al. 2024, ESSD 16:2047, Table 3"
_ADDED, _TIMES = CorrectionKind.ADDITIVE, CorrectionKind.MULTIPLICATIVE

# Only bottle values are compared: a CTD's salinity and oxygen are calibrated to the bottles of their cruise,
# and its levels, though a thousand, would say nothing new. ``least``: our choice, a value of which the usual
# detection limit is a few per cent. Salinity is compared at equal potential temperature and not at equal
# density, since its own error shifts the density and so hides a part of itself.
QUANTITIES: tuple[Quantity, ...] = (
    Quantity("bottle_salinity", _ADDED, 0.005, _LIMITS, Surface.TEMPERATURE),
    Quantity("bottle_oxygen", _TIMES, 0.01, _LIMITS, least=20.0),
    Quantity("nitrate", _TIMES, 0.02, _LIMITS, least=2.0),
    Quantity("phosphate", _TIMES, 0.02, _LIMITS, least=0.2),
    Quantity("silicate", _TIMES, 0.02, _LIMITS, least=2.0),
    Quantity("dic", _ADDED, 4.0, _LIMITS, written="DIC"),
    Quantity("alkalinity", _ADDED, 4.0, _LIMITS),
    # pH depends on the temperature it is measured at, which is nearly always 25 (common practice, no source).
    Quantity("ph_total", _ADDED, 0.01, _LIMITS, measured_at=("ph_temperature", 25.0, 0.1),
             written="pH"),
    Quantity("delta_carbon_13", _ADDED, 0.03, "no published limit: reported precision of Quay 2003, as quoted"
             " in Becker et al. 2016, ESSD 8:559", written="delta-13C"),
)  # fmt: skip
