"""What the carbonate system has to tell of single values: what it could not use, and what contradicts each other."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.figures import label, named, plain, unit_of
from pipeline.checking.marks import Mark
from pipeline.findings import Severity
from pipeline.tracers.alkalinity import HIGHEST_PH, LOWEST_PH
from pipeline.tracers.carbonate_consistency import UNDECIDED
from pipeline.tracers.carbonate_inputs import POSSIBLE, SOURCES, TEMPERATURES
from pipeline.tracers.carbonate_pairs import NO_PAIR, PAIRS, QUANTITIES
from pipeline.tracers.equilibria import TEMPERATURE
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from pipeline.carbonate_settings import CarbonateSettings
    from pipeline.tracers.carbonate import CarbonateSystem
    from pipeline.tracers.carbonate_consistency import Disagreement
    from pipeline.usable import Rows

_FEW = 3  # more disagreements than this of which nothing can be told apart share a sentence
# Names under which pH goes on a scale, or at a temperature, that nothing says (common practice, no source).
_LIKE_PH = re.compile(
    r"PH([ _-]?(NBS|NIST|TOT(AL)?|T|TS|SWS|SEAWATER|F|FREE|LAB|SENSOR|IN[ _-]?SITU)\d*)*", re.IGNORECASE
)


def input_marks(data: Rows, settings: CarbonateSettings) -> tuple[Mark, ...]:
    """Return what is to be told of delivered carbon, whether or not a carbonate system can be had."""
    return (*_unknown_scale(data), *_without_temperature(data, settings), *_impossible(data))


def system_marks(
    data: Rows, system: CarbonateSystem, disagreeing: Sequence[Disagreement], settings: CarbonateSettings
) -> tuple[Mark, ...]:
    """Return what is to be told of values that do not go together."""
    return (*_unsolvable(data, system), *_inconsistent(data, system, disagreeing, settings))


def _unknown_scale(data: Rows) -> Iterator[Mark]:
    """Yield a note for a column that passes through and has the name of a pH."""
    for name in data.table.schema.names:
        if len(data) and name not in REGISTRY and _LIKE_PH.fullmatch(name.strip()):
            yield Mark(
                "carbon-unknown-scale", Severity.NOTE, name, np.arange(len(data)), [name],
                "has the name of a pH, and is kept as it came, for nothing says its scale and its temperature",
                "PH_TOT (total scale) or PH_SWS (seawater scale) as it was measured, and PH_TMP beside it, in degC",
                together=True,
            )  # fmt: skip


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
            limit = f"{label(temperature)} beside it, or [carbonate.assumed_temperature] in the settings"
            yield Mark(
                "carbon-temperature", Severity.NOTE, column, rows, [len(rows)], words, limit, together=True
            )


def _impossible(data: Rows) -> Iterator[Mark]:
    """Yield a doubt for values and temperatures of measurement that the range check has no limits for."""
    ranges = {name: domain for name, domain in POSSIBLE.items() if REGISTRY[name].plausible is None}
    ranges |= dict.fromkeys(TEMPERATURES.values(), TEMPERATURE)
    for column, domain in ranges.items():
        if column in data.names:
            values = data.usable(column)
            rows = np.flatnonzero(~np.isnan(values) & ~domain.holds(values))
            if len(rows):
                limit = f"{domain.low:g} to {domain.high:g} {unit_of(column)}".rstrip()
                found = values[rows].tolist()
                yield Mark("carbon-range", Severity.DOUBT, column, rows, found, "is {value}", limit)


def _unsolvable(data: Rows, system: CarbonateSystem) -> Iterator[Mark]:
    """Yield a doubt for both of a pair that no sea water has: nothing tells which of them is wrong."""
    lost = (system.pair != NO_PAIR) & ~system.solved
    inputs = system.inputs.quantities
    for number in np.unique(system.pair[lost]).tolist():
        first, second = (QUANTITIES[i] for i in PAIRS[number])
        for i, column in enumerate(SOURCES[first]):
            for j, other in enumerate(SOURCES[second]):
                rows = np.flatnonzero(
                    lost
                    & (system.pair == number)
                    & (inputs[first].column == i)
                    & (inputs[second].column == j)
                )
                if len(rows):
                    pairs = zip(data.usable(column)[rows], data.usable(other)[rows], strict=True)
                    yield Mark(
                        "carbon-unsolvable", Severity.DOUBT, column, rows, [f"{a:g} and {b:g}" for a, b in pairs],
                        "do not fit together: {value}",
                        f"two values that sea water of a pH between {LOWEST_PH:g} and {HIGHEST_PH:g} can have",
                        also=(other,),
                    )  # fmt: skip


def _inconsistent(
    data: Rows, system: CarbonateSystem, disagreeing: Sequence[Disagreement], settings: CarbonateSettings
) -> Iterator[Mark]:
    """Yield a doubt for what is at fault of three that disagree; where nothing tells which, for the third."""
    blamed: set[tuple[int, str]] = set()
    limit = f"at most {settings.consistency:g} times (carbonate.consistency of the settings)"
    for one in disagreeing:
        by_column: dict[str, list[tuple[int, str]]] = {}
        undecided: dict[str, list[int]] = {}
        for i, row in enumerate(one.rows.tolist()):
            at_fault = one.third if one.fault[i] == UNDECIDED else int(one.fault[i])
            column = _column(system, row, at_fault)
            if (row, column) in blamed:
                continue
            blamed.add((row, column))
            if one.fault[i] == UNDECIDED:
                undecided.setdefault(column, []).append(i)
            else:
                by_column.setdefault(column, []).append((row, _found_out(data, system, one, i, column)))
        for column, told in by_column.items():
            rows, words = np.array([row for row, _ in told]), [text for _, text in told]
            yield Mark(
                "carbon-consistency", Severity.DOUBT, column, rows, words, "disagrees with {value}", limit
            )
        for column, places in undecided.items():
            texts = [_left_open(system, one, i) for i in places]
            if len(places) > _FEW:  # one sentence with the worst of them
                worst = max(places, key=lambda i: abs(one.away[i]) / one.uncertainty[i])
                texts = [_left_open(system, one, worst, "by up to ")] * len(places)
            yield Mark(
                "carbon-consistency", Severity.DOUBT, column, one.rows[places], texts, "disagrees with {value}", limit,
                outcome="which of the three is at fault, the samples beside do not tell: look at all of them",
            )  # fmt: skip


def _found_out(data: Rows, system: CarbonateSystem, one: Disagreement, i: int, column: str) -> str:
    """Return what is said of a value that is found to be at fault."""
    row = int(one.rows[i])
    three = {quantity: _column(system, row, quantity) for quantity in (*PAIRS[system.pair[row]], one.third)}
    others = named([label(name) for quantity, name in three.items() if quantity != one.fault[i]])
    side = "above" if one.asked[i] > 0 else "below"
    size = f"{plain(abs(float(one.asked[i])))} {unit_of(column)}".rstrip()
    times, combined = _times(one, i)
    if one.by_fourth[i]:
        fourth = next(number for number in (2, 3) if number != one.third)
        why = f"with which {label(_column(system, row, fourth))} agrees"
    else:
        why = f"and off the line between the samples above and below it, on which {others} lie"
    return (
        f"{others}: {data.usable(column)[row]:g} is {size} {side} what they give, {why}; the three disagree by {times}"
        f" times their combined uncertainty ({combined})"
    )


def _left_open(system: CarbonateSystem, one: Disagreement, i: int, by: str = "by ") -> str:
    """Return what is said of a third quantity where nothing tells which of the three is at fault."""
    row = int(one.rows[i])
    pair = named([label(_column(system, row, quantity)) for quantity in PAIRS[system.pair[row]]])
    size = f"{plain(abs(float(one.away[i])))} {_unit(one)}".rstrip()
    times, combined = _times(one, i)
    return f"{pair} {by}{times} times the uncertainty of all three ({size} against {combined})"


def _times(one: Disagreement, i: int) -> tuple[str, str]:
    uncertainty = float(one.uncertainty[i])
    return plain(abs(float(one.away[i])) / uncertainty, 2), f"{plain(uncertainty, 2)} {_unit(one)}".rstrip()


def _unit(one: Disagreement) -> str:
    return unit_of("fco2_residual") if QUANTITIES[one.third] == "fco2" else ""


def _column(system: CarbonateSystem, row: int, quantity: int) -> str:
    """Return the column from which a quantity of a sample came."""
    name = QUANTITIES[quantity]
    return SOURCES[name][int(system.inputs.quantities[name].column[row])]
