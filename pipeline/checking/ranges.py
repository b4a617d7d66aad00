"""Values that no ocean has."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.figures import unit_of
from pipeline.checking.marks import Mark
from pipeline.findings import Severity
from pipeline.usable import one_of
from pipeline.variables import MEASURED, REGISTRY, flag_name

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# Numbers of nines that stand for a missing value in files of all kinds: with a minus, and the longer ones without
# (common practice, no source).
_NINES = (99.0, 99.9, 99.99, 99.999, 999.0, 999.9, 999.99, 999.999, 9999.0, 9999.9, 99999.0, 999999.0)
_MINUS_NINES = (-9.0, -9.9, -9.99, -9.999, *(-code for code in _NINES))


def gross_range(data: Rows, settings: Settings) -> list[Mark]:
    """Values outside the plausible range of the registry that their flags would let be used.

    A value further out than the range is wide is a fault (garbage, another unit), and so is one that is
    written like a code for a missing value; a nearer one is a doubt, for it may be an honest extreme such as a
    river plume. A nutrient may lie below its range by the noise near its limit of detection. A value that the
    group itself flagged as bad is no news; it is not told again.
    """
    marks: list[Mark] = []
    noise = dict(settings.checks.negative_nutrients)
    for name in MEASURED:
        plausible = REGISTRY[name].plausible
        if name not in data.names or plausible is None:
            continue
        low, high = (min(plausible[0], -noise[name]), plausible[1]) if name in noise else plausible
        values = data.floats(name)
        with np.errstate(invalid="ignore"):
            outside = (values < low) | (values > high)
        if outside.any():
            rows = np.flatnonzero(outside & data.may_use(name))
            marks += _told(data, name, rows, low, high)
    return marks


def _told(data: Rows, name: str, rows: IntArray, low: float, high: float) -> Iterator[Mark]:
    """Yield what is said of values outside a range: codes, what is far outside, what is a little outside."""
    values = data.floats(name)[rows]
    coded = one_of(values, (*_NINES, *_MINUS_NINES))
    far = ~coded & ((values < low - (high - low)) | (values > high + (high - low)))
    limit = f"{low:g} to {high:g} {unit_of(name)}".rstrip()
    missing = ", or a missing value" + (" under flag 9" if flag_name(name) in data.names else "")
    for severity, chosen, words, more in (
        (Severity.FAULT, coded, "is {value}, which looks like a code for a missing value", missing),
        (Severity.FAULT, far, "is {value}, off by more than the whole range of sea water", ""),
        (Severity.DOUBT, ~coded & ~far, "is {value}", ""),
    ):
        mine = rows[chosen]
        if len(mine):
            found = _beside_the_floor(data, mine) if name == "pressure" else data.floats(name)[mine].tolist()
            yield Mark("gross-range", severity, name, mine, found, words, f"{limit}{more}")


def _beside_the_floor(data: Rows, rows: IntArray) -> list[str]:
    """Return pressures with the depth of the sea floor beside them, where that is known."""
    pressures, floors = data.floats("pressure")[rows], data.floats("bottom_depth")[rows]
    return [
        f"{pressure:g}" + (f" where the sea floor is at {floor:g} m" if floor > 0 else "")
        for pressure, floor in zip(pressures.tolist(), floors.tolist(), strict=True)
    ]
