"""Pages that people look at, made from the archive alone: one of the archive, one of each cruise.

cruise = gather(store, contents.cruises[expocode], settings.use)
files = cruise_page(cruise)       # path: bytes, the page and the data of its figures
files |= archive_page([summary(cruise)], frozenset({expocode}))
"""

from __future__ import annotations

from pipeline.reporting.archive_page import archive_page
from pipeline.reporting.cruise_page import cruise_page
from pipeline.reporting.files import file_name
from pipeline.reporting.gathered import Gathered, gather
from pipeline.reporting.summary import Summary, summary, unreadable

__all__ = [
    "Gathered",
    "Summary",
    "archive_page",
    "cruise_page",
    "file_name",
    "gather",
    "summary",
    "unreadable",
]
