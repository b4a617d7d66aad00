"""The page of one cruise and the CSV files beside it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.reporting import telling
from pipeline.reporting.certainty import by_property, by_source
from pipeline.reporting.csv_files import cruise_files
from pipeline.reporting.doubts import GRAVEST_FIRST, SEVERITY_WORDS, grouped, refused
from pipeline.reporting.files import csv_path, file_name
from pipeline.reporting.page_data import date_words, page_data
from pipeline.reporting.pages import render
from pipeline.reporting.quantities import drawable
from pipeline.reporting.thinning import thinned
from pipeline.reporting.visits import sections_of, visits
from pipeline.reporting.wording import listed

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pipeline.reporting.gathered import Gathered
    from pipeline.reporting.visits import Section, Visits

SCRIPTS = (
    "numbers.js", "theme.js", "store.js", "gridding.js", "figures.js", "layers.js", "keyboard.js",
    "waters.js", "sections.js", "certainty.js", "stations.js", "cruise.js",
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class Facts:
    """What stands under the title."""

    sections: str
    stations: int
    samples: int
    levels: int
    first_day: str
    last_day: str


def cruise_page(cruise: Gathered) -> dict[str, bytes]:
    """Return the page of a cruise and its CSV files by their paths. The same tables give the same bytes."""
    found = visits(cruise.samples)
    sections = sections_of(found)
    quantities = drawable(cruise)
    levels = thinned(cruise.casts)
    groups = grouped(cruise)
    tables = cruise_files(cruise, found, sections, quantities, levels)
    page = render(
        "cruise.html",
        page_data(cruise, found, sections, quantities, levels),
        SCRIPTS,
        cruise=cruise,
        made=cruise.provenance,
        facts=_facts(cruise, found, sections),
        csv={name: csv_path(cruise.expocode, name) for name in tables},
        refused=refused(cruise.rejects),
        doubts=[
            (severity, SEVERITY_WORDS[severity], [g for g in groups if g.severity is severity])
            for severity in GRAVEST_FIRST
        ],
        waters=telling.of_waters(cruise),
        sources=telling.of_sources(cruise, found, sections),
        certainty=telling.of_certainty(cruise),
        split=telling.of_split(cruise, found),
        by_source=by_source(cruise),
        by_property=by_property(cruise),
        confused=telling.confused(cruise),
        off=_off(found, sections),
        has_samples=cruise.samples.num_rows > 0,
        thinned=(levels.num_rows, cruise.casts.num_rows),
    )
    return {file_name(cruise.expocode): page, **{csv_path(cruise.expocode, n): t for n, t in tables.items()}}


def _facts(cruise: Gathered, found: Visits, sections: tuple[Section, ...]) -> Facts:
    known = found.time[np.isfinite(found.time)]
    first, last = (float(known.min()), float(known.max())) if len(known) else (np.nan, np.nan)
    return Facts(
        listed([section.name for section in sections]),
        len(set(found.station)),
        cruise.samples.num_rows if cruise.samples_are_bottles else 0,
        cruise.casts.num_rows,
        date_words(first),
        date_words(last),
    )


def _off(found: Visits, sections: tuple[Section, ...]) -> Mapping[str, str]:
    """Return by section which casts are left out of it, in words."""
    return {
        section.name: listed([f"station {found.names[cast]}" for cast in section.off])
        for section in sections
        if section.off
    }
