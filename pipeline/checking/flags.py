"""Delivered flags against the values they speak of, and against their scheme."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from pipeline.checking.marks import Mark
from pipeline.findings import Severity
from pipeline.usable import one_of
from pipeline.variables import CHECKED, EXCHANGE_NAMES, MEASURED, REGISTRY, FlagScheme, flag_name

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

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


def unknown_flag(data: Rows, settings: Settings) -> list[Mark]:
    """Flags outside the scheme of their column."""
    marks = []
    for name in (*MEASURED, "bottle"):
        scheme = REGISTRY[name].flags
        if flag_name(name) not in data.names or scheme is None:
            continue
        flags = data.floats(flag_name(name))
        rows = np.flatnonzero(~np.isnan(flags) & ~one_of(flags, SCHEMES[scheme]))
        if len(rows):
            limit = f"a WHP {_NAMES[scheme]} flag, {SCHEMES[scheme][0]} to {SCHEMES[scheme][-1]}"
            outcome = (
                "what was drawn from the bottle is used all the same"
                if name == "bottle"
                else _unused(settings, "values under it are")
            )
            marks.append(
                Mark("unknown-flag", Severity.DOUBT, name, rows, flags[rows].tolist(), "has flag {value}", limit,
                     outcome=outcome)
            )  # fmt: skip
    return marks


def igoss_flag(data: Rows, settings: Settings) -> list[Mark]:
    """Values that an IGOSS flag column, which stands in place of a WHP one, calls doubtful or erroneous."""
    marks = []
    for column in data.table.schema.names:
        variable = EXCHANGE_NAMES.get(column.upper().removesuffix(_IGOSS_SUFFIX))
        if not column.upper().endswith(_IGOSS_SUFFIX) or variable is None or variable.name not in CHECKED:
            continue
        flags = data.floats(column) if data.table.schema.field(column).type == pa.float64() else np.empty(0)
        for flag, severity, word in _IGOSS_BAD:
            rows = np.flatnonzero(flags == flag)
            if len(rows) and variable.name in data.names:
                marks.append(
                    Mark(
                        "igoss-flag", severity, variable.name, rows, flags[rows].tolist(),
                        f"is {word} by its IGOSS flag {{value}}", "a good value", outcome=_unused(settings, "it is"),
                    )
                )  # fmt: skip
    return marks


def flag_without_value(data: Rows, settings: Settings) -> list[Mark]:
    """A good flag on a missing value."""
    marks = []
    for name in _flagged(data):
        flags, values = data.floats(flag_name(name)), data.floats(name)
        rows = np.flatnonzero(np.isnan(values) & (flags == _GOOD))
        if len(rows):
            marks.append(
                Mark(
                    "flag-without-value", Severity.DOUBT, name, rows, flags[rows].tolist(),
                    "is missing under the good flag {value}", "a value, or flag 9 where none was sampled",
                )
            )  # fmt: skip
    return marks


def value_under_missing_flag(data: Rows, settings: Settings) -> list[Mark]:
    """A value under a flag that says there is none."""
    marks = []
    for name in _flagged(data):
        flags, values = data.floats(flag_name(name)), data.floats(name)
        rows = np.flatnonzero(~np.isnan(values) & one_of(flags, (_NOT_REPORTED, _NOT_SAMPLED)))
        if len(rows):
            marks.append(
                Mark(
                    "value-under-missing-flag", Severity.DOUBT, name, rows, values[rows].tolist(),
                    "is {value} under a flag that says there is no value", "no value, or another flag", alike=True,
                    outcome=_unused(settings, "it is"),
                )
            )  # fmt: skip
    return marks


def all_flagged_bad(data: Rows, settings: Settings) -> list[Mark]:
    """A whole parameter of which no value may be used."""
    marks = []
    for name in _flagged(data):
        rows = np.flatnonzero(~np.isnan(data.floats(name)))
        if len(rows) < _FEWEST_FOR_A_WHOLE or data.may_use(name)[rows].any():
            continue
        flags, scheme = data.floats(flag_name(name))[rows], REGISTRY[name].flags
        if scheme is not None and not one_of(flags, SCHEMES[scheme]).any():
            continue  # the flags themselves are told of
        flags, place = _as_delivered(data, name)
        flags = flags[rows]
        common = np.bincount(flags[np.isfinite(flags) & (flags >= 0)].astype(int), minlength=1).argmax()
        most = "all" if np.all(flags == common) else "most"
        marks.append(
            Mark(
                "all-flagged-bad", Severity.NOTE, name, rows, [int(common)],
                f"has {len(rows)} values and none under a good flag ({most} have flag {{value}}{place})",
                "some good values, if the parameter is meant to be used", together=True,
            )
        )  # fmt: skip
    return marks


def _as_delivered(data: Rows, name: str) -> tuple[NDArray[np.float64], str]:
    """Return a quantity's flags as the file has them, (n_row,), and in which column, where we read them as others."""
    field = data.table.schema.field(flag_name(name))
    column = (field.metadata or {}).get(b"delivered_name", b"").decode()
    if column not in data.names or not pa.types.is_floating(data.table.schema.field(column).type):
        return data.floats(flag_name(name)), ""
    return data.floats(column), f" in {column}"


def _unused(settings: Settings, words: str) -> str:
    """Return what becomes of values that are doubted, nothing where the settings let them be used."""
    return "" if settings.use.doubtful else f"{words} not used"


def _flagged(data: Rows) -> list[str]:
    return [name for name in MEASURED if name in data.names and flag_name(name) in data.names]
