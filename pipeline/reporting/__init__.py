"""Pages that people look at, made from the archive alone: one of the archive, one of each cruise.

cruise = gather(store, contents.cruises[expocode], settings.use)
files = cruise_page(cruise)       # path: bytes, the page and the data of its figures
"""

from __future__ import annotations

from pipeline.reporting.cruise_page import cruise_page
from pipeline.reporting.gathered import Gathered, gather

__all__ = ["Gathered", "cruise_page", "gather"]
