"""Checking: findings in words, and check flags beside the delivered ones. No delivered number is changed.

Each check is a pure function from a table of samples or CTD levels to marks.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from pipeline.checking.flags import (
    all_flagged_bad,
    flag_without_value,
    igoss_flag,
    unknown_flag,
    value_under_missing_flag,
)
from pipeline.checking.keys import duplicate_sample, repeated_station
from pipeline.checking.levels import duplicate_pressure, pressure_order
from pipeline.checking.marks import check_flags, findings_of
from pipeline.checking.ranges import gross_range
from pipeline.checking.track import cast_time, station_speed
from pipeline.usable import Rows
from pipeline.variables import CHECKED

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

    import numpy as np
    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.checking.marks import Mark
    from pipeline.findings import Finding
    from pipeline.settings import Settings

    Check = Callable[[Rows, Settings], list[Mark]]

CHECKS: dict[str, Check] = {
    "duplicate-sample": duplicate_sample,
    "repeated-station": repeated_station,
    "station-speed": station_speed,
    "cast-time": cast_time,
    "unknown-flag": unknown_flag,
    "igoss-flag": igoss_flag,
    "flag-without-value": flag_without_value,
    "value-under-missing-flag": value_under_missing_flag,
    "all-flagged-bad": all_flagged_bad,
    "gross-range": gross_range,
    "duplicate-pressure": duplicate_pressure,
    "pressure-order": pressure_order,
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
    marks = [mark for one in CHECKS.values() for mark in one(data, settings)]
    measured = [name for name in CHECKED if name in data.names]
    findings = findings_of(data, marks)
    news = [
        f
        for f in findings
        if f.check != "flag-without-value" or (f.file, f.line, f.variable) not in unreadable
    ]
    return Checked(check_flags(data, measured, marks), tuple(news))  # fmt: skip
