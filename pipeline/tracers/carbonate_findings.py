"""What the carbonate system of a cruise has to tell: values it could not use, and values that contradict each other."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.marks import Mark, findings_of
from pipeline.findings import Finding, Severity
from pipeline.tracers.alkalinity import HIGHEST_PH, LOWEST_PH
from pipeline.tracers.carbonate_inputs import NUTRIENTS, POSSIBLE, SOURCES, TEMPERATURES
from pipeline.tracers.carbonate_pairs import NO_PAIR, PAIRS, QUANTITIES
from pipeline.tracers.equilibria import TEMPERATURE, validity
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from pipeline.carbonate_settings import CarbonateSettings
    from pipeline.tables import FloatArray
    from pipeline.tracers.carbonate import CarbonateSystem
    from pipeline.usable import Rows

_RESIDUALS = (("ph_residual", "ph"), ("fco2_residual", "fco2"))


def carbonate_marks(data: Rows, system: CarbonateSystem, settings: CarbonateSettings) -> tuple[Mark, ...]:
    """Return what is to be told of single values, as the checks do."""
    return (
        *_without_temperature(data, settings),
        *_impossible(data),
        *_unsolvable(data, system),
        *_inconsistent(system, settings),
    )


def carbonate_findings(
    data: Rows, marks: Sequence[Mark], system: CarbonateSystem, settings: CarbonateSettings
) -> tuple[Finding, ...]:
    """Return in words what is to be told of the carbonate system of a cruise's samples."""
    return (
        *findings_of(data, marks),
        *_agreement(system),
        *_outside_validity(system, settings),
        *_without_nutrients(system),
    )


def _without_temperature(data: Rows, settings: CarbonateSettings) -> Iterator[Mark]:
    """Yield a note for a column whose values do not say at which temperature they were measured."""
    for column, temperature in TEMPERATURES.items():
        if column not in data.names:
            continue
        assumed = column in settings.assumed_temperature
        rows = np.flatnonzero(~np.isnan(data.usable(column)) & np.isnan(data.usable(temperature)))
        if len(rows) and not assumed:
            words = (
                "has {value} values without the temperature they were measured at, and they are not used for the"
                " carbonate system"
            )
            limit = f"{_label(temperature)} beside it, or [carbonate.assumed_temperature] in the settings"
            yield Mark(
                "carbon-temperature", Severity.NOTE, column, rows, [len(rows)], words, limit, together=True
            )


def _impossible(data: Rows) -> Iterator[Mark]:
    """Yield a doubt for values and temperatures of measurement that the range check has no limits for."""
    for column, domain in POSSIBLE.items():
        if column in data.names and REGISTRY[column].plausible is None:
            values = data.usable(column)
            rows = np.flatnonzero(~np.isnan(values) & ~domain.holds(values))
            if len(rows):
                limit = f"{domain.low:g} to {domain.high:g} {_unit(column)}".rstrip()
                yield Mark(
                    "carbon-range", Severity.DOUBT, column, rows, values[rows].tolist(), "is {value}", limit
                )
    for temperature in dict.fromkeys(TEMPERATURES.values()):
        if temperature in data.names:
            values = data.usable(temperature)
            rows = np.flatnonzero(~np.isnan(values) & ~TEMPERATURE.holds(values))
            if len(rows):
                limit = f"{TEMPERATURE.low:g} to {TEMPERATURE.high:g} degC"
                yield Mark(
                    "carbon-range",
                    Severity.DOUBT,
                    temperature,
                    rows,
                    values[rows].tolist(),
                    "is {value}",
                    limit,
                )


def _unsolvable(data: Rows, system: CarbonateSystem) -> Iterator[Mark]:
    """Yield a doubt for pairs that no sea water has."""
    lost = (system.pair != NO_PAIR) & ~system.solved
    for number, (first, second) in enumerate((QUANTITIES[i], QUANTITIES[j]) for i, j in PAIRS):
        for column_number, column in enumerate(SOURCES[first]):
            rows = np.flatnonzero(
                lost & (system.pair == number) & (system.inputs.quantities[first].column == column_number)
            )
            if len(rows):
                other = system.inputs.quantities[second]
                beside = [
                    f"{_written(data.usable(column)[row])} with"
                    f" {_label(SOURCES[second][other.column[row]])} {_written(other.values[row])}"
                    for row in rows
                ]
                limit = f"two values that sea water of a pH between {LOWEST_PH:g} and {HIGHEST_PH:g} can have"
                yield Mark("carbon-unsolvable", Severity.DOUBT, column, rows, beside, "is {value}", limit)


