"""Corrections of whole cruises that the settings give: put beside the delivered values, never over them."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.findings import Finding, Severity
from pipeline.tables import floats, with_columns, with_metadata
from pipeline.variables import REGISTRY, corrected_name

if TYPE_CHECKING:
    from collections.abc import Mapping

    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.crossover_settings import Correction

    FloatArray = NDArray[np.float64]


def corrected(table: pa.Table, corrections: Mapping[str, Correction]) -> pa.Table:
    """Return a table of samples or CTD levels with a column of corrected values for each quantity it has.

    Delivered values, flags and checks stay as they are. What was done, and why, is in the field metadata.

    Parameters
    ----------
    table
        Rows of one cruise.
    corrections
        From quantity to what is done to it.

    """
    here = {name: one for name, one in sorted(corrections.items()) if name in table.schema.names}
    columns = {corrected_name(name): apply(floats(table, name), one) for name, one in here.items()}
    told = {
        corrected_name(name): {"correction": what_is_done(name, one), "correction_reason": one.reason}
        for name, one in here.items()
    }
    return with_metadata(with_columns(table, columns), told) if here else table


def apply(values: FloatArray, correction: Correction) -> FloatArray:
    """Return values times the factor, or with what is added, (n,); missing stays missing."""
    if correction.factor is not None:
        return np.asarray(values * correction.factor)
    return np.asarray(values + (correction.add or 0.0))


def what_is_done(name: str, correction: Correction) -> str:
    """Return a correction in words: 'multiplied by 0.99', 'lowered by 3.0 umol kg-1'."""
    if correction.factor is not None:
        return f"multiplied by {correction.factor!r}"
    add, unit = correction.add or 0.0, REGISTRY[name].unit
    return f"{'lowered' if add < 0 else 'raised'} by {abs(add)!r}{'' if unit == '1' else f' {unit}'}"


def correction_findings(
    expocode: str, tables: Mapping[str, pa.Table], corrections: Mapping[str, Correction]
) -> tuple[Finding, ...]:
    """Return a note for every correction: that it was made, or that the cruise has nothing to make it to.

    Parameters
    ----------
    expocode
        The cruise.
    tables
        Its tables, by the word for a row of each.
    corrections
        The settings' corrections of it.

    """
    findings = []
    for name, one in sorted(corrections.items()):
        holding = [
            f"{t.num_rows} {kind}{'' if t.num_rows == 1 else 's'}"
            for kind, t in tables.items()
            if name in t.schema.names
        ]
        if holding:
            message = (
                f"{expocode}: {name} of {' and '.join(holding)} was {what_is_done(name, one)}, as the settings say"
                f" ({one.reason}); the delivered values stand beside it."
            )
        else:
            message = (
                f"{expocode}: the settings correct {name}, which this cruise did not deliver; nothing was done;"
                " remove the correction, or correct the name of its quantity."
            )
        severity = Severity.NOTE if holding else Severity.DOUBT
        check = "corrected" if holding else "correction-unused"
        findings.append(Finding(check, severity, message, variable=name, value=what_is_done(name, one)))
    return tuple(findings)
