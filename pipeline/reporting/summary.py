"""What the page of the archive says of one cruise, small enough to keep for thousands."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from pipeline.findings import Severity
from pipeline.reporting.occupations import Occupation, occupations
from pipeline.reporting.page_data import date_words
from pipeline.reporting.visits import sections_of, visits
from pipeline.tables import texts

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from pipeline.archive import CruiseContents
    from pipeline.reporting.gathered import Gathered

NO_TAG = ("mixed", "unexplained", "undetermined", "incomplete", "outside")


@dataclass(frozen=True, slots=True)
class Summary:
    """One cruise in the list of the archive."""

    expocode: str
    troubles: tuple[str, ...] = ()  # why it could not be read
    revision: int = 0
    sections: tuple[str, ...] = ()
    first_day: str = ""
    last_day: str = ""
    time: float = np.nan
    stations: int = 0
    samples: int = 0
    levels: int = 0
    rejected: int = 0
    findings: Mapping[str, int] = field(default_factory=dict)  # rows spoken for, by severity
    tagged: int | None = None  # samples with a source as their tag, None without sources
    catalogue: str = ""
    tracks: tuple[
        tuple[NDArray[np.float64], NDArray[np.float64]], ...
    ] = ()  # latitude and longitude of each line
    occupations: tuple[Occupation, ...] = ()

    @property
    def is_whole(self) -> bool:
        """Whether it has a page of its own."""
        return not self.troubles


def summary(cruise: Gathered) -> Summary:
    """Return what the archive's page says of a whole cruise."""
    found = visits(cruise.samples)
    sections = sections_of(found)
    made = cruise.provenance
    known = found.time[np.isfinite(found.time)]
    first, last = (float(known.min()), float(known.max())) if len(known) else (np.nan, np.nan)
    severities = Counter(texts(cruise.findings, "severity"))
    codes = {look.code for look in cruise.sources}
    return Summary(
        cruise.expocode,
        revision=made.revision,
        sections=tuple(section.name for section in sections),
        first_day=date_words(first),
        last_day=date_words(last),
        time=first,
        stations=len(set(found.station)),
        samples=cruise.samples.num_rows if cruise.samples_are_bottles else 0,
        levels=cruise.casts.num_rows,
        rejected=cruise.rejects.num_rows,
        findings={severity.value: severities[severity.value] for severity in Severity},
        tagged=sum(tag in codes for tag in texts(cruise.samples, "tag")) if made.catalogue_sha256 else None,
        catalogue=made.catalogue_title,
        tracks=tuple(
            (found.latitude[list(section.casts)], found.longitude[list(section.casts)])
            for section in sections
        ),
        occupations=tuple(occupations(cruise, found, sections)),
    )


def unreadable(cruise: CruiseContents, trouble: str = "") -> Summary:
    """Return what is said of a cruise that is not whole, or whose tables cannot be read."""
    return Summary(cruise.expocode, troubles=(*cruise.troubles, *([trouble] if trouble else [])))
