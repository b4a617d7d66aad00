"""Crossovers and proposals in sentences: one page of Markdown, and its short form."""

from __future__ import annotations

import json
import math
import re
from typing import TYPE_CHECKING

from pipeline.crossovers.proposing import IN_FORCE
from pipeline.crossovers.quantities import CorrectionKind, Surface
from pipeline.crossovers.writing import as_part, in_unit

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping, Sequence

    from pipeline.crossover_settings import CrossoverSettings
    from pipeline.crossovers.comparing import Crossover
    from pipeline.crossovers.proposing import Proposal
    from pipeline.crossovers.stations import CruiseStations

# What pure numbers are called; all other units are the registry's.
_PURE = {"1": "", "1e-3": "per mil"}
_SURFACES = {
    Surface.DENSITY: "density",
    Surface.TEMPERATURE: "potential temperature",
    Surface.PRESSURE: "pressure",
}

LIMITS = """\
## What this can tell, and what not

- Crossovers tell differences. Which of two cruises is right they do not tell: the corrections are the smallest that
  make all agree, each cruise's error being presumed to be zero with a standard deviation of {prior:g} times the limit.
  Name a cruise that is right as `[crossovers] reference = ["EXPOCODE"]`, and the others are corrected towards it.
  Cruises that nothing connects are corrected apart, and may differ.
- An offset is a calibration only where the deep water has not changed between the visits. What the ocean may have
  changed by in one place is presumed to be {places:g} times the limit, and more where the offset differs from place to
  place; a change that is the same everywhere looks like a calibration.
- Only bottle values are compared, those that flags and checks let be used; the CTD's salinity and oxygen are calibrated
  to them. pH is compared where it was measured at 25 degrees.
- A wrong salinity shifts the densities at which all else is compared; these are the archive's, with its corrections of
  salinity. Where salinities differ by more than their limit, correct them first, run again, and compare again.
- Uncertainties are standard uncertainties. Pairs of stations that share a station are not counted as independent.
- When in doubt, do not correct.
"""


def page(
    cruises: Sequence[CruiseStations],
    crossovers: Sequence[Crossover],
    proposals: Sequence[Proposal],
    settings: CrossoverSettings,
    applied: Mapping[str, Mapping[str, object]],
    left: Mapping[tuple[str, str, str], Crossover],
) -> str:
    """Return the page.

    Parameters
    ----------
    cruises
        All that were looked at.
    crossovers, proposals
        What was found.
    settings
        What it was found with.
    applied
        The corrections that the archive was made with, by cruise and quantity.
    left
        The crossovers with these corrections made, by key, where ``crossovers`` are without them.

    """
    lines = [
        "# Crossovers",
        "",
        *_opening(cruises, crossovers, settings, applied),
        "",
        "## Proposed corrections",
        "",
    ]
    wanted = [proposal for proposal in proposals if proposal.proposed]
    lines += [f"- {proposal_sentence(p)}" for p in wanted] or ["None."]
    held = [p for p in proposals if not p.proposed and p.size > p.quantity.limit and p.why_not != IN_FORCE]
    lines += [f"- Not proposed: {proposal_sentence(p)[:-1]}; {p.why_not}." for p in held]
    lines += _block(wanted, crossovers, settings, applied)
    if standing := [p for p in proposals if p.in_force]:
        lines += ["", "## Corrections in force", "", *(f"- {in_force_sentence(p)}" for p in standing)]
    lines += ["", "## Offsets", ""]
    lines += [f"- {offset_sentence(c, settings, left.get(c.key))}" for c in crossovers] or [
        "No two cruises could be compared."
    ]
    lines += ["", *_all_corrections(proposals)]
    return "\n".join(lines) + "\n" + LIMITS.format(prior=settings.prior, places=settings.between_places)


def short_form(
    crossovers: Sequence[Crossover],
    proposals: Sequence[Proposal],
    settings: CrossoverSettings,
    left: Mapping[tuple[str, str, str], Crossover],
) -> list[str]:
    """Return the lines for a terminal: large offsets, what is in force, and what is proposed."""
    large = [c for c in crossovers if abs(c.offset) > c.quantity.limit and not c.agrees]
    lines = [f"offset   {offset_sentence(c, settings, left.get(c.key))}" for c in large]
    lines += [f"in force {in_force_sentence(p)}" for p in proposals if p.in_force]
    lines += [f"propose  {proposal_sentence(p)}" for p in proposals if p.proposed]
    return lines


