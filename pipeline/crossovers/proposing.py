"""Which corrections all crossovers together ask for, and which of them are worth making."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from pipeline.crossovers.inversion import invert
from pipeline.crossovers.quantities import QUANTITIES, CorrectionKind

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from pipeline.crossover_settings import CrossoverSettings
    from pipeline.crossovers.comparing import Crossover
    from pipeline.crossovers.quantities import Quantity


@dataclass(frozen=True, slots=True)
class Proposal:
    """What would make one cruise agree with the others in one quantity, and whether it is proposed.

    ``correction`` is what is added to an additive quantity, and the factor of a multiplicative one;
    ``uncertainty`` is that of either.
    """

    expocode: str
    quantity: Quantity
    correction: float
    uncertainty: float
    crossovers: int
    group: int  # counted from 1 within the quantity
    why_not: str  # empty where it is proposed

    @property
    def proposed(self) -> bool:
        """Whether it should be made."""
        return not self.why_not

    @property
    def size(self) -> float:
        """How much the correction changes: in the unit, or as a part of the value."""
        relative = self.quantity.kind is CorrectionKind.MULTIPLICATIVE
        return abs(self.correction - 1.0) if relative else abs(self.correction)


def propose(crossovers: Sequence[Crossover], settings: CrossoverSettings) -> list[Proposal]:
    """Return a proposal for every cruise and quantity with a crossover, in the order of ``QUANTITIES``."""
    return [p for quantity in QUANTITIES for p in _of_quantity(quantity, crossovers, settings)]


def _of_quantity(
    quantity: Quantity, crossovers: Sequence[Crossover], settings: CrossoverSettings
) -> Iterator[Proposal]:
    mine = [c for c in crossovers if c.quantity is quantity]
    if not mine:
        return
    expocodes = sorted({c.expocode for c in mine} | {c.other for c in mine})
    number = {expocode: k for k, expocode in enumerate(expocodes)}
    pairs = np.array([[number[c.expocode], number[c.other]] for c in mine])
    fixed = np.array([expocode in settings.reference for expocode in expocodes])
    inversion = invert(
        pairs,
        np.array([c.offset for c in mine]),
        np.array([c.uncertainty for c in mine]),
        settings.prior * quantity.limit,
        fixed,
    )
    relative = quantity.kind is CorrectionKind.MULTIPLICATIVE
    count = np.bincount(pairs.ravel(), minlength=len(expocodes))
    for group in range(int(inversion.group.max()) + 1):
        cruises = np.flatnonzero(inversion.group == group)
        proposals = []
        for cruise in cruises:
            m, u = float(inversion.correction[cruise]), float(inversion.uncertainty[cruise])
            proposal = Proposal(
                expocodes[cruise],
                quantity,
                float(np.exp(m)) if relative else m,
                float(np.exp(m)) * u if relative else u,
                int(count[cruise]),
                group + 1,
                "it is a reference" if fixed[cruise] else "",
            )
            why_not = proposal.why_not or _why_not(proposal, settings)
            proposals.append(replace(proposal, why_not=why_not))
        yield from proposals if fixed[cruises].any() else _of_a_majority(proposals)


def _why_not(proposal: Proposal, settings: CrossoverSettings) -> str:
    """Return why a correction is not worth making, in words; empty where it is."""
    if proposal.size <= proposal.quantity.limit:
        return "it is not larger than the limit"
    if proposal.size <= settings.certainty * proposal.uncertainty:
        return f"it is not larger than {settings.certainty:g} times its uncertainty"
    return ""


def _of_a_majority(proposals: list[Proposal]) -> list[Proposal]:
    """Return proposals of a group without a reference: fewer than half of its cruises can be told to be off."""
    wanted = [proposal for proposal in proposals if proposal.proposed]
    if 2 * len(wanted) < len(proposals):
        return proposals
    why_not = (
        f"{len(wanted)} of the {len(proposals)} cruises that meet would have to be corrected, and crossovers tell"
        " only differences: name a reference"
    )
    return [replace(p, why_not=why_not) if p.proposed else p for p in proposals]
