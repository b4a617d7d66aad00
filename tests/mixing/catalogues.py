"""A small invented catalogue as text, of which a test changes what it is about."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pipeline.mixing.catalogue import parse_catalogue

if TYPE_CHECKING:
    from pipeline.mixing.entries import Catalogue

TEXT = """\
[catalogue]
title = "Invented"
reference = "no real ocean"

[[source]]
code = "NOR"
name = "Northern water"
[source.properties]
conservative_temperature = { value = 2.0, uncertainty = 0.1 }
preformed_salinity = { value = 35.0, uncertainty = 0.01 }
oxygen = { value = 290.0, uncertainty = 3.0 }
phosphate = { value = 1.0, uncertainty = 0.03 }
nitrate = { value = 14.0, uncertainty = 0.4 }

[[source]]
code = "SOU"
name = "Southern water"
[source.properties]
conservative_temperature = { value = -0.5, uncertainty = 0.2 }
preformed_salinity = { value = 34.7, uncertainty = 0.01 }
oxygen = { value = 250.0, uncertainty = 3.0 }
phosphate = { value = 2.2, uncertainty = 0.04 }
nitrate = { value = 32.0, uncertainty = 0.5 }

[[set]]
name = "deep"
sources = ["NOR", "SOU"]
properties = ["conservative_temperature", "preformed_salinity", "oxygen", "phosphate", "nitrate"]
respiration = "non_negative"
[set.valid]
pressure = [1000.0, 6000.0]
"""
NAME = "sources.toml"


def changed(*changes: tuple[str, str], end: str = "") -> str:
    """Return the text with the first of each given passage replaced, and ``end`` behind it."""
    text = TEXT
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new, 1)
    return text + end


def catalogue(*changes: tuple[str, str], end: str = "") -> Catalogue:
    """Return the changed catalogue."""
    return parse_catalogue(changed(*changes, end=end), NAME)
