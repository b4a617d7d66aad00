"""What the carbonate system of a cruise has to tell as a whole: samples it left out, and how far all agree."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.figures import label, named, plain, signed
from pipeline.findings import Finding, Severity
from pipeline.tracers.carbonate_consistency import RESIDUALS
from pipeline.tracers.carbonate_inputs import NUTRIENTS, SOURCES
from pipeline.tracers.carbonate_pairs import NO_PAIR, QUANTITIES, pairs_of
from pipeline.tracers.equilibria import CARBONIC_NAMES, PRESSURE, SALINITY, TEMPERATURE, VALIDITY, validity

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from pipeline.carbonate_settings import CarbonateSettings
    from pipeline.tracers.carbonate import CarbonateSystem
    from pipeline.usable import Rows

    BoolArray = NDArray[np.bool_]

# What constants are computed from, between which limits, and what it is called.
_CONDITIONS = (
    ("practical_salinity", SALINITY, "practical salinity", "", "SALNTY or CTDSAL"),
    ("temperature", TEMPERATURE, "temperature", " degC", "CTDTMP"),
    ("pressure", PRESSURE, "pressure", " dbar", "CTDPRS"),
)
# Below this a difference is written as none, by residual: no measurement shows it.
_NOTHING = {"ph_residual": 5e-4, "fco2_residual": 0.05}
_ENOUGH = 20  # samples from which percentiles are told, not the least and the largest


def carbonate_findings(
    data: Rows, system: CarbonateSystem, settings: CarbonateSettings
) -> tuple[Finding, ...]:
    """Return in words what is to be told of the carbonate system of a cruise's samples."""
    return (
        *_left_out(data, system),
        *_agreement(system),
        *_outside_validity(system, settings),
        *_without_nutrients(system),
    )


def _left_out(data: Rows, system: CarbonateSystem) -> Iterator[Finding]:
    """Yield a note for samples that have two quantities and nothing to compute constants from."""
    paired = pairs_of(*(system.inputs.quantities[name].values for name in QUANTITIES)) != NO_PAIR
    for name, domain, words, unit, wanted in _CONDITIONS:
        values = data.usable(name)
        lost, limits = paired & ~domain.holds(values), f"{domain.low:g} to {domain.high:g}{unit}"
        missing, outside = int((lost & np.isnan(values)).sum()), int((lost & ~np.isnan(values)).sum())
        for count, why, expected in (
            (
                missing,
                f"no {words} that may be used",
                f"{wanted} beside them, there and not flagged or doubted",
            ),
            (outside, f"a {words} for which constants are not computed", limits),
        ):
            if count:
                have = f"{count} samples" if count > 1 else "1 sample"
                yield Finding(
                    "carbon-inputs", Severity.NOTE,
                    f"{have} with two measured quantities of the carbonate system {'have' if count > 1 else 'has'}"
                    f" {why}; expected {expected}; their carbonate system was left out.",
                    variable=name, limit=limits, count=count,
                )  # fmt: skip


def _agreement(system: CarbonateSystem) -> Iterator[Finding]:
    """Yield a note that says how far a third quantity and the pairs agree over the whole cruise."""
    for quantity, residual in RESIDUALS.items():
        away = system.columns[residual]
        rows = np.flatnonzero(~np.isnan(away))
        if not len(rows):
            continue
        enough = len(rows) >= _ENOUGH
        low, middle, high = (
            _difference(float(value), residual)
            for value in np.quantile(away[rows], (0.05, 0.5, 0.95) if enough else (0.0, 0.5, 1.0))
        )
        span = "nine of ten lie within" if enough else "they lie within"
        expected = plain(float(np.median(system.columns[f"{residual}_uncertainty"][rows])), 2)
        unit = "" if quantity == "ph" else " uatm"
        columns = (
            SOURCES[quantity][number] for number in np.unique(system.inputs.quantities[quantity].column[rows])
        )
        of_what = named([label(column) for column in columns])
        yield Finding(
            "carbon-consistency", Severity.NOTE,
            f"measured {of_what} less what the other measured carbon gives, in {len(rows)} samples that have both:"
            f" {middle}{unit} in the median, and {span} {low} to {high}{unit}; expected a median near zero and a"
            f" scatter of about {expected}{unit}; an offset of all samples points to a standard, a constant or an"
            " organic base, not to single bottles.",
            variable=residual, value=middle, limit=expected, count=len(rows),
        )  # fmt: skip


def _difference(value: float, residual: str) -> str:
    """Return a difference with its sign, in as many digits as a measurement has."""
    if abs(value) < _NOTHING[residual]:
        return "0.000" if residual == "ph_residual" else "0.0"
    return signed(round(value, 4 if residual == "ph_residual" else 1))


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
                f" fit as it goes on there; {_instead(fit.citation, system, settings)}.",
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


def _instead(citation: str, system: CarbonateSystem, settings: CarbonateSettings) -> str:
    """Return which other constants were measured for the samples of a cruise, in words."""
    if citation != VALIDITY[settings.carbonic].citation:
        hardly = settings.fluoride in VALIDITY and citation == VALIDITY[settings.fluoride].citation
        return (
            "that moves a computed pH by at most 0.0004" if hardly else "there is no other choice of it here"
        )
    salinity, temperature = system.inputs.salinity[system.solved], system.inputs.temperature[system.solved]
    part = {
        name: float(
            (VALIDITY[name].salinity.holds(salinity) & VALIDITY[name].temperature.holds(temperature)).mean()
        )
        for name in CARBONIC_NAMES
    }
    best = max(part, key=lambda name: part[name])
    if part[best] <= part[settings.carbonic]:
        return "no other constants of carbonic acid here were measured for more of them"
    whole = "all" if part[best] == 1.0 else f"{part[best]:.0%}"
    return f'carbonate.carbonic = "{best}" in the settings was measured for {whole} of them'
