"""DIC and alkalinity of one sample beside each other."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.figures import label, named
from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import neighbours, plausible, unlike
from pipeline.checking.profiles import limit_at
from pipeline.findings import Severity

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]

_DIC, _ALKALINITY = "dic", "alkalinity"


def alkalinity_less_dic(data: Rows, settings: Settings) -> list[Mark]:
    """DIC and alkalinity that do not fit together: their difference is no sea water's, nor that of samples beside."""
    if not {_DIC, _ALKALINITY} <= data.names:
        return []
    dic, alkalinity = plausible(data, _DIC), plausible(data, _ALKALINITY)
    difference = alkalinity - dic
    low, high = settings.checks.alkalinity_less_dic
    with np.errstate(invalid="ignore"):
        suspect = np.flatnonzero((difference < low) | (difference > high))
    if not len(suspect):
        return []
    pressure = hydrography(data).pressure[suspect]
    spikes = settings.checks.spike_bottle
    # A step that the spike check lets pass in each may add up in their difference.
    steps = {name: limit_at(getattr(spikes, name), pressure, settings.checks) for name in (_DIC, _ALKALINITY)}
    kept = _alone(data, difference, suspect, steps[_DIC] + steps[_ALKALINITY])
    rows = suspect[kept]
    if not len(rows):
        return []
    odd = {
        name: _alone(data, values, rows, steps[name][kept])
        for name, values in ((_DIC, dic), (_ALKALINITY, alkalinity))
    }
    values = [
        f"{dic[row]:g} and {alkalinity[row]:g}, alkalinity less DIC {difference[row]:.0f} umol/kg"
        f"{_which([name for name in odd if odd[name][i]])}"
        for i, row in enumerate(rows.tolist())
    ]
    words, limit = "do not fit together: {value}", f"{low:g} to {high:g} umol/kg, or what samples beside have"
    return [
        Mark("alkalinity-less-dic", Severity.DOUBT, _DIC, rows, values, words, limit, also=(_ALKALINITY,))
    ]


def _alone(data: Rows, values: FloatArray, rows: NDArray[np.int64], departs: FloatArray) -> BoolArray:
    """Return which of some rows differ from all that stands beside them, (n,); those with nothing beside do not."""
    with np.errstate(invalid="ignore"):
        return np.asarray(unlike(values[rows], neighbours(data, values, rows)) > departs)


def _which(odd: list[str]) -> str:
    """Return in words which of the two is unlike the samples beside it."""
    if len(odd) == 1:
        return f", and of the two {label(odd[0])} is unlike the samples beside it"
    return (
        f", and {named([label(name) for name in odd])} are both unlike the samples beside them" if odd else ""
    )
