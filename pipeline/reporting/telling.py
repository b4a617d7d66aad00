"""What to see in the figures, in sentences made from the numbers."""

from __future__ import annotations

from collections import Counter
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing import notices_in
from pipeline.reporting.quantities import SPLIT, SURE
from pipeline.reporting.wording import listed, many, plus_minus, quantity_words, rounded, short, unit_words
from pipeline.tables import floats, texts
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from pipeline.reporting.gathered import Gathered
    from pipeline.reporting.visits import Section, Visits

HALF = 0.5
SPOKEN_SECTIONS = 3


def of_waters(cruise: Gathered) -> list[str]:
    """Return sentences on what the waters are: how many are resolved, which source leads how often, how surely."""
    total = cruise.samples.num_rows
    if not cruise.samples_are_bottles:
        return ["No bottle samples were delivered, and CTD levels are not resolved into source waters."]
    if not cruise.sources:
        return [f"No source waters were given, so none of the {many(total, 'sample')} is resolved into them."]
    leaders = Counter(code for code in texts(cruise.samples, "leading_source") if code)
    solved = sum(leaders.values())
    said = [f"{solved} of {many(total, 'sample')} are resolved into source waters."]
    if solved:
        ranks = [f"{code} in {count}" for code, count in leaders.most_common()]
        said.append(f"The largest share is that of {listed(ranks, 12)}.")
        probability = floats(cruise.samples, "leading_probability")
        unsure = int((probability < SURE).sum())
        if np.isfinite(probability).any() and not unsure:
            said.append(f"In all of them one source leads in at least {100 * SURE:.0f} % of the ensemble.")
        elif np.isfinite(probability).any():
            said.append(
                f"In {unsure} of them it is uncertain which source leads: another one does in more than"
                f" {100 * (1 - SURE):.0f} % of the ensemble. These are drawn faint."
            )
    return said


def of_sources(cruise: Gathered, found: Visits, sections: Sequence[Section]) -> list[str]:
    """Return a sentence on each source: where it is largest, and how far along a section it is above a half."""
    said: list[str] = []
    if not cruise.is_resolved:
        return said
    pressure, names = floats(cruise.samples, "pressure"), found.names
    for number, look in enumerate(cruise.sources):
        share = cruise.shares.share[:, number]
        if np.isnan(share).all():
            said.append(
                f"{look.code} ({look.name}) is in no sample: it takes part in no set that solved one."
            )
            continue
        row = int(np.nanargmax(share))
        words = (
            f"{look.code} ({look.name}) reaches {plus_minus(share[row], cruise.shares.uncertainty[row, number])} at"
            f" station {names[found.of_row[row]]}, {short(pressure[row])} dbar"
        )
        along = [_above_half(share, found, section) for section in sections[:SPOKEN_SECTIONS]]
        along = [phrase for phrase in along if phrase]
        said.append(f"{words}; {'; '.join(along)}." if along else f"{words}.")
    return said


def _above_half(share: NDArray[np.float64], found: Visits, section: Section) -> str:
    """Return in words where along a section the largest share of a cast is above a half, '' where it is nowhere."""
    largest = np.full(len(found.station), np.nan)
    known = np.isfinite(share)
    np.fmax.at(largest, found.of_row[known], share[known])
    values = largest[list(section.casts)]
    above = np.flatnonzero(values > HALF)
    judged = int(np.isfinite(values).sum())
    if not judged:
        return ""
    if not len(above):
        return f"along {section.name} it stays below {HALF} everywhere"
    names, first, last = found.names, int(above[0]), int(above[-1])
    if len(above) == judged:
        return f"along {section.name} it is above {HALF} somewhere in every cast"
    if len(above) == 1:
        return f"along {section.name} it is above {HALF} at station {names[section.casts[first]]} alone"
    after = np.flatnonzero(np.isfinite(values[last + 1 :]))
    fall = ""
    if len(after):
        fall = f", and falls below it at station {names[section.casts[last + 1 + int(after[0])]]}"
    return (
        f"along {section.name} it is above {HALF} in {len(above)} of {judged} casts, between station"
        f" {names[section.casts[first]]} ({section.distance[first]:.0f} km) and station"
        f" {names[section.casts[last]]} ({section.distance[last]:.0f} km){fall}"
    )


def of_certainty(cruise: Gathered) -> list[str]:
    """Return sentences on how sure the shares are, and on what cannot be told apart."""
    said = []
    chi = floats(cruise.samples, "reduced_chi_square")
    if np.isfinite(chi).any():
        said.append(
            f"The reduced chi-square has a median of {short(float(np.nanmedian(chi)))} and is above 1 in"
            f" {int((chi > 1).sum())} of {int(np.isfinite(chi).sum())} samples."
        )
    pairs = confused(cruise)
    if pairs:
        worst = [f"{one} and {other} ({count})" for (one, other), count in pairs]
        said.append(f"Where the leader is uncertain, it stands mostly between {listed(worst, 4)}.")
    return [*said, *(notice[:1].upper() + notice[1:] for notice in notices_in(cruise.findings))]


def confused(cruise: Gathered) -> list[tuple[tuple[str, str], int]]:
    """Return the pairs of sources with the two largest shares where the leader is uncertain, the commonest first."""
    share, probability = cruise.shares.share, floats(cruise.samples, "leading_probability")
    unsure = np.flatnonzero((probability < SURE) & (np.isfinite(share).sum(axis=1) > 1))
    counts: Counter[tuple[str, str]] = Counter()
    for row in unsure:
        two = sorted(np.argsort(np.nan_to_num(-share[row], nan=np.inf), kind="stable")[:2].tolist())
        counts[cruise.sources[two[0]].code, cruise.sources[two[1]].code] += 1
    return sorted(counts.items(), key=lambda one: (-one[1], one[0]))


def of_split(cruise: Gathered, found: Visits) -> list[str]:
    """Return a sentence on each quantity that is split: what respiration did to it, and where most."""
    said = []
    pressure, names = floats(cruise.samples, "pressure"), found.names
    for name in SPLIT:
        changed, brought = (
            floats(cruise.samples, f"{name}_from_{part}") for part in ("respiration", "sources")
        )
        both = np.isfinite(changed) & np.isfinite(brought)
        if not both.any():
            continue
        row = int(np.nanargmax(np.abs(np.where(both, changed, np.nan))))
        spread = floats(cruise.samples, f"{name}_from_respiration_uncertainty")[row]
        unit = unit_words(REGISTRY[f"{name}_from_respiration"].unit)
        if not changed[row]:
            said.append(f"{quantity_words(name)}: respiration did not change it in any sample.")
            continue
        said.append(
            f"{quantity_words(name)}: respiration changed it by {short(float(np.median(changed[both])))} {unit} in the"
            f" median, and most by {rounded(changed[row], spread)} {unit} at station {names[found.of_row[row]]},"
            f" {short(pressure[row])} dbar, where the sources brought {short(brought[row])}."
        )
    return said
