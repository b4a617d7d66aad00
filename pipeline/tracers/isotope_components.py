"""The components of carbon-13 in a table of samples: from usable values to columns, and what there is to tell."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, cast

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.findings import Finding, Severity
from pipeline.seawater import Domain
from pipeline.tracers.choices import chosen
from pipeline.tracers.isotopes import (
    EQUILIBRIA,
    MEASURED_FROM,
    MEASURED_TO,
    Fractions,
    atmosphere_at,
    biological_line,
    enriched,
    equilibrium_words,
)
from pipeline.tracers.oxygen import FIT_TEMPERATURE
from pipeline.tracers.uncertainties import usual_uncertainty, usual_words
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from pipeline.settings import TracerSettings
    from pipeline.tables import FloatArray
    from pipeline.usable import Rows

MEASURED = "delta_carbon_13"
# What is computed with. The checks judge delivered values by narrower limits; what they leave out is not usable,
# and what they are told to let pass is still not computed with when it is no DIC (organic matter has -20).
_DELTA, _ERROR = Domain(-5.0, 5.0), Domain(1e-6, 5.0)  # per mil
_PHOSPHATE = Domain(-0.1, 10.0)  # umol/kg
_PART = Domain(0.0, 1.0)


@dataclass(frozen=True, slots=True)
class Components:
    """The components of carbon-13, by registry name, (n_row,) each, with their metadata and what is to be told."""

    columns: Mapping[str, FloatArray]
    forms: dict[str, dict[str, str]]
    findings: tuple[Finding, ...]


def components(data: Rows, carbon: Mapping[str, FloatArray], settings: TracerSettings) -> Components:
    """Return the components of carbon-13 of every sample that has it, missing for all others.

    Equilibrium is that at the surface, where the water had its potential temperature. The carbonate system in
    situ stands for that at the surface: the carbonate that pressure takes away changes the empirical forms by less
    than 0.001 per mil, the sum over species by up to 0.02. Three components add up to the measured value: the
    biological one; what equilibrium with the air would make of the air-sea component, equilibrium less biological; and
    the disequilibrium.

    Parameters
    ----------
    data
        n_row samples with their TEOS-10 columns.
    carbon
        Columns of the carbonate system, (n_row,) each; none where the cruise has none.
    settings
        Forms, constants and the atmosphere.

    Raises
    ------
    SettingsProblem
        If a setting names a form that does not exist.

    """
    none = np.full(len(data), np.nan)
    delta = _inside(data.usable(MEASURED), _DELTA)
    of_delta = np.where(np.isnan(delta), np.nan, _measured_uncertainty(data, MEASURED, delta))
    temperature = _inside(data.usable("potential_temperature"), FIT_TEMPERATURE)
    temperature[np.isnan(delta)] = np.nan
    parts = Fractions(
        *(
            _inside(carbon.get(name, none), _PART)
            for name in (
                "aqueous_co2_fraction", "bicarbonate_fraction", "carbonate_fraction",
                "aqueous_co2_fraction_uncertainty", "carbonate_fraction_uncertainty",
            )
        )
    )  # fmt: skip
    of_temperature = REGISTRY["potential_temperature"].uncertainty
    enrichment = chosen(EQUILIBRIA, "tracers.equilibrium_carbon_13", settings.equilibrium_carbon_13)
    enrichments, of_enrichment = enrichment(
        temperature, parts, of_temperature.absolute if of_temperature else 0.0
    )
    years = _years(data)
    air = atmosphere_at(years, settings.atmosphere_delta_carbon_13)
    equilibrium = enriched(air, enrichments)
    of_equilibrium = of_enrichment * (1.0 + air / 1000.0)

    line = biological_line(settings)
    phosphate = np.where(np.isnan(delta), np.nan, _inside(data.usable("phosphate"), _PHOSPHATE))
    biological = line.at(phosphate)
    of_biological = line.uncertainty(phosphate, _measured_uncertainty(data, "phosphate", phosphate))
    found = {
        "equilibrium": (equilibrium, of_equilibrium),
        "biological": (biological, of_biological),
        "air_sea": (delta - biological, np.hypot(of_delta, of_biological)),
        "disequilibrium": (delta - equilibrium, np.hypot(of_delta, of_equilibrium)),
    }
    columns = {}
    for part, (values, uncertainty) in found.items():
        columns[f"{MEASURED}_{part}"] = values
        columns[f"{MEASURED}_{part}_uncertainty"] = np.where(np.isnan(values), np.nan, uncertainty)
    return Components(
        columns, _forms(settings), (*_told(delta, columns, years, settings), *_validity(temperature, columns))
    )


def _measured_uncertainty(data: Rows, name: str, values: FloatArray) -> FloatArray:
    """Return the usual standard uncertainty of values, or that which came with them where it is larger.

    An error that is delivered often holds the mass spectrometer's part alone (common practice, no source).
    """
    expected = usual_uncertainty(name, values)
    told = data.usable(f"{name}_error") if f"{name}_error" in data.names else np.full(len(values), np.nan)
    return np.where(_ERROR.holds(told), np.maximum(told, expected), expected)


def _years(data: Rows) -> FloatArray:
    """Return the calendar year of every sample, (n_row,), NaN where it has no date."""
    if "date" not in data.names:
        return np.full(len(data), np.nan)
    years = pc.year(data.table.column("date")).cast(pa.float64())
    return np.asarray(years.to_numpy(), dtype=np.float64)


def _inside(values: FloatArray, domain: Domain) -> FloatArray:
    return np.where(domain.holds(values), values, np.nan)


def _forms(settings: TracerSettings) -> dict[str, dict[str, str]]:
    """Return, by column, which forms and constants were taken and what its uncertainty holds."""
    line = biological_line(settings)
    of_air = settings.atmosphere_delta_carbon_13
    if isinstance(of_air, dict):
        by_year = ", ".join(f"{year} {value:g}" for year, value in sorted(of_air.items()))
        air = f"{by_year} per mil, linear between, at the year of the sample"
    else:
        air = f"{of_air:g} per mil in all years"
    equilibrium = f"{equilibrium_words(settings.equilibrium_carbon_13)}; atmosphere {air}"
    of_equilibrium = "constants of the fit, carbonate system, temperature; the atmosphere is taken as exact"
    carbon, phosphate = (usual_words(name) for name in (MEASURED, "phosphate"))
    of_carbon = f"carbon-13 {carbon}, or its delivered error where that is larger"
    holds = line.holds.replace("phosphate", f"phosphate {phosphate}", 1)
    told = {
        "equilibrium": (equilibrium, of_equilibrium),
        "biological": (line.words, holds),
        "air_sea": (line.words, f"{of_carbon}; {holds}"),
        "disequilibrium": (equilibrium, f"{of_carbon}; {of_equilibrium}"),
    }
    return {
        f"{MEASURED}_{part}{suffix}": {"form": form} if not suffix else {"form": form, "uncertainty": holds}
        for part, (form, holds) in told.items()
        for suffix in ("", "_uncertainty")
    }


def _told(
    delta: FloatArray, columns: Mapping[str, FloatArray], years: FloatArray, settings: TracerSettings
) -> Iterator[Finding]:
    """Yield a note for samples that have carbon-13 and not what a component needs, and for years beyond the air's."""
    n_delta = int((~np.isnan(delta)).sum())
    for part, needs in (
        ("equilibrium", "a date, a potential temperature and a carbonate system (two of TCARBN, ALKALI, pH, fCO2)"),
        ("biological", "a PHSPHT"),
    ):  # fmt: skip
        count = int((~np.isnan(delta) & np.isnan(columns[f"{MEASURED}_{part}"])).sum())
        if count:
            yield Finding(
                "isotope-inputs", Severity.NOTE,
                f"{count} of {n_delta} samples with a DELC13 that may be used have no {MEASURED}_{part}; expected"
                f" {needs} beside it, all usable; deliver what is missing.",
                variable=f"{MEASURED}_{part}", count=count,
            )  # fmt: skip
    by_year = settings.atmosphere_delta_carbon_13
    solved = ~np.isnan(columns[f"{MEASURED}_equilibrium"])
    if isinstance(by_year, dict) and solved.any():
        beyond = solved & ((years < min(by_year)) | (years > max(by_year)))
        if beyond.any():
            yield Finding(
                "isotope-atmosphere", Severity.NOTE,
                f"{int(beyond.sum())} of {n_delta} samples with a DELC13 are of {_span(years[beyond])}, beyond the"
                f" years that the settings have an atmosphere for; expected {min(by_year)} to {max(by_year)}; the"
                " nearest year stands for them; give theirs in the settings, as in [tracers]"
                f" atmosphere_delta_carbon_13 = {{{int(cast('float', years[beyond].min()))} = ...}}, which is added to"
                " those.",
                variable=f"{MEASURED}_equilibrium", count=int(beyond.sum()),
            )  # fmt: skip


def _validity(temperature: FloatArray, columns: Mapping[str, FloatArray]) -> Iterator[Finding]:
    """Yield a note for samples outside the temperatures at which enrichment was measured."""
    solved = ~np.isnan(columns[f"{MEASURED}_equilibrium"])
    outside = solved & ((temperature < MEASURED_FROM) | (temperature > MEASURED_TO))
    if outside.any():
        yield Finding(
            "isotope-validity", Severity.NOTE,
            f"{int(outside.sum())} of {int(solved.sum())} samples have a {MEASURED}_equilibrium outside the"
            f" temperatures of Zhang et al. 1995; expected {MEASURED_FROM:g} to {MEASURED_TO:g} degC;"
            " the fit was taken to go on there.",
            variable=f"{MEASURED}_equilibrium", count=int(outside.sum()),
        )  # fmt: skip


def _span(years: FloatArray) -> str:
    first, last = int(cast("float", years.min())), int(cast("float", years.max()))
    return str(first) if first == last else f"{first} to {last}"