def offset_sentence(crossover: Crossover, settings: CrossoverSettings, left: Crossover | None = None) -> str:
    """Return one crossover in one sentence or a few, and what is left of it with the corrections in force."""
    c, words = crossover, crossover.quantity.words
    how_much = _how_much(c)
    apart = "" if math.isnan(c.years_apart) else f", {abs(c.years_apart):.1f} years apart"
    where = f"below {settings.pressure:g} dbar, at equal {' or '.join(_SURFACES[s] for s in c.surfaces)}"
    pairs = f"{_many(c.station_pairs, 'station pair')} in {_many(c.places, 'place')}, {_many(c.levels, 'level')}{apart}"
    if c.agrees:
        said = f"{c.expocode} {words} agrees with {c.other}: {how_much}, {where} ({pairs})."
    else:
        said = f"{c.expocode} {words} is {how_much} than {c.other}, {where} ({pairs})."
    scale, unit = (100, " %") if c.relative else (1, _unit(c.quantity.unit))
    if c.between_places > 1.001 * settings.between_places * c.quantity.limit:
        spread = scale * c.between_places
        said += (
            f" It differs from place to place by {rounded(spread, spread).split()[0]}{unit} (standard deviation), more"
            " than casts explain: the ocean may have changed there."
        )
    if c.differs_with_depth:
        contrast = f"{rounded(scale * abs(c.contrast), scale * c.contrast_uncertainty)}{unit}"
        said += (
            f" Its lower half is {contrast} {'higher' if c.contrast > 0 else 'lower'} than its upper, which no"
            f" {'factor' if c.relative else 'constant'} explains: the ocean may have changed, or the error is"
            f" {'a constant' if c.relative else 'a factor'}."
        )
    if left is not None:
        said += f" With the corrections in force it {'agrees' if left.agrees else 'is off still'}: {_how_much(left)}."
    return said


def _how_much(crossover: Crossover) -> str:
    """Return an offset in words: '3.1 +- 0.4 umol kg-1 (1.5 +- 0.2 %) higher'."""
    c = crossover
    difference, uncertainty = in_unit(c)
    words = f"{rounded(abs(difference), uncertainty)}{_unit(c.quantity.unit)}"
    if c.relative:
        part, its = as_part(c.offset), math.exp(c.offset) * c.uncertainty
        words += f" ({rounded(100 * abs(part), 100 * its)} %)"
    return f"{words} {'higher' if difference > 0 else 'lower'}"


def in_force_sentence(proposal: Proposal) -> str:
    """Return which correction is in force, and what remains."""
    p = proposal
    said = f"{p.expocode} {p.quantity.words} {p.in_force};"
    if p.remains is None or p.remains_uncertainty is None:
        return f"{said} values are compared with it."
    if p.why_not == IN_FORCE:
        worth = ", not worth another correction"
    else:
        worth = "; another is proposed in its place" if p.proposed else ""
    return f"{said} what remains: {_correction(p, p.remains, p.remains_uncertainty)}{worth}."


def _correction(proposal: Proposal, value: float, uncertainty: float) -> str:
    """Return a correction in words: 'times 0.973 +- 0.004'."""
    if proposal.quantity.kind is CorrectionKind.MULTIPLICATIVE:
        return f"times {rounded(value, uncertainty)}"
    return f"plus {rounded(value, uncertainty)}{_unit(proposal.quantity.unit)}"


def proposal_sentence(proposal: Proposal) -> str:
    """Return one correction in one sentence."""
    p = proposal
    how = _correction(p, p.correction, p.uncertainty)
    if p.quantity.kind is CorrectionKind.MULTIPLICATIVE:
        limit = f"{100 * p.quantity.limit:g} %"
    else:
        limit = f"{p.quantity.limit:g}{_unit(p.quantity.unit)}"
    return (
        f"{p.expocode} {p.quantity.words} {how} would agree with the others ({_many(p.crossovers, 'crossover')};"
        f" limit {limit})."
    )


def rounded(value: float, uncertainty: float) -> str:
    """Return '3.1 +- 0.4': both to the second digit of the uncertainty."""
    if not (math.isfinite(uncertainty) and uncertainty > 0):
        return f"{value:g} +- {uncertainty:g}"
    digits = 1 - math.floor(math.log10(uncertainty))
    if digits < 0:
        return f"{round(value, digits):.0f} +- {round(uncertainty, digits):.0f}"
    return f"{value:.{digits}f} +- {uncertainty:.{digits}f}"


