"""Mixing: source catalogue, solver, optimum multiparameter analysis and tags. Importing it compiles nothing."""

from __future__ import annotations

from pipeline.mixing.analysis import Resolution, resolve
from pipeline.mixing.catalogue import read_catalogue
from pipeline.mixing.entries import Catalogue

__all__ = ["Catalogue", "Resolution", "read_catalogue", "resolve"]
