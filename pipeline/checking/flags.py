"""Delivered flags against the values they speak of, and against their scheme."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from pipeline.checking.marks import Mark
from pipeline.findings import Severity
from pipeline.tables import floats
from pipeline.usable import may_use
from pipeline.variables import CHECKED, EXCHANGE_NAMES, MEASURED, REGISTRY, FlagScheme, flag_name

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings

    BoolArray = NDArray[np.bool_]

# Joyce and Corry 1994, WHP 90-1: the flags each scheme defines.
SCHEMES = {
    FlagScheme.BOTTLE: (1, 2, 3, 4, 5, 6, 7, 8, 9),
    FlagScheme.WATER: (1, 2, 3, 4, 5, 6, 7, 8, 9),
    FlagScheme.CTD: (1, 2, 3, 4, 5, 6, 7, 9),
}
# IGOSS flags stand in columns of another name, which pass through (from memory).
_IGOSS_SUFFIX = "_FLAG_I"
_IGOSS_BAD = ((4.0, Severity.FAULT, "erroneous"), (3.0, Severity.DOUBT, "doubtful"))
_NAMES = {FlagScheme.BOTTLE: "bottle", FlagScheme.WATER: "water-sample", FlagScheme.CTD: "CTD"}
_GOOD, _NOT_REPORTED, _NOT_SAMPLED = 2, 5, 9
# A whole parameter is told of only where it is more than a handful of values.
_FEWEST_FOR_A_WHOLE = 10


def unknown_flag(table: pa.Table, settings: Settings) -> list[Mark]:
    """Flags outside the scheme of their column."""
    marks = []
    for name in (*MEASURED, "bottle"):
        if flag_name(name) not in table.column_names:
            continue
        scheme = REGISTRY[name].flags
        if scheme is None:
            continue
        flags = floats(table, flag_name(name))
        rows = np.flatnonzero(~np.isnan(flags) & ~np.isin(flags, SCHEMES[scheme]))
        if len(rows):
            limit = f"a WHP {_NAMES[scheme]} flag, {SCHEMES[scheme][0]} to {SCHEMES[scheme][-1]}"
            marks.append(
                Mark(
                    "unknown-flag",
                    Severity.DOUBT,
                    name,
                    rows,
                    flags[rows].tolist(),
                    "has flag {value}",
                    limit,
                )
            )
    return marks


def igoss_flag(table: pa.Table, settings: Settings) -> list[Mark]:
    """Values that an IGOSS flag column, which stands in place of a WHP one, calls doubtful or erroneous."""
    marks = []
    for column in table.column_names:
        variable = EXCHANGE_NAMES.get(column.upper().removesuffix(_IGOSS_SUFFIX))
        if not column.upper().endswith(_IGOSS_SUFFIX) or variable is None or variable.name not in CHECKED:
            continue
        flags = floats(table, column) if table.schema.field(column).type == pa.float64() else np.empty(0)
        for flag, severity, word in _IGOSS_BAD:
            rows = np.flatnonzero(flags == flag)
            if len(rows) and variable.name in table.column_names:
                marks.append(
                    Mark(
                        "igoss-flag", severity, variable.name, rows, flags[rows].tolist(),
                        f"is {word} by its IGOSS flag {{value}}", "a good value",
                    )
                )  # fmt: skip
    return marks


def flag_without_value(table: pa.Table, settings: Settings) -> list[Mark]:
    """A good flag on a missing value."""
    marks = []
    for name in _flagged(table):
        flags, values = floats(table, flag_name(name)), floats(table, name)
        rows = np.flatnonzero(np.isnan(values) & (flags == _GOOD))
        if len(rows):
            marks.append(
                Mark(
                    "flag-without-value", Severity.DOUBT, name, rows, flags[rows].tolist(),
                    "is missing under the good flag {value}", "a value, or flag 9 where none was sampled",
                )
            )  # fmt: skip
    return marks


def value_under_missing_flag(table: pa.Table, settings: Settings) -> list[Mark]:
    """A value under a flag that says there is none."""
    marks = []
    for name in _flagged(table):
        flags, values = floats(table, flag_name(name)), floats(table, name)
        rows = np.flatnonzero(~np.isnan(values) & np.isin(flags, (_NOT_REPORTED, _NOT_SAMPLED)))
        if len(rows):
            marks.append(
                Mark(
                    "value-under-missing-flag", Severity.DOUBT, name, rows, values[rows].tolist(),
                    "is {value} under a flag that says there is no value", "no value, or another flag",
                )
            )  # fmt: skip
    return marks


def all_flagged_bad(table: pa.Table, settings: Settings) -> list[Mark]:
    """A whole parameter of which no value may be used."""
    marks = []
    for name in _flagged(table):
        rows = np.flatnonzero(~np.isnan(floats(table, name)))
        if len(rows) < _FEWEST_FOR_A_WHOLE or may_use(table, name, settings.use)[rows].any():
            continue
        flags = floats(table, flag_name(name))[rows]
        common = np.bincount(flags[np.isfinite(flags) & (flags >= 0)].astype(int), minlength=1).argmax()
        marks.append(
            Mark(
                "all-flagged-bad", Severity.NOTE, name, rows[:1], [int(common)],
                f"has {len(rows)} values and none under a good flag (most have flag {{value}})",
                "some good values, if the parameter is meant to be used",
            )
        )  # fmt: skip
    return marks


def _flagged(table: pa.Table) -> list[str]:
    names = set(table.column_names)
    return [name for name in MEASURED if name in names and flag_name(name) in names]