def _opening(
    cruises: Sequence[CruiseStations],
    crossovers: Sequence[Crossover],
    settings: CrossoverSettings,
    applied: Mapping[str, Mapping[str, object]],
) -> Iterator[str]:
    met = {c.expocode for c in crossovers} | {c.other for c in crossovers}
    yield (
        f"{_many(len(cruises), 'cruise')}, of which {len(met)} come within {settings.distance:g} degrees of another"
        f" with samples below {settings.pressure:g} dbar. Values are compared as"
        f" {'delivered' if settings.values == 'delivered' else 'corrected'}."
    )
    if settings.reference:
        yield f"Taken as right: {', '.join(settings.reference)}."
    standing = [f"{expocode} {name}" for expocode, mine in sorted(applied.items()) for name in sorted(mine)]
    if standing:
        both = (
            " Where they matter, it is told what remains with them." if settings.values == "delivered" else ""
        )
        yield f"The archive has corrections of {', '.join(standing)}.{both}"
    for cruise in cruises:
        for name, count in cruise.left_out.items():
            yield f"{cruise.expocode}: {count} of {name} measured at another temperature than others take no part."


def _block(
    wanted: Sequence[Proposal],
    crossovers: Sequence[Crossover],
    settings: CrossoverSettings,
    applied: Mapping[str, Mapping[str, object]],
) -> Iterator[str]:
    """Yield the settings that would make the proposed corrections."""
    if not wanted:
        return
    if settings.values == "corrected" and any(p.quantity.name in applied.get(p.expocode, {}) for p in wanted):
        yield ""
        yield "These come on top of corrections that the archive has: multiply the factors, or add what is added."
        return
    yield ""
    yield "For the settings file, as they are, in place of earlier ones of the same cruise and quantity:"
    yield ""
    yield "```toml"
    for position, proposal in enumerate(wanted):
        if position:
            yield ""
        partners = {c.other if c.expocode == proposal.expocode else c.expocode
                    for c in crossovers
                    if c.quantity is proposal.quantity and proposal.expocode in {c.expocode, c.other}}  # fmt: skip
        yield from _entry(proposal, proposal.quantity.name, partners)
        if proposal.quantity.calibrated:
            yield "# and where the CTD was calibrated to these bottles:"
            yield from (f"# {line}" for line in _entry(proposal, proposal.quantity.calibrated, partners))
    yield "```"


def _entry(proposal: Proposal, name: str, partners: Iterable[str]) -> Iterator[str]:
    digits = max(1 - math.floor(math.log10(proposal.uncertainty)), 0)
    key = proposal.expocode
    if not re.fullmatch(r"[A-Za-z0-9_-]+", key):
        key = json.dumps(key)
    what = "factor" if proposal.quantity.kind is CorrectionKind.MULTIPLICATIVE else "add"
    reason = (
        f"crossovers with {_listed(sorted(partners))}; standard uncertainty {proposal.uncertainty:.{digits}f}"
    )
    yield f"[corrections.{key}.{name}]"
    yield f"{what} = {float(f'{proposal.correction:.{digits}f}')!r}"
    yield f"reason = {json.dumps(reason, ensure_ascii=False)}"


def _all_corrections(proposals: Sequence[Proposal]) -> Iterator[str]:
    if not proposals:
        return
    yield "## Least-squares corrections of all cruises"
    yield ""
    yield (
        "| cruise | quantity | correction | in force | what remains | limit | crossovers | group | proposed |"
        " why not |"
    )
    yield "|---|---|---|---|---|---|---|---|---|---|"
    for p in proposals:
        relative = p.quantity.kind is CorrectionKind.MULTIPLICATIVE
        mark, unit = ("times ", "") if relative else ("", _unit(p.quantity.unit))
        value = "none" if p.uncertainty == 0 else f"{mark}{rounded(p.correction, p.uncertainty)}{unit}"
        remains = (
            f"{mark}{rounded(p.remains, p.remains_uncertainty or 0.0)}{unit}" if p.remains is not None else ""
        )
        yield (
            f"| {p.expocode} | {p.quantity.words} | {value} | {p.in_force} | {remains} | {p.quantity.limit:g}{unit} |"
            f" {p.crossovers} | {p.group} | {'yes' if p.proposed else 'no'} | {p.why_not} |"
        )
    yield ""


def _unit(unit: str) -> str:
    text = _PURE.get(unit, unit)
    return f" {text}" if text else ""


def _many(count: int, word: str) -> str:
    return f"{count} {word}{'' if count == 1 else 's'}"


def _listed(names: Sequence[str]) -> str:
    """Return names for a sentence, the first few of many."""
    few = 6
    more = f" and {len(names) - few} more" if len(names) > few else ""
    return ", ".join(names[:few]) + more
