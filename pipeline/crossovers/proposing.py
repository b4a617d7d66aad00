"""Which corrections all crossovers together ask for, and which of them are worth making."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.crossovers.inversion import invert
from pipeline.crossovers.quantities import QUANTITIES, CorrectionKind

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping, Sequence

    from pipeline.crossover_settings import CrossoverSettings
    from pipeline.crossovers.comparing import Crossover
    from pipeline.crossovers.quantities import Quantity


# Why a correction is not proposed.
_AGREES = "all its crossovers agree within their uncertainty"
IN_FORCE = "a correction is in force, and what remains is not worth another"


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
    in_force: str = ""  # in words, the correction that the archive was made with
    remains: float | None = None  # what is asked for beside it; None where none is in force
    remains_uncertainty: float | None = None

    @property
    def proposed(self) -> bool:
        """Whether it should be made."""
        return not self.why_not

    @property
    def size(self) -> float:
        """How much the correction changes: in the unit, or as a part of the value."""
        relative = self.quantity.kind is CorrectionKind.MULTIPLICATIVE
        return abs(self.correction - 1.0) if relative else abs(self.correction)


def propose(
    crossovers: Sequence[Crossover],
    settings: CrossoverSettings,
    applied: Mapping[str, Mapping[str, Mapping[str, Any]]] | None = None,
    remaining: Sequence[Crossover] | None = None,
) -> list[Proposal]:
    """Return a proposal for every cruise and quantity with a crossover, in the order of ``QUANTITIES``.

    Parameters
    ----------
    crossovers
        Those that are to be made to agree.
    settings
        What is worth a correction.
    applied
        The corrections in force, by cruise and quantity, each as it stands in a settings file.
    remaining
        The crossovers with these corrections made, where ``crossovers`` are without them: a correction in force
        is not proposed again where nothing worth another remains. None where they are the same.

    """
    proposals = [
        replace(p, in_force=in_words(p.quantity, mine[p.quantity.name]))
        if (mine := (applied or {}).get(p.expocode, {})) and p.quantity.name in mine
        else p
        for quantity in QUANTITIES
        for p in _of_quantity(quantity, crossovers, settings)
    ]
    if remaining is not None:
        left = {
            (p.expocode, p.quantity.name): p
            for quantity in QUANTITIES
            for p in _of_quantity(quantity, remaining, settings)
        }
        proposals = [
            _with_remains(p, left.get((p.expocode, p.quantity.name))) if p.in_force else p for p in proposals
        ]
    return list(_of_majorities(proposals, settings))


def in_words(quantity: Quantity, correction: Mapping[str, Any]) -> str:
    """Return a correction of the settings in words: 'times 0.98', 'plus -3.0 umol kg-1'."""
    if correction.get("factor") is not None:
        return f"times {correction['factor']}"
    unit = "" if quantity.unit == "1" else f" {quantity.unit}"
    return f"plus {correction.get('add')}{unit}"


def _with_remains(proposal: Proposal, left: Proposal | None) -> Proposal:
    """Return a proposal beside a correction in force, with what remains after that."""
    if left is None:
        return proposal
    told = replace(proposal, remains=left.correction, remains_uncertainty=left.uncertainty)
    return replace(told, why_not=IN_FORCE) if told.proposed and left.why_not else told


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
        for cruise in np.flatnonzero(inversion.group == group):
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
            agrees = all(c.agrees for c in mine if expocodes[cruise] in {c.expocode, c.other})
            why_not = proposal.why_not or _why_not(proposal, settings)
            yield replace(proposal, why_not=why_not or (_AGREES if agrees else ""))


def _why_not(proposal: Proposal, settings: CrossoverSettings) -> str:
    """Return why a correction is not worth making, in words; empty where it is."""
    if proposal.size <= proposal.quantity.limit:
        return "it is not larger than the limit"
    if proposal.size <= settings.certainty * proposal.uncertainty:
        return f"it is not larger than {settings.certainty:g} times its uncertainty"
    return ""


def _of_majorities(proposals: Iterable[Proposal], settings: CrossoverSettings) -> Iterator[Proposal]:
    """Yield proposals; in a group without a reference fewer than half of the cruises can be told to be off."""
    groups: dict[tuple[str, int], list[Proposal]] = {}
    for proposal in proposals:
        groups.setdefault((proposal.quantity.name, proposal.group), []).append(proposal)
    for group in groups.values():
        off = sum(p.proposed or p.why_not == IN_FORCE for p in group)
        if 2 * off < len(group) or any(p.expocode in settings.reference for p in group):
            yield from group
            continue
        why_not = (
            f"{off} of the {len(group)} cruises that meet would have to be corrected, and crossovers tell"
            " only differences: name a reference"
        )
        yield from (replace(p, why_not=why_not) if p.proposed else p for p in group)
