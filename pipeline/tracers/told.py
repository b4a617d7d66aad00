"""What is told of carbon, its isotopes and the depths of a station, by the name it has in findings. Data only.

The checks of delivered values are in ``pipeline.checking``; what is here needs quantities that were computed.
"""

from __future__ import annotations

from dataclasses import dataclass

from pipeline.findings import Severity

NOTE, DOUBT = Severity.NOTE, Severity.DOUBT
HEADINGS = ("check", "looks for", "severity", "settings")


@dataclass(frozen=True, slots=True)
class Told:
    """One thing that is looked for: its name in findings, how much it may matter, and the settings it follows."""

    name: str
    looks_for: str
    severities: tuple[Severity, ...]
    settings: tuple[str, ...] = ()  # by section and name


TOLD: tuple[Told, ...] = (
    Told("carbon-consistency", "A third measured quantity that contradicts the pair, and which of the three is at"
         " fault; how far all samples agree", (DOUBT, NOTE), ("carbonate.consistency", "carbonate.uncertainty",
                                                      "carbonate.gas_uncertainty")),
    Told("carbon-dilution", "Water so fresh that what it is normalised to says little", (NOTE,),
         ("tracers.reference_salinity", "tracers.dic_without_salt", "tracers.alkalinity_without_salt")),
    Told("carbon-inputs", "Samples with two quantities of the carbonate system and no salinity, temperature or pressure"
         " for its constants", (NOTE,)),
    Told("carbon-nutrients", "Carbonate systems whose silicate or phosphate was taken as none", (NOTE,)),
    Told("carbon-range", "pH, gas and temperatures of measurement that no sea water and no laboratory has", (DOUBT,)),
    Told("carbon-temperature", "pH and gas without the temperature they were measured at", (NOTE,),
         ("carbonate.assumed_temperature",)),
    Told("carbon-unknown-scale", "A column that has the name of a pH, on a scale that nothing says", (NOTE,)),
    Told("carbon-unsolvable", "Two quantities that no sea water has together", (DOUBT,)),
    Told("carbon-validity", "Constants that are used where nobody measured them", (NOTE,),
         ("carbonate.carbonic", "carbonate.fluoride", "carbonate.bisulfate")),
    Told("isotope-atmosphere", "Samples of years for which there is no atmosphere", (NOTE,),
         ("tracers.atmosphere_delta_carbon_13",)),
    Told("isotope-inputs", "Carbon-13 without what its components need", (NOTE,)),
    Told("isotope-validity", "Equilibrium of carbon-13 outside the temperatures it was measured at", (NOTE,),
         ("tracers.equilibrium_carbon_13",)),
    Told("saturation-horizon", "A horizon between bottles too far apart, one of several, or one that is hardly known",
         (NOTE,), ("profiles.gap", "profiles.horizon_uncertainty")),
)  # fmt: skip


def markdown() -> str:
    """Return the table of all that is told as Markdown."""
    rows = [HEADINGS, ("---",) * len(HEADINGS)]
    rows += [
        (
            f"`{one.name}`",
            one.looks_for,
            ", ".join(one.severities),
            ", ".join(f"`{name}`" for name in one.settings),
        )
        for one in TOLD
    ]
    return "\n".join(f"| {' | '.join(cells)} |" for cells in rows)
