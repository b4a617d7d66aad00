"""Mixing: source catalogue, solver, optimum multiparameter analysis and tags. Importing it compiles nothing."""

from __future__ import annotations

from pipeline.mixing.absences import absent_properties
from pipeline.mixing.analysis import Resolution, prepare, resolve
from pipeline.mixing.catalogue import read_catalogue
from pipeline.mixing.entries import Catalogue
from pipeline.mixing.notices import notices_in

__all__ = [
    "Catalogue",
    "Resolution",
    "absent_properties",
    "notices_in",
    "prepare",
    "read_catalogue",
    "resolve",
]
