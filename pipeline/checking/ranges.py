"""Values that no ocean has."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.marks import Mark
from pipeline.findings import Severity
from pipeline.variables import MEASURED, REGISTRY

if TYPE_CHECKING:
    from pipeline.settings import Settings
    from pipeline.usable import Rows


def gross_range(data: Rows, settings: Settings) -> list[Mark]:
    """Values outside the plausible range of the registry that their flags would let be used.

    A value further out than the range is wide is a fault (garbage, another unit); a nearer one is a doubt,
    for it may be an honest extreme such as a river plume. A nutrient may lie below its range by the noise
    near its limit of detection. A value that the group itself flagged as bad is no news; it is not told again.
    """
    marks = []
    noise = dict(settings.checks.negative_nutrients)
    for name in MEASURED:
        plausible = REGISTRY[name].plausible
        if name not in data.names or plausible is None:
            continue
        if name in noise:
            plausible = (min(plausible[0], -noise[name]), plausible[1])
        values = data.floats(name)
        with np.errstate(invalid="ignore"):
            outside = (values < plausible[0]) | (values > plausible[1])
            width = plausible[1] - plausible[0]
            far = (values < plausible[0] - width) | (values > plausible[1] + width)
        if not outside.any():
            continue
        outside &= data.may_use(name)
        limit = f"{plausible[0]:g} to {plausible[1]:g} {_unit(name)}".rstrip()
        for severity, found in ((Severity.FAULT, outside & far), (Severity.DOUBT, outside & ~far)):
            rows = np.flatnonzero(found)
            if len(rows):
                marks.append(
                    Mark("gross-range", severity, name, rows, values[rows].tolist(), "is {value}", limit)
                )
    return marks


def _unit(name: str) -> str:
    unit = REGISTRY[name].unit
    return "" if unit == "1" else unit
