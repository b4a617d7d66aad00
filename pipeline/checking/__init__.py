"""Checking: findings in words, and check flags beside the delivered ones. No delivered number is changed.

Each check is a pure function from a table of samples or CTD levels to marks.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

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
from pipeline.checking.marks import check_flags, findings_of, once
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
from pipeline.checking.table import CheckEntry
from pipeline.checking.track import cast_time, clock_order, departure_date, station_speed
from pipeline.findings import Severity
from pipeline.usable import Rows
from pipeline.variables import CHECKED

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    import numpy as np
    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.findings import Finding
    from pipeline.settings import Settings

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
        CheckEntry("all-flagged-bad", all_flagged_bad, (NOTE,)),
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
        CheckEntry("clock-order", clock_order, (NOTE,)),
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
        CheckEntry("wrong-unit", wrong_unit, (DOUBT,), ("whole_column", "whole_column_samples")),
        CheckEntry("position-sign", position_sign, (DOUBT,), ("off_section", "off_section_ratio")),
    )
}


@dataclass(frozen=True, slots=True)
class Checked:
    """Check flags by column name, shape (n_row,) each, and what was noticed in words."""

    flags: dict[str, NDArray[np.int64]]
    findings: tuple[Finding, ...]


def check(table: pa.Table, settings: Settings, told: Iterable[Finding] = ()) -> Checked:
    """Run every check over a table of samples, or of CTD levels, as delivered.

    Parameters
    ----------
    table
        Rows as read.
    settings
        Limits, and which flags count as good.
    told
        What reading noticed: a cell that held no number is not told of again as a missing value.

    """
    unreadable = {(f.file, f.line, f.variable) for f in told if f.check == "not-a-number"}
    data = Rows(table, settings.use)
    marks = [mark for entry in CHECKS.values() for mark in entry.run(data, settings)]
    measured = [name for name in CHECKED if name in data.names]
    findings = findings_of(data, once(data, marks))
    news = [
        f
        for f in findings
        if f.check != "flag-without-value" or (f.file, f.line, f.variable) not in unreadable
    ]
    return Checked(check_flags(data, measured, marks), tuple(news))  # fmt: skip
