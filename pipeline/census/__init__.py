"""The census: how much of a section each source water makes up, and how that changed from one cruise to another.

Areas are integrals between stations and depths; their uncertainties come from the members of the ensemble, since all
samples have the errors of the sources in common.
"""

from __future__ import annotations

from pipeline.census.counting import Census, Comparison, Resolved, compare, take_census
from pipeline.census.writing import census_table, class_name

__all__ = ["Census", "Comparison", "Resolved", "census_table", "class_name", "compare", "take_census"]
