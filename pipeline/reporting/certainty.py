"""How sure the shares of a cruise are, as rows of two tables: by source, and by property."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.reporting.quantities import PRESENT, SURE
from pipeline.reporting.wording import quantity_words, unit_words
from pipeline.tables import floats, texts
from pipeline.variables import REGISTRY, RESIDUAL_PREFIX

if TYPE_CHECKING:
    from pipeline.reporting.gathered import Gathered


@dataclass(frozen=True, slots=True)
class SourceRow:
    """A source: in how many samples it is present, and how well its share is known there."""

    code: str
    name: str
    colour: str
    marker: str
    present: int
    leads: int
    leads_surely: int
    largest: float
    typical_uncertainty: float  # median where present
    largest_uncertainty: float


@dataclass(frozen=True, slots=True)
class ResidualRow:
    """A property: fitted less observed."""

    words: str
    unit: str
    count: int
    median: float
    spread: float  # half of what lies between the 16th and the 84th percentile
    farthest: float  # of largest size


def by_source(cruise: Gathered) -> list[SourceRow]:
    """Return a row for each source, in the catalogue's order."""
    rows = []
    leaders = np.array([code or "" for code in texts(cruise.samples, "leading_source")])
    sure = floats(cruise.samples, "leading_probability") >= SURE
    for number, look in enumerate(cruise.sources):
        share, spread = cruise.shares.share[:, number], cruise.shares.uncertainty[:, number]
        present = share >= PRESENT
        known = spread[present & np.isfinite(spread)]
        leads = leaders == look.code
        rows.append(
            SourceRow(
                look.code,
                look.name,
                look.colour,
                look.marker,
                int(present.sum()),
                int(leads.sum()),
                int((leads & sure).sum()),
                float(np.nanmax(share)) if np.isfinite(share).any() else np.nan,
                float(np.median(known)) if len(known) else np.nan,
                float(known.max()) if len(known) else np.nan,
            )
        )
    return rows


def by_property(cruise: Gathered) -> list[ResidualRow]:
    """Return a row for each property that was fitted."""
    rows = []
    for name in cruise.samples.column_names:
        if not name.startswith(RESIDUAL_PREFIX):
            continue
        values = floats(cruise.samples, name)
        values = values[np.isfinite(values)]
        if len(values):
            low, middle, high = np.percentile(values, (16, 50, 84))
            base = name.removeprefix(RESIDUAL_PREFIX)
            rows.append(
                ResidualRow(
                    quantity_words(base),
                    unit_words(REGISTRY[base].unit),
                    len(values),
                    float(middle),
                    float(high - low) / 2,
                    float(values[np.argmax(np.abs(values))]),
                )
            )
    return rows
