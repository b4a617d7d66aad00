"""Crossovers: whether cruises that sampled the same deep water agree, and what would make them.

Deep values of neighbouring stations are compared, cruise by cruise, and corrections are sought for all cruises
at once. Nothing is corrected here.
"""

from __future__ import annotations

from pipeline.crossovers.comparing import Crossover, compare_cruises, where_corrected
from pipeline.crossovers.page import page, short_form
from pipeline.crossovers.proposing import Proposal, propose
from pipeline.crossovers.stations import CruiseStations, as_delivered, columns_used, gather_stations
from pipeline.crossovers.writing import offsets_table, proposals_table

__all__ = [
    "Crossover",
    "CruiseStations",
    "Proposal",
    "as_delivered",
    "columns_used",
    "compare_cruises",
    "gather_stations",
    "offsets_table",
    "page",
    "proposals_table",
    "propose",
    "short_form",
    "where_corrected",
]