def _inconsistent(system: CarbonateSystem, settings: CarbonateSettings) -> Iterator[Mark]:
    """Yield a doubt for values that differ from what the pair gives by more than their uncertainties explain."""
    for residual, quantity in _RESIDUALS:
        away, uncertainty = system.columns[residual], system.columns[f"{residual}_uncertainty"]
        with np.errstate(invalid="ignore"):
            doubtful = np.abs(away) > settings.consistency * uncertainty
        for column_number, column in enumerate(SOURCES[quantity]):
            rows = np.flatnonzero(doubtful & (system.inputs.quantities[quantity].column == column_number))
            if len(rows):
                words = "is {value}"
                values = [
                    _against(away[row], uncertainty[row], system.columns["carbonate_pair"][row])
                    for row in rows
                ]
                limit = f"at most {settings.consistency:g} combined standard uncertainties"
                yield Mark("carbon-consistency", Severity.DOUBT, column, rows, values, words, limit)


def _against(away: float, uncertainty: float, pair: str) -> str:
    side = "above" if away > 0 else "below"
    return (
        f"{abs(away):.3g} {side} what {' and '.join(_label(name) for name in pair.split('+'))} give,"
        f" {abs(away) / uncertainty:.1f} combined standard uncertainties of {uncertainty:.2g}"
    )


def _agreement(system: CarbonateSystem) -> Iterator[Finding]:
    """Yield a note that says how far a third quantity and the pairs agree over the whole cruise."""
    for residual, quantity in _RESIDUALS:
        away = system.columns[residual]
        rows = np.flatnonzero(~np.isnan(away))
        if not len(rows):
            continue
        low, middle, high = np.quantile(away[rows], (0.05, 0.5, 0.95))
        expected = float(np.median(system.columns[f"{residual}_uncertainty"][rows]))
        unit = "" if quantity == "ph" else " uatm"
        of_what = "pH" if quantity == "ph" else "fCO2"
        yield Finding(
            "carbon-consistency", Severity.NOTE,
            f"measured {of_what} less what the other measured carbon gives, in {len(rows)} samples that have both:"
            f" {middle:+.3g}{unit} in the median, from {low:+.3g} to {high:+.3g} in nine of ten; expected a median near"
            f" zero and a scatter of about {expected:.2g}; an offset of all samples points to a standard, a constant or"
            " an organic base, not to single bottles.",
            variable=residual, value=f"{middle:+.3g}", limit=f"{expected:.2g}", count=len(rows),
        )  # fmt: skip


def _outside_validity(system: CarbonateSystem, settings: CarbonateSettings) -> Iterator[Finding]:
    """Yield a note for every fit of a constant that is used where nobody measured it."""
    solved = system.solved
    for fit in validity(settings):
        inside = fit.salinity.holds(system.inputs.salinity) & fit.temperature.holds(system.inputs.temperature)
        count = int((solved & ~inside).sum())
        if count:
            yield Finding(
                "carbon-validity", Severity.NOTE,
                f"{count} of {int(solved.sum())} samples lie outside what the constants of {fit.citation} were measured"
                f" for; expected a salinity of {fit.salinity.low:g} to {fit.salinity.high:g} and"
                f" {fit.temperature.low:g} to {fit.temperature.high:g} degC; they were computed all the same, by the"
                " fit as it goes on there; other constants can be chosen in [carbonate] of the settings.",
                variable="temperature", count=count,
            )  # fmt: skip


def _without_nutrients(system: CarbonateSystem) -> Iterator[Finding]:
    """Yield a note for samples whose alkalinity of silicic or phosphoric acid is not known."""
    solved = system.solved
    for name in NUTRIENTS:
        count = int((solved & np.isnan(system.inputs.nutrients[name])).sum())
        if count:
            yield Finding(
                "carbon-nutrients", Severity.NOTE,
                f"{count} of {int(solved.sum())} samples with a carbonate system have no {name} that may be used;"
                " expected one; it was taken as none, by which pH is too high, by up to 0.02 where"
                " nutrients are high (carbonate_nutrients tells which samples).",
                variable=name, count=count,
            )  # fmt: skip


def _label(name: str) -> str:
    return REGISTRY[name].exchange[0] if REGISTRY[name].exchange else name


def _unit(name: str) -> str:
    unit = REGISTRY[name].unit
    return "" if unit == "1" else unit


def _written(value: FloatArray | float) -> str:
    return f"{float(value):g}"
