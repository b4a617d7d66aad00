"""A census in words and tables that can be read without the program's papers."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from flows.pages import Block, Grid, Heading, Paragraph, Sentences
from pipeline.census import Comparison
from pipeline.census.pieces import DEPTH_GAP, STATION_GAP
from pipeline.census.section import UNASKED, UNPLACED
from pipeline.census.writing import class_limits, class_rows
from pipeline.mixing.status import STATUS_WORDS
from pipeline.mixing.tags import TAG_WORDS, Tag

if TYPE_CHECKING:
    from collections.abc import Iterator

    from pipeline.census import Census

# Of a difference over its uncertainty: beyond two, chance alone is rare.
_CLEAR, _HINT = 2.0, 1.0
_MOST_NAMED = 10
_REASONS = {
    **{status.label: words for status, words in STATUS_WORDS.items()},
    Tag.UNEXPLAINED.value: TAG_WORDS[Tag.UNEXPLAINED].replace("`", ""),
    DEPTH_GAP: "samples are too far apart in depth",
    STATION_GAP: "stations are too far apart",
    UNPLACED: "depth or position is missing",
    UNASKED: "it was not to be resolved",
}


def blocks_of(found: Census | Comparison) -> list[Block]:
    """Return all that is to be told of a census, or of two."""
    if not isinstance(found, Comparison):
        return [*_census(found), *_closing(found)]
    return [*_change(found), *_census(found.one), *_census(found.other), *_closing(found.one)]


def _census(census: Census) -> Iterator[Block]:
    section, layout = census.section, census.layout
    yield Heading(f"{census.expocode}: what the section is made of")
    yield Paragraph(_extent(census))
    yield Grid([
        (_class_heading(census), "resolved" + (", km2" if layout.has_width else ""), *census.sources),
        *(
            (_class(census, row), _size(census, float(layout.resolved[row])),
             *(_percent(*pair) for pair in zip(
                 census.shares.share[row], census.shares.share_uncertainty[row], strict=True)))
            for row in class_rows(census)
        ),
    ])  # fmt: skip
    whole = float(layout.resolved[0] + sum(one[0] for one in layout.unresolved.values()))
    reasons = sorted({*layout.unresolved, *section.unresolved})
    if reasons:
        yield Grid([
            ("not resolved, because", "samples", *(("km2",) if layout.has_width else ()), "of all"),
            *(
                (_REASONS.get(reason, reason.replace("_", " ")), str(section.unresolved.get(reason, "-")),
                 *((_size(census, area),) if layout.has_width else ()), _of_all(area, whole))
                for reason in reasons
                for area in [float(layout.unresolved[reason][0]) if reason in layout.unresolved else 0.0]
            ),
        ])  # fmt: skip
    if notes := list(_notes(census)):
        yield Sentences(notes)


def _extent(census: Census) -> str:
    section, layout = census.section, census.layout
    count, samples = len(section.names), section.n_resolved
    if not layout.has_width:
        return (
            f"{samples} resolved samples of {_count(count, 'station')}, and no two stations near enough to each other"
            " to make a section: shares are those of the columns of water taken together, and there is no area."
        )
    filled = float(section.lengths[section.filled].sum())
    return (
        f"{samples} resolved samples of {_count(count, 'station')} along {filled:.0f} km of track; shares are parts of"
        f" the {float(layout.resolved[0]):.0f} km2 that are resolved, with their standard uncertainties."
    )


def _notes(census: Census) -> Iterator[str]:
    section, layout = census.section, census.layout
    for one, other, length in layout.gaps[:_MOST_NAMED]:
        yield f"Between station {one} and station {other} there are {length:.0f} km: not filled."
    if len(layout.gaps) > _MOST_NAMED:
        yield f"{len(layout.gaps) - _MOST_NAMED} more such gaps; --format json tells all."
    if layout.alone:
        more = f" and {len(layout.alone) - _MOST_NAMED} more" if len(layout.alone) > _MOST_NAMED else ""
        yield (
            f"No station is near enough to station {', '.join(layout.alone[:_MOST_NAMED])}{more}:"
            " what was sampled there is in no area."
        )
    if section.without_floor:
        yield (
            f"The depth of the sea floor is not given for {_count(section.without_floor, 'station')}: the section ends"
            " there at the deepest sample."
        )
    if not len(census.boundaries):
        yield "No density classes were given, in the settings or by --boundaries, and the catalogue's sets have none."


def _change(found: Comparison) -> Iterator[Block]:
    one, other, common, change = found.one, found.other, found.common, found.change
    yield Heading(f"{other.expocode} against {one.expocode}", 1)
    if not common.length or not common.resolved[0][0] > 0:
        yield Paragraph(
            "The two sections have nothing in common that both resolved, so that they cannot be compared:"
            " see how far apart they are, and census.apart and census.station_gap in the settings."
        )
        return
    parts = [float(common.resolved[0][0] / each.layout.resolved[0]) for each in (one, other)]
    years = abs(other.section.year - one.section.year)
    apart = f", {years:.1f} years apart" if np.isfinite(years) else ""
    yield Paragraph(
        f"Compared is what lies under both tracks and both resolved: {float(common.resolved[0][0]):.0f} km2 along"
        f" {common.length:.0f} km, {_of(parts[0])} of the first and {_of(parts[1])} of the second"
        f" section{apart}. {_nearness(found)}"
    )
    yield Sentences([_sentence(found, k) for k in range(len(one.sources))])
    rows = class_rows(one)
    if len(rows) > 1:
        yield Grid([
            (_class_heading(one), "km2", "km2 after", *one.sources),
            *(
                (_class(one, row), *(f"{float(each[row]):.0f}" for each in common.resolved),
                 *(_percent(*pair, signed=True) for pair in zip(
                     change.difference[row], change.uncertainty[row], strict=True)))
                for row in rows
            ),
        ])  # fmt: skip
        if clear := [
            _clear(found, row, k)
            for row in rows[1:]
            for k in range(len(one.sources))
            if found.change.ratio[row, k] >= _CLEAR
        ]:
            yield Paragraph(
                f"More than twice the uncertainty, of {(len(rows) - 1) * len(one.sources)} changes by class (of which"
                f" chance alone makes 5 % so large): {'; '.join(clear)}."
            )


def _clear(found: Comparison, row: int, k: int) -> str:
    cell = _percent(
        float(found.change.difference[row, k]), float(found.change.uncertainty[row, k]), signed=True
    )
    return f"{found.one.sources[k]} {_class(found.one, row)} {cell}"


def _of_all(area: float, whole: float) -> str:
    return f"{100 * area / whole:.1f} %" if whole > 0 else "-"


def _of(part: float) -> str:
    return f"{100 * part:.0f} %"


def _nearness(found: Comparison) -> str:
    first, second = found.common.stations
    return (
        f"{_count(first, 'station')} and {second} take part; the median distance of the second's from the first's track"
        f" is {found.common.off:.1f} km."
    )


def _sentence(found: Comparison, k: int) -> str:
    change, source = found.change, found.one.sources[k]
    before, after = float(change.before[0, k]), float(change.after[0, k])
    difference, uncertainty = float(change.difference[0, k]), float(change.uncertainty[0, k])
    ratio = found.change.ratio[0, k]
    if ratio >= _CLEAR:
        verdict = f"that is more than the uncertainty ({ratio:.1f} times it)"
    elif ratio >= _HINT:
        verdict = f"that is {ratio:.1f} times the uncertainty: a hint, and no evidence of a change"
    else:
        verdict = "that is less than the uncertainty: no change can be told"
    return (
        f"{source}: from {100 * before:.1f} to {100 * after:.1f} %, a change of {100 * difference:+.1f} ±"
        f" {100 * uncertainty:.1f} %; {verdict}."
    )


def _closing(census: Census) -> Iterator[Block]:
    measured = (
        "the error of a measured property is taken as the same in all samples of a cruise (census.measurement_errors)"
        if census.errors == "common"
        else "every measurement is taken to have an error of its own (census.measurement_errors), so that what a whole"
        " cruise is off by is not in it"
    )
    yield Heading("How uncertain")
    yield Paragraph(
        f"Standard deviations over the {census.members} members of the ensemble. All samples have the errors of the"
        f" sources in common, of both cruises where there are two; {measured}. What the section would hold between"
        " stations and samples is not in it."
    )


def _class_heading(census: Census) -> str:
    return f"{census.density}, kg/m3" if len(census.boundaries) else "part"


def _class(census: Census, row: int) -> str:
    low, high = class_limits(row, census.boundaries)
    if row == 0:
        return "all"
    if np.isnan(low) and np.isnan(high):
        return "no density"
    if np.isnan(low):
        return f"below {high:g}"
    return f"from {low:g}" if np.isnan(high) else f"{low:g} to {high:g}"


def _size(census: Census, area: float) -> str:
    return f"{area:.1f}" if census.layout.has_width else "-" if area == 0 else "yes"


def _percent(share: float, uncertainty: float, *, signed: bool = False) -> str:
    if np.isnan(share):
        return "-"
    return f"{100 * share:{'+' if signed else ''}.1f} ± {100 * uncertainty:.1f} %"


def _count(number: int, word: str) -> str:
    return f"{number} {word}{'' if number == 1 else 's'}"
