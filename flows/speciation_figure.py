"""The figure of the command ``seawhence speciation``: parts of carbon and boron over pH."""

from __future__ import annotations

import io
import textwrap
from typing import TYPE_CHECKING

import matplotlib as mpl
from matplotlib.figure import Figure

from pipeline.tracers.speciation import OCEAN_PH

if TYPE_CHECKING:
    from collections.abc import Sequence

    from pipeline.tracers.speciation import Speciation

# Told apart by their dashes and by the words beside them, so that nobody depends on the colours.
# At which pH the words stand, on which side, and how many points from the curve.
_CURVES = (
    ("aqueous_co2", "CO$_2$", "#7a3b1d", "-", 4.7, "left", (6, 6)),
    ("bicarbonate", "HCO$_3^-$", "#1d5c7a", "-", 7.2, "right", (0, 8)),
    ("carbonate", "CO$_3^{2-}$", "#2f6b2f", "-", 9.7, "left", (8, -12)),
    ("borate", "B(OH)$_4^-$ of boron", "#6b6b6b", ":", 10.0, "right", (-4, 6)),
)

_WIDTH = 130  # characters of a line under the figure


def draw(found: Speciation, water: tuple[float, float, float], words: Sequence[str], form: str) -> bytes:
    """Return the figure as a file.

    Parameters
    ----------
    found
        Forms over pH.
    water
        Salinity, temperature (degC) and pressure (dbar), for the title.
    words
        What stands under the figure: its constants, and where they were not measured.
    form
        ``svg`` or ``png``. The same numbers give the same bytes with the same version of matplotlib.

    """
    # Ids in the file are made from their content, and it carries no date.
    with mpl.rc_context({"svg.hashsalt": "speciation", "font.size": 10}):
        figure = Figure(figsize=(7.0, 4.5), layout="constrained")
        axes = figure.subplots()
        axes.axvspan(*OCEAN_PH, color="#d8e6ee", zorder=0, linewidth=0)
        axes.text(sum(OCEAN_PH) / 2, 1.03, "ocean", ha="center", va="bottom")
        for name, label, colour, dashes, beside, side, offset in _CURVES:
            values = getattr(found, name)
            axes.plot(found.ph, values, color=colour, linestyle=dashes)
            at = int(abs(found.ph - beside).argmin())
            axes.annotate(
                label,
                (found.ph[at], values[at]),
                xytext=offset,
                ha=side,
                textcoords="offset points",
                color=colour,
            )
        for value, label in ((found.pk1, "pK$_1$"), (found.pk2, "pK$_2$")):
            axes.axvline(value, color="#9a9a9a", linewidth=0.8)
            axes.text(value, 0.02, f" {label} {value:.2f}", fontsize=9)
        axes.set(
            xlim=(found.ph[0], found.ph[-1]),
            ylim=(0.0, 1.12),
            xlabel="pH, total scale",
            ylabel="part of DIC, or of boron",
        )
        axes.set_title(f"salinity {water[0]:g}, {water[1]:g} °C, {water[2]:g} dbar")
        text = "\n".join(line for sentence in words for line in textwrap.wrap(sentence, _WIDTH))
        figure.supxlabel(text, fontsize=7, x=0.02, ha="left")
        file = io.BytesIO()
        figure.savefig(
            file, format=form, dpi=150, metadata={"Date": None} if form == "svg" else {"Software": None}
        )
    return file.getvalue()
