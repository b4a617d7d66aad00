"""Colours: one of a set that the colour-blind can tell apart for each source, even scales for quantities."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable

# Okabe and Ito 2008, "Color Universal Design", in an order of ours: black is left out, which does not show on a dark
# page, and yellow comes last, which is weak on a light one. Values as bokeh.palettes has them (``Colorblind8``).
SOURCE_COLOURS = ("#0072B2", "#E69F00", "#009E73", "#D55E00", "#56B4E9", "#CC79A7", "#F0E442")
# Told apart by form as well; with the eighth source the colours begin anew and the forms do not.
SOURCE_MARKERS = (
    "circle", "square", "triangle", "diamond", "inverted_triangle", "hex", "star",
    "plus", "cross", "asterisk", "square_pin", "triangle_pin",
)  # fmt: skip
NO_SOURCE = "#8a8a8a"  # of samples without a leading source


@dataclass(frozen=True, slots=True)
class SourceLook:
    """How a source is named and drawn, everywhere."""

    code: str
    name: str
    colour: str
    marker: str
    preformed_salinity: float = math.nan  # g kg-1, as the catalogue gives it
    conservative_temperature: float = math.nan  # degree_C


def source_looks(sources: Iterable[tuple[str, str, float, float]]) -> tuple[SourceLook, ...]:
    """Return the looks of sources by their order in the catalogue.

    Parameters
    ----------
    sources
        Of each its code, its name, Preformed Salinity (g kg-1) and Conservative Temperature (degree_C), NaN where
        not known.

    """
    return tuple(
        SourceLook(
            code,
            name,
            SOURCE_COLOURS[number % len(SOURCE_COLOURS)],
            SOURCE_MARKERS[number % len(SOURCE_MARKERS)],
            salinity,
            temperature,
        )
        for number, (code, name, salinity, temperature) in enumerate(sources)
    )


def scales() -> dict[str, list[str]]:
    """Return the colours of the scales, from low to high: evenly perceived, in grey too."""
    from bokeh.palettes import Cividis256, Viridis256  # noqa: PLC0415 - loaded where a page is made

    return {"viridis": list(Viridis256), "cividis": list(Cividis256)}
