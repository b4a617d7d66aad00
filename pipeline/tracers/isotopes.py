"""Carbon-13 of DIC: what equilibrium with the air would make of it, what biology does, and what is left.

Arrays in, arrays out. Enrichments are per mil against carbon dioxide of the air, temperatures in degC. NaN in gives
NaN out.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from pipeline.tracers.choices import chosen
from pipeline.tracers.stoichiometry import stoichiometry

if TYPE_CHECKING:
    from collections.abc import Callable

    from pipeline.settings import TracerSettings
    from pipeline.tables import FloatArray


class EquilibriumForm(StrEnum):
    """Published forms of the enrichment of DIC at equilibrium with the air."""

    ZHANG_1995 = "zhang_1995"
    ZHANG_1995_ABSTRACT = "zhang_1995_abstract"
    ZHANG_1995_SPECIES = "zhang_1995_species"


class SlopeName(StrEnum):
    """Where the slope of carbon-13 against phosphate comes from."""

    STOICHIOMETRY = "stoichiometry"
    BROECKER_MAIER_REIMER_1992 = "broecker_maier_reimer_1992"
    LYNCH_STIEGLITZ_1995 = "lynch_stieglitz_1995"


class ConstantName(StrEnum):
    """Carbon-13 of DIC without phosphate, by citation."""

    LYNCH_STIEGLITZ_1995 = "lynch_stieglitz_1995"
    CHARLES_1993 = "charles_1993"


@dataclass(frozen=True, slots=True)
class Line:
    """A fit ``intercept + slope T``, with the standard uncertainties of both."""

    intercept: float
    slope: float
    intercept_uncertainty: float
    slope_uncertainty: float

    def at(self, temperature: FloatArray) -> FloatArray:
        """Return the fit, per mil."""
        return self.intercept + self.slope * temperature

    def variance(self, temperature: FloatArray) -> FloatArray:
        """Return the squared standard uncertainty of the fit, intercept and slope independent."""
        return self.intercept_uncertainty**2 + (self.slope_uncertainty * temperature) ** 2


@dataclass(frozen=True, slots=True)
class DicLine:
    """The empirical fit ``line(T) + carbonate T f``, f being the part of DIC that is carbonate."""

    line: Line
    carbonate: float
    carbonate_uncertainty: float


# Zhang, Quay and Wilbur 1995, GCA 59:107-114: slopes and intercepts verified, uncertainties from memory. The
# slope of CO2(aq) has either sign in public codes. It is positive here: the enrichment of a dissolved gas goes
# towards zero as it warms, from -1.31 at 0 degC upwards, as Vogel et al. 1970 measured (-0.373e3/T + 0.19 per
# mil, whose slope is +0.0042 at 25 degC), and as the protocol of the ocean models has it (Orr et al. 2017,
# from memory).
AQUEOUS_CO2 = Line(-1.31, 0.0049, 0.06, 0.003)
BICARBONATE = Line(10.78, -0.1141, 0.04, 0.0028)
CARBONATE = Line(7.22, -0.052, 0.46, 0.03)
DIC_ZHANG_1995 = DicLine(Line(10.53, -0.105, 0.05, 0.002), 0.014, 0.01)  # verified
DIC_ZHANG_1995_ABSTRACT = DicLine(Line(10.53, -0.107, 0.05, 0.002), 0.0144, 0.01)  # from memory
# Per mil, of gas transfer; the mean of -0.81 at 21 degC and -0.95 at 5 degC. Not applied anywhere: it acts
# on the flux between air and sea, and a sample does not tell the flux.
KINETIC_ZHANG_1995 = -0.88  # verified
MEASURED_FROM, MEASURED_TO = 5.0, 25.0  # degC, of these fits (from memory)

# Broecker and Maier-Reimer 1992, GBC 6:315 (from memory).
CARBON_PER_PHOSPHATE_BROECKER_MAIER_REIMER_1992 = 128.0
# Lynch-Stieglitz et al. 1995, GBC 9:653, and Charles et al. 1993, both from memory: per mil at no
# phosphate, and per umol/kg of it.
SLOPE_LYNCH_STIEGLITZ_1995 = -1.1
CONSTANTS: Mapping[ConstantName, float] = MappingProxyType(
    {ConstantName.LYNCH_STIEGLITZ_1995: 2.7, ConstantName.CHARLES_1993: 2.75}
)


@dataclass(frozen=True, slots=True)
class Fractions:
    """Parts of DIC, one element a sample, and the standard uncertainties of two of them."""

    aqueous_co2: FloatArray
    bicarbonate: FloatArray
    carbonate: FloatArray
    aqueous_co2_uncertainty: FloatArray
    carbonate_uncertainty: FloatArray


def dic_enrichment_zhang_1995(temperature: FloatArray, carbonate: FloatArray, fit: DicLine) -> FloatArray:
    """Return the enrichment of DIC, per mil, with a part ``carbonate`` of it carbonate. Both inputs broadcast.

    0.014 T f - 0.105 T + 10.53, or the form of the abstract. Zhang, Quay and Wilbur 1995.
    """
    return fit.carbonate * temperature * carbonate + fit.line.at(temperature)


def dic_enrichment_by_species_zhang_1995(
    temperature: FloatArray, aqueous_co2: FloatArray, bicarbonate: FloatArray, carbonate: FloatArray
) -> FloatArray:
    """Return the enrichment of DIC, per mil, as the mean of its forms by their parts of it. Inputs broadcast."""
    return (
        aqueous_co2 * AQUEOUS_CO2.at(temperature)
        + bicarbonate * BICARBONATE.at(temperature)
        + carbonate * CARBONATE.at(temperature)
    )


def _empirical(fit: DicLine) -> Callable[[FloatArray, Fractions, float], tuple[FloatArray, FloatArray]]:
    def enrichment(
        temperature: FloatArray, parts: Fractions, temperature_uncertainty: float
    ) -> tuple[FloatArray, FloatArray]:
        warmer = fit.carbonate * parts.carbonate + fit.line.slope
        variance = (
            fit.line.variance(temperature)
            + (fit.carbonate_uncertainty * temperature * parts.carbonate) ** 2
            + (fit.carbonate * temperature * parts.carbonate_uncertainty) ** 2
            + (warmer * temperature_uncertainty) ** 2
        )
        return dic_enrichment_zhang_1995(temperature, parts.carbonate, fit), np.sqrt(variance)

    return enrichment


def _by_species(
    temperature: FloatArray, parts: Fractions, temperature_uncertainty: float
) -> tuple[FloatArray, FloatArray]:
    found = dic_enrichment_by_species_zhang_1995(
        temperature, parts.aqueous_co2, parts.bicarbonate, parts.carbonate
    )
    pairs = (
        (parts.aqueous_co2, AQUEOUS_CO2),
        (parts.bicarbonate, BICARBONATE),
        (parts.carbonate, CARBONATE),
    )
    variance = sum(part**2 * line.variance(temperature) for part, line in pairs)
    warmer = sum(part * line.slope for part, line in pairs)
    # What one form gains the bicarbonate loses.
    variance += (
        (AQUEOUS_CO2.at(temperature) - BICARBONATE.at(temperature)) * parts.aqueous_co2_uncertainty
    ) ** 2
    variance += ((CARBONATE.at(temperature) - BICARBONATE.at(temperature)) * parts.carbonate_uncertainty) ** 2
    return found, np.sqrt(variance + (warmer * temperature_uncertainty) ** 2)


# From temperature, parts of DIC and the standard uncertainty of temperature to the enrichment and its uncertainty.
EQUILIBRIA: Mapping[
    EquilibriumForm, Callable[[FloatArray, Fractions, float], tuple[FloatArray, FloatArray]]
] = MappingProxyType(
    {
        EquilibriumForm.ZHANG_1995: _empirical(DIC_ZHANG_1995),
        EquilibriumForm.ZHANG_1995_ABSTRACT: _empirical(DIC_ZHANG_1995_ABSTRACT),
        EquilibriumForm.ZHANG_1995_SPECIES: _by_species,
    }
)


def enriched(delta: FloatArray, enrichment: FloatArray) -> FloatArray:
    """Return the delta, per mil, of what is enriched against something of that delta: alphas multiply."""
    return delta + enrichment + delta * enrichment / 1000.0


def atmosphere_at(years: FloatArray, air: float | Mapping[int, float]) -> FloatArray:
    """Return carbon-13 of the carbon dioxide of the air, per mil, linear between years and constant beyond them."""
    if not isinstance(air, Mapping):
        return np.full(np.shape(years), air)
    by_year, known = air, sorted(air)
    found: FloatArray = np.interp(years, known, [by_year[year] for year in known])
    return found


@dataclass(frozen=True, slots=True)
class BiologicalLine:
    """Carbon-13 of DIC by phosphate alone: ``constant + slope PO4``, per mil and umol/kg."""

    constant: float
    slope: float
    slope_uncertainty: float
    turned_about: float  # phosphate at which the slope makes no difference
    words: str
    holds: str  # what its uncertainty holds beside that of phosphate

    def at(self, phosphate: FloatArray) -> FloatArray:
        """Return the biological component, per mil."""
        return self.constant + self.slope * phosphate

    def uncertainty(self, phosphate: FloatArray, of_phosphate: FloatArray) -> FloatArray:
        """Return its standard uncertainty, per mil: that of phosphate, and of the slope."""
        of_slope = self.slope_uncertainty * (phosphate - self.turned_about)
        return np.asarray(np.hypot(self.slope * of_phosphate, of_slope))


def biological_slope(fractionation: float, mean_dic: float, carbon_per_phosphate: float) -> float:
    """Return how carbon-13 of DIC changes with phosphate, per mil per umol/kg.

    Respiration adds C/P moles of carbon per phosphate, lighter than DIC by the fractionation (negative, per mil).
    Broecker and Maier-Reimer 1992, GBC 6:315.
    """
    return fractionation / mean_dic * carbon_per_phosphate


def biological_line(settings: TracerSettings) -> BiologicalLine:
    """Return the line that the settings choose.

    The published constants, 2.7 and 2.75, belong to a slope of -1.1 and to a mean ocean in which biology
    explains the mean. With another slope the line is therefore turned about the mean phosphate, where it stays.

    Raises
    ------
    SettingsProblem
        If a setting names a form that does not exist.

    """
    constant = chosen(CONSTANTS, "tracers.biological_constant", settings.biological_constant)
    name = chosen({one: one for one in SlopeName}, "tracers.biological_slope", settings.biological_slope)
    per_carbon = biological_slope(settings.photosynthetic_fractionation, settings.mean_dic, 1.0)
    uncertainty, holds = 0.0, "phosphate"
    if name is SlopeName.LYNCH_STIEGLITZ_1995:
        slope, words = SLOPE_LYNCH_STIEGLITZ_1995, "slope as printed"
    else:
        carbon = CARBON_PER_PHOSPHATE_BROECKER_MAIER_REIMER_1992
        if name is SlopeName.STOICHIOMETRY:
            ratio = stoichiometry(settings.stoichiometry).carbon
            carbon = ratio.value
            if ratio.uncertainty is not None:
                uncertainty = abs(per_carbon) * ratio.uncertainty
                holds = f"phosphate and C:P +-{ratio.uncertainty:g}"
        slope = per_carbon * carbon
        of_photosynthesis = settings.photosynthetic_fractionation
        words = f"slope {of_photosynthesis:g} per mil x {carbon:g} C:P / {settings.mean_dic:g} umol kg-1"
    at_mean = constant + SLOPE_LYNCH_STIEGLITZ_1995 * settings.mean_phosphate
    intercept = at_mean - slope * settings.mean_phosphate
    words = (
        f"{intercept:.4g} {slope:+.5g} PO4 per mil; {words}; {constant:g} {SLOPE_LYNCH_STIEGLITZ_1995:+g} PO4"
        f" ({settings.biological_constant})"
    )
    if slope != SLOPE_LYNCH_STIEGLITZ_1995:
        words += f", re-sloped so that it keeps its value at PO4 {settings.mean_phosphate:g} umol kg-1"
    return BiologicalLine(intercept, slope, uncertainty, settings.mean_phosphate, words, holds)


def equilibrium_words(name: str) -> str:
    """Return a form of equilibrium with its coefficients, as they stand in metadata: T in degC, f parts of DIC."""
    match EquilibriumForm(name):
        case EquilibriumForm.ZHANG_1995_SPECIES:
            terms = (("f(CO2)", AQUEOUS_CO2), ("f(HCO3)", BICARBONATE), ("f(CO3)", CARBONATE))
            words = " + ".join(f"{part} ({_written(line)})" for part, line in terms)
        case form:
            fit = DIC_ZHANG_1995 if form is EquilibriumForm.ZHANG_1995 else DIC_ZHANG_1995_ABSTRACT
            words = f"{fit.carbonate:g} T f(CO3) {_written(fit.line)}"
    return f"{name}: enrichment {words} per mil"


def _written(line: Line) -> str:
    return f"{line.slope:+g} T {line.intercept:+g}"


def organic_delta(settings: TracerSettings) -> float:
    """Return carbon-13 of the organic matter that is respired, per mil: that of the mean ocean, and fractionation."""
    return settings.mean_delta_carbon_13 + settings.photosynthetic_fractionation
