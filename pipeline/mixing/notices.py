"""What a cruise's mixing analysis has to tell: samples left unresolved and why, and samples no mixture reaches."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.findings import Finding, Severity
from pipeline.mixing.status import STATUS_WORDS, MixingStatus

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.mixing.answers import Answer
    from pipeline.mixing.entries import Catalogue
    from pipeline.settings import MixingSettings

UNRESOLVED = "unresolved-samples"
OUTSIDE_HULL = "outside-mixing-hull"
UNTESTED = "untested-fit"
UNUSED = "unused-uncertainty"
CHECKS = (UNUSED, UNRESOLVED, OUTSIDE_HULL, UNTESTED)

_TO_DO: Mapping[MixingStatus, str] = {
    MixingStatus.INCOMPLETE: "deliver the properties of the set, or add a set that needs fewer",
    MixingStatus.UNDETERMINED: (
        "run 'seawhence sources check', and add properties to the set or take sources away"
    ),
    MixingStatus.ABSURD: "correct these values, or flag them as bad",
    MixingStatus.NOT_OPTIMAL: "take sources that are nearly alike out of the set",
}


def unresolved(status: NDArray[np.int8]) -> Iterator[Finding]:
    """Yield a finding for every reason why samples of a cruise are not resolved.

    Samples outside all sets are told only where they are all there are: a domain is meant to leave some out.

    Parameters
    ----------
    status
        Of every sample, (n_sample,).

    """
    n_sample = len(status)
    for reason, what_to_do in _TO_DO.items():
        count = int((status == reason).sum())
        if count:
            yield Finding(
                UNRESOLVED,
                Severity.NOTE,
                f"{_of(count, n_sample)} not resolved into source waters: {STATUS_WORDS[reason]}; expected samples "
                f"that can be resolved; {what_to_do}.",
                value=reason.label,
                count=count,
            )
    if n_sample and (status == MixingStatus.OUTSIDE).all():
        yield Finding(
            UNRESOLVED,
            Severity.NOTE,
            f"{_of(n_sample, n_sample)} not resolved into source waters: {STATUS_WORDS[MixingStatus.OUTSIDE]}, or it "
            f"lies in the mixed layer; expected a set for some of them; widen [set.valid], or use other sources.",
            value=MixingStatus.OUTSIDE.label,
            count=n_sample,
        )


def unused_uncertainties(
    expocode: str | None, catalogue: Catalogue, settings: MixingSettings
) -> Iterator[Finding]:
    """Yield a finding for every uncertainty that is set for a cruise and of which no set knows the property."""
    known = list(dict.fromkeys(name for chosen in catalogue.set for name in chosen.properties))
    for name, size in settings.cruise_uncertainty.get(expocode or "", {}).items():
        if name not in known:
            yield Finding(
                UNUSED,
                Severity.NOTE,
                f"the settings give mixing.cruise_uncertainty.{expocode}.{name}, which no source set uses; expected a "
                f"property of a set, one of {', '.join(known)}; correct its name or remove it.",
                variable=name,
                value=f"{size:g}",
            )


def of_fits(answers: Sequence[Answer], settings: MixingSettings) -> Iterator[Finding]:
    """Yield what is to be told about the fits of every set: those outside its hull, and those nothing tests."""
    for answer in answers:
        n_solved = len(answer.rows)
        untested = int(np.isnan(answer.per_sample["reduced_chi_square"]).sum())
        if untested:
            yield Finding(
                UNTESTED,
                Severity.NOTE,
                f"source set '{answer.chosen.name}': {_of(untested, n_solved)} fitted without degrees of freedom, so "
                f"that nothing can tell whether its sources explain them, and they have a tag all the same; expected "
                f"more properties than shares; deliver the properties that are missing, or take sources away.",
                count=untested,
            )
        found = _outside_hull(answer, settings)
        if found is not None:
            yield found


def _outside_hull(answer: Answer, settings: MixingSettings) -> Finding | None:
    """Return the finding about samples outside the hull, None where they are no more than noise would leave there."""
    n_solved, n_outside = len(answer.rows), int(answer.outside.sum())
    by_noise = (1 - settings.hull_probability) * n_solved
    if n_outside <= by_noise:
        return None
    sides, counts = np.unique(answer.side[answer.outside], return_counts=True)
    most = int(np.argmax(counts))
    farthest = float(answer.per_sample["hull_distance"][answer.outside].max())
    side, n_side = int(sides[most]), int(counts[most])
    if side < len(answer.chosen.sources):
        code = answer.chosen.sources[side]
        where = f"the share of {code} would have to be negative"
        why = f"a source water is missing on the side away from {code}, or values of {code} or the samples are off"
    elif [*answer.chosen.processes][side - len(answer.chosen.sources)] == "calcium_carbonate":
        where = "less than no calcium carbonate would have to be dissolved"
        why = (
            "a source with less alkalinity is missing there, calcium carbonate was made and not dissolved "
            '(calcium_carbonate = "free" allows it), or values are off'
        )
    else:
        where = "respiration would have to be negative"
        why = (
            "a source with more oxygen or less nutrients is missing there, respiration has other ratios, or values "
            "are off"
        )
    many = (
        f"most of them, {n_side},"
        if 2 * n_side > n_outside
        else f"{n_side} of them, more than on any other side,"
    )
    many = "all of them" if n_side == n_outside else many
    return Finding(
        OUTSIDE_HULL,
        Severity.NOTE,
        f"source set '{answer.chosen.name}': {_of(n_outside, n_solved)} outside what its sources can mix to, by up to "
        f"{farthest:.3g} standard uncertainties (hull_distance); expected at most {by_noise:.3g} from noise alone; "
        f"{many} lie where {where}: {why}; look at where in the ocean these samples are, then add a source or "
        f"narrow [set.valid].",
        value=str(n_outside),
        limit=f"{by_noise:.3g}",
        count=n_outside,
    )


def notices_in(findings: pa.Table) -> list[str]:
    """Return the messages about mixing among the findings of a cruise, in their order.

    Parameters
    ----------
    findings
        Table with at least the columns ``check`` and ``message``.

    """
    return [
        row["message"] for row in findings.select(["check", "message"]).to_pylist() if row["check"] in CHECKS
    ]


def _of(count: int, n_all: int) -> str:
    return f"{count} of {n_all} sample{'s' if n_all != 1 else ''} {'is' if count == 1 else 'are'}"
