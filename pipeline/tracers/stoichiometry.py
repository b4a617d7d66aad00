"""Published ratios of respiration: how much nitrate, carbon and oxygen go with one phosphate. Data only.

Where a number was read in the publication, or in a later one that quotes it, its status says verified. Where
it was written down from memory and still waits to be read, its status says so. A publication that
gives only one of the ratios is no set and is not here.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from types import MappingProxyType
from typing import TYPE_CHECKING

from pipeline.tracers.choices import chosen

if TYPE_CHECKING:
    from collections.abc import Mapping


class Status(StrEnum):
    """How far a number taken from a publication has been checked."""

    VERIFIED = "verified"
    FROM_MEMORY = "from memory"


class StoichiometryName(StrEnum):
    """The ratio sets, by citation."""

    REDFIELD_1963 = "redfield_1963"
    TAKAHASHI_1985 = "takahashi_1985"
    ANDERSON_SARMIENTO_1994 = "anderson_sarmiento_1994"
    ANDERSON_1995 = "anderson_1995"
    KORTZINGER_2001 = "kortzinger_2001"


@dataclass(frozen=True, slots=True)
class Ratio:
    """Moles per mole of phosphate, with the published uncertainty where there is one."""

    value: float
    status: Status
    uncertainty: float | None = None
    uncertainty_status: Status | None = None


@dataclass(frozen=True, slots=True)
class Stoichiometry:
    """One published set: respiration that frees 1 phosphate frees nitrogen and carbon and takes up oxygen."""

    name: StoichiometryName
    citation: str
    nitrogen: Ratio
    carbon: Ratio
    oxygen: Ratio  # positive: moles of O2 taken up
    valid: str = ""

    @property
    def nitrogen_per_oxygen(self) -> float:
        """Moles of nitrate freed per mole of oxygen taken up."""
        return self.nitrogen.value / self.oxygen.value

    @property
    def words(self) -> str:
        """The set and its ratios, as they stand in metadata."""
        whole = ":".join(f"{ratio.value:g}" for ratio in (self.nitrogen, self.carbon, self.oxygen))
        return f"ratios {self.name}, P:N:C:-O2 1:{whole}"

    @property
    def uncertainty_words(self) -> str:
        """The published uncertainties of the ratios, as they stand in metadata."""
        ratios = (("N", self.nitrogen), ("C", self.carbon), ("-O2", self.oxygen))
        told = ", ".join(f"{name} {r.uncertainty:g}" for name, r in ratios if r.uncertainty is not None)
        return f"ratios ({told})" if told else "ratios taken as exact"


_READ, _MEMORY = Status.VERIFIED, Status.FROM_MEMORY

STOICHIOMETRIES: Mapping[StoichiometryName, Stoichiometry] = MappingProxyType(
    {
        s.name: s
        for s in (
            Stoichiometry(
                StoichiometryName.REDFIELD_1963,
                "Redfield, Ketchum and Richards 1963",
                nitrogen=Ratio(16, _READ),
                carbon=Ratio(106, _READ),
                oxygen=Ratio(138, _MEMORY),
            ),
            Stoichiometry(
                StoichiometryName.TAKAHASHI_1985,
                "Takahashi, Broecker and Langer 1985",
                nitrogen=Ratio(16, _MEMORY),
                carbon=Ratio(103, _MEMORY),
                oxygen=Ratio(172, _MEMORY),
            ),
            Stoichiometry(
                StoichiometryName.ANDERSON_SARMIENTO_1994,
                "Anderson and Sarmiento 1994, GBC 8:65-80",
                nitrogen=Ratio(16, _READ, 1, _MEMORY),
                carbon=Ratio(117, _READ, 14, _MEMORY),
                oxygen=Ratio(170, _READ, 10, _MEMORY),
                valid="400 to 4000 m (from memory)",
            ),
            Stoichiometry(
                StoichiometryName.ANDERSON_1995,
                "Anderson 1995",
                nitrogen=Ratio(16, _MEMORY),
                carbon=Ratio(106, _MEMORY),
                oxygen=Ratio(150, _MEMORY),
            ),
            Stoichiometry(
                StoichiometryName.KORTZINGER_2001,
                "Koertzinger, Hedges and Quay 2001",
                nitrogen=Ratio(17.5, _MEMORY, 2.0, _MEMORY),
                carbon=Ratio(123, _MEMORY, 10, _MEMORY),
                oxygen=Ratio(165, _MEMORY, 15, _MEMORY),
            ),
        )
    }
)


def stoichiometry(name: str) -> Stoichiometry:
    """Return the ratio set called ``name``.

    Raises
    ------
    SettingsProblem
        With the names that exist.

    """
    return chosen(STOICHIOMETRIES, "tracers.stoichiometry", name)
