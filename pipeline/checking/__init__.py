"""Checking: findings in words, and check flags beside the delivered ones. No delivered number is changed.

Each check is a pure function from a table of samples or CTD levels to marks.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from pipeline.checking.carbon import alkalinity_less_dic
from pipeline.checking.cast_offsets import cast_offset
from pipeline.checking.causes import leaking_bottle, one_cause, with_the_bottle
from pipeline.checking.depths import bottom_depth
from pipeline.checking.flags import (
    all_flagged_bad,
    flag_without_value,
    igoss_flag,
    unknown_flag,
    value_under_missing_flag,
)
from pipeline.checking.gradients import gradient
from pipeline.checking.isotopes import isotope_range
from pipeline.checking.keys import duplicate_sample, repeated_station
from pipeline.checking.levels import duplicate_pressure, pressure_order
from pipeline.checking.magnitude import wrong_unit
from pipeline.checking.marks import check_flags, findings_of
from pipeline.checking.misfit import property_misfit
from pipeline.checking.offsets import cruise_offset
from pipeline.checking.places import off_section, position_zero
from pipeline.checking.ranges import gross_range
from pipeline.checking.ratios import (
    negative_nutrient,
    nitrate_and_nitrite,
    nitrate_to_phosphate,
)
from pipeline.checking.regions import regional_range
from pipeline.checking.repeats import copied_cast, stuck_values
from pipeline.checking.saturation import oxygen_saturation
from pipeline.checking.sensors import bottle_against_ctd
from pipeline.checking.signs import position_sign
from pipeline.checking.spikes import spike
from pipeline.checking.stability import density_inversion
from pipeline.checking.table import CheckEntry, ConclusionEntry
from pipeline.checking.track import cast_time, clock_order, departure_date, station_speed
from pipeline.findings import Severity
from pipeline.tables import with_columns
from pipeline.usable import CHECK_FAULT, Rows
from pipeline.variables import CHECKED, check_name

if TYPE_CHECKING:
    from collections.abc import Collection, Iterable, Mapping

    from numpy.typing import NDArray

    from pipeline.checking.marks import Mark
    from pipeline.findings import Finding
    from pipeline.settings import Settings

_WHOLE = "wrong-unit"  # takes whole columns out of use
NOTE, DOUBT, FAULT = Severity.NOTE, Severity.DOUBT, Severity.FAULT

# Every check, by its name in findings. ``python -m pipeline.checking`` prints them as a table.
CHECKS: Mapping[str, CheckEntry] = {
    entry.name: entry
    for entry in (
        CheckEntry("duplicate-sample", duplicate_sample, (DOUBT,)),
        CheckEntry("repeated-station", repeated_station, (DOUBT,), ("same_place",)),
        CheckEntry("station-speed", station_speed, (DOUBT,), ("station_speed", "same_place")),
        CheckEntry("cast-time", cast_time, (DOUBT, NOTE), ("cast_time",)),
        CheckEntry("unknown-flag", unknown_flag, (DOUBT,), beside="the WHP flag tables"),
        CheckEntry("igoss-flag", igoss_flag, (FAULT, DOUBT), beside="IGOSS flags 3 and 4"),
        CheckEntry("flag-without-value", flag_without_value, (DOUBT,)),
        CheckEntry("value-under-missing-flag", value_under_missing_flag, (DOUBT,)),
        CheckEntry("all-flagged-bad", all_flagged_bad, (NOTE,), as_delivered=True),
        CheckEntry("gross-range", gross_range, (FAULT, DOUBT), beside="the plausible ranges of the registry"),
        CheckEntry("duplicate-pressure", duplicate_pressure, (DOUBT,)),
        CheckEntry("pressure-order", pressure_order, (NOTE,)),
        CheckEntry(
            "stuck-values",
            stuck_values,
            (DOUBT,),
            ("stuck_bottles", "stuck_levels", "same_level"),
            "three times the usual uncertainties of the registry",
        ),
        CheckEntry("copied-cast", copied_cast, (DOUBT,), ("copied_share",)),
        CheckEntry("bottom-depth", bottom_depth, (DOUBT, NOTE), ("bottom_depth", "bottom_share")),
        CheckEntry("position-zero", position_zero, (DOUBT,), ("off_section",)),
        CheckEntry("off-section", off_section, (DOUBT, NOTE), ("off_section", "off_section_ratio")),
        CheckEntry("clock-order", clock_order, (DOUBT, NOTE), ("station_speed",)),
        CheckEntry("departure-date", departure_date, (DOUBT,), ("before_departure", "after_departure")),
        CheckEntry("gradient", gradient, (DOUBT, NOTE), ("gradient", "upper_pressure", "deep_pressure")),
        CheckEntry(
            "density-inversion",
            density_inversion,
            (DOUBT,),
            ("inversion_bottle", "inversion_ctd", "same_level", "upper_pressure", "deep_pressure"),
        ),
        CheckEntry(
            "spike", spike, (DOUBT,), ("spike_bottle", "spike_ctd", "upper_pressure", "deep_pressure")
        ),
        CheckEntry(
            "bottle-against-ctd",
            bottle_against_ctd,
            (DOUBT, NOTE),
            ("bottle_ctd_salinity", "bottle_ctd_oxygen", "bottle_ctd_reach", "bottle_ctd_sigma"),
        ),
        CheckEntry(
            "oxygen-saturation",
            oxygen_saturation,
            (FAULT, DOUBT, NOTE),
            ("surface_saturation", "supersaturation", "negative_oxygen"),
            "the solubility of Garcia and Gordon 1992",
        ),
        CheckEntry(
            "nitrate-to-phosphate",
            nitrate_to_phosphate,
            (DOUBT,),
            ("nitrate_to_phosphate", "n_star", "n_star_departure"),
        ),
        CheckEntry("nitrate-and-nitrite", nitrate_and_nitrite, (NOTE,)),
        CheckEntry("negative-nutrient", negative_nutrient, (DOUBT, NOTE), ("negative_nutrients",)),
        CheckEntry(
            "property-misfit",
            property_misfit,
            (DOUBT,),
            ("misfit_bands", "misfit_sigma", "misfit_samples", "misfit_floor"),
        ),
        CheckEntry(
            "isotope-range",
            isotope_range,
            (DOUBT,),
            ("delta_carbon_13", "deep_delta_carbon_13", "delta_departure"),
        ),
        CheckEntry(
            "alkalinity-less-dic", alkalinity_less_dic, (DOUBT,), ("alkalinity_less_dic", "spike_bottle")
        ),
        CheckEntry("regional-range", regional_range, (DOUBT,), ("regions",)),
        CheckEntry(
            "cruise-offset",
            cruise_offset,
            (NOTE,),
            (
                "n_star",
                "nitrate_phosphate_slope",
                "surface_alkalinity",
                "alkalinity_less_dic",
                "whole_column_samples",
            ),
        ),
        CheckEntry(
            _WHOLE,
            wrong_unit,
            (DOUBT, FAULT),
            ("whole_column", "whole_column_samples"),
            "what nutrients and oxygen of the open ocean have to do with each other",
            as_delivered=True,
        ),
        CheckEntry(
            "cast-offset",
            cast_offset,
            (DOUBT, NOTE),
            ("cast_offset", "cast_offset_sigma", "cast_offset_samples"),
        ),
        CheckEntry("position-sign", position_sign, (DOUBT,), ("off_section", "off_section_ratio")),
    )
}

# What is concluded from the marks of the checks.
CONCLUSIONS: Mapping[str, ConclusionEntry] = {
    entry.name: entry
    for entry in (ConclusionEntry("leaking-bottle", leaking_bottle, (DOUBT,), beside="three quantities"),)
}

# What is asked of the casts of a cruise as they follow one another: one row of each is enough to tell.
TRACK_CHECKS = (
    "repeated-station", "station-speed", "position-zero", "off-section", "clock-order", "departure-date",
    "position-sign",
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class Checked:
    """Check flags by column name, shape (n_row,) each, and what was noticed in words."""

    flags: dict[str, NDArray[np.int64]]
    findings: tuple[Finding, ...]


def check(
    table: pa.Table,
    settings: Settings,
    told: Iterable[Finding] = (),
    names: Collection[str] = CHECKS.keys(),
) -> Checked:
    """Run every check, or those of some names, over a table of samples, or of CTD levels, as delivered.

    Parameters
    ----------
    table
        Rows as read.
    settings
        Limits, and which flags count as good.
    told
        What reading noticed: a cell that held no number is not told of again as a missing value.
    names
        Which checks.

    """
    data = Rows(table, settings.use)
    marks = _marks(data, settings, [entry for entry in CHECKS.values() if entry.name in names])
    marks += [mark for entry in CONCLUSIONS.values() for mark in entry.run(data, settings, marks)]
    marks = one_cause(data, marks)
    measured = [name for name in CHECKED if name in data.names]
    flags = check_flags(data, measured, [*marks, *with_the_bottle(data, marks)])
    unreadable = {(f.file, f.line, f.variable) for f in told if f.check == "not-a-number"}
    if unreadable:
        marks = _without_cells(data, marks, unreadable)
    return Checked(flags, tuple(findings_of(data, marks)))


def _marks(data: Rows, settings: Settings, entries: Iterable[CheckEntry]) -> list[Mark]:
    """Return what the checks say; those of values do not look at columns that are wrong as a whole."""
    found = {entry.name: entry.run(data, settings) for entry in entries if entry.name == _WHOLE}
    wrong = {name for mark in found.get(_WHOLE, ()) for name in mark.variables}
    fault = np.full(len(data), CHECK_FAULT)
    table = with_columns(data.table, {check_name(name): fault for name in wrong}) if wrong else data.table
    sound = Rows(table, settings.use) if wrong else data
    for entry in entries:
        if entry.name not in found:
            found[entry.name] = entry.run(data if entry.as_delivered else sound, settings)
    return [mark for entry in entries for mark in found[entry.name]]


def _without_cells(
    data: Rows, marks: Iterable[Mark], cells: set[tuple[str | None, int | None, str | None]]
) -> list[Mark]:
    """Return marks without missing values in cells, by file, line and variable, of which something was told."""
    news = []
    for mark in marks:
        if mark.check != "flag-without-value":
            news.append(mark)
            continue
        rows = data.table.select(["file", "line"]).take(pa.array(mark.rows)).to_pylist()
        keep = np.array([(row["file"], row["line"], mark.variable) not in cells for row in rows])
        if keep.any():
            news.append(mark.kept(keep))
    return news
