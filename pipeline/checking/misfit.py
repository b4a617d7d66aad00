"""Each property against what the others of the same cruise imply, in bands of pressure."""

from __future__ import annotations

from functools import reduce
from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.covariance import SIGMA, conditional_residuals, robust_shape
from pipeline.checking.figures import plain
from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import AFTER, BEFORE, BETWEEN, neighbours, plausible, unlike
from pipeline.findings import Severity

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import CheckSettings, Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]

_NAME = "property-misfit"
# What is judged, and beside what: heat and salt stand beside each, and are judged elsewhere.
_NITRATES = ("nitrate", "nitrate_plus_nitrite")
_GROUPS: tuple[tuple[tuple[str, ...], tuple[str, ...]], ...] = (
    (("bottle_oxygen", "nitrate", "phosphate", "silicate"), ()),
    (("dic", "alkalinity"), ("bottle_oxygen", "nitrate", "silicate")),
)
# A quantity takes part in a band where at least this part of the samples has it.
_PRESENT = 0.5
# Oxygen, nutrients and carbon that a sample must have at least.
_FEWEST_TOGETHER = 3
# Samples for each quantity that are needed besides.
_SAMPLES_PER_QUANTITY = 8


def property_misfit(data: Rows, settings: Settings) -> list[Mark]:
    """Oxygen, nutrients or carbon unlike what the sample's other properties imply at the cruise's other samples."""
    if not data.is_bottle:
        return []
    checks = settings.checks
    water = hydrography(data)
    marks: list[Mark] = []
    for judged, beside in _GROUPS:
        judged_here = [_delivered(data, name) for name in judged if _delivered(data, name) in data.names]
        names = judged_here + [
            _delivered(data, name) for name in beside if _delivered(data, name) in data.names
        ]
        if not judged_here or len(names) < 2:
            continue
        values = np.column_stack(
            [*(plausible(data, name) for name in names), water.conservative_temperature, _ctd_first(data)]
        )
        residual, suspect = _misfits(values, water.pressure, checks, len(judged_here), len(names))
        for number, name in enumerate(judged_here):
            marks += _told(data, name, residual[:, number], suspect[:, number], checks)
    return marks


def _delivered(data: Rows, name: str) -> str:
    """Return the name under which nitrate was delivered, and any other name as it is."""
    return _NITRATES[1] if name in _NITRATES and name not in data.names else name


def _ctd_first(data: Rows) -> FloatArray:
    """Return the CTD's salinity, else the bottle's, (n_row,): a bottle that closed elsewhere shall stand out."""
    ctd, bottle = plausible(data, "ctd_salinity"), plausible(data, "bottle_salinity")
    return np.where(np.isnan(ctd), bottle, ctd)


def _misfits(
    values: FloatArray, pressure: FloatArray, checks: CheckSettings, n_judged: int, n_chemical: int
) -> tuple[FloatArray, NDArray[np.bool_]]:
    """Return misfits, (n_row, n_judged), NaN where none is known, and which are by far the largest of their sample.

    Parameters
    ----------
    values
        Properties, (n_row, n_variable): those that are judged first, heat and salt last.
    pressure
        dbar, (n_row,).
    checks
        Bands and limits.
    n_judged, n_chemical
        How many are judged, and how many are neither heat nor salt.

    """
    found = np.full((len(values), n_judged), np.nan)
    suspect = np.zeros(found.shape, dtype=bool)
    present = ~np.isnan(values)
    with_any = reduce(np.logical_or, present[:, :n_judged].T) & ~np.isnan(pressure)
    fewest = max(checks.misfit_samples, _SAMPLES_PER_QUANTITY * values.shape[1])
    for together in _bands(pressure, with_any, sorted(checks.misfit_bands), fewest):
        used = np.flatnonzero(present[together].mean(axis=0) >= _PRESENT)
        judged, chemical = np.flatnonzero(used < n_judged), used[used < n_chemical]
        if len(judged) == 0 or len(chemical) < _FEWEST_TOGETHER:
            continue
        # What is implied by heat and salt alone is too loose to judge by.
        count = sum(present[together, one].astype(np.int64) for one in chemical)
        rows = together[count >= _FEWEST_TOGETHER]
        here = values[rows][:, used]
        complete = ~np.isnan(here @ np.ones(len(used)))
        if complete.sum() < max(checks.misfit_samples, _SAMPLES_PER_QUANTITY * len(used)):
            continue
        residual, normal = conditional_residuals(here, robust_shape(here[complete]))
        normal = np.abs(normal)
        with np.errstate(invalid="ignore"):
            largest = normal >= reduce(np.fmax, normal.T)[:, None]  # columns are few
            far = normal > checks.misfit_sigma * SIGMA * np.median(normal[complete], axis=0)
        cells = np.ix_(rows, used[judged])
        found[cells] = residual[:, judged]
        suspect[cells] = (largest & far)[:, judged]
    return found, suspect


def _bands(
    pressure: FloatArray, wanted: NDArray[np.bool_], edges: list[float], fewest: int
) -> list[NDArray[np.int64]]:
    """Return the rows of each band of pressure; a band with too few samples is joined to the next, or to the last."""
    band = np.where(wanted, np.searchsorted(edges, pressure, side="right"), 0)
    bands: list[NDArray[np.int64]] = []
    waiting = np.empty(0, dtype=np.int64)
    for number in range(1, len(edges)):
        waiting = np.append(waiting, np.flatnonzero(band == number))
        if len(waiting) >= fewest:
            bands.append(waiting)
            waiting = np.empty(0, dtype=np.int64)
    if len(waiting) and bands:
        bands[-1] = np.append(bands[-1], waiting)
    return bands


def _told(
    data: Rows, name: str, residual: FloatArray, suspect: NDArray[np.bool_], checks: CheckSettings
) -> list[Mark]:
    floor: float = getattr(checks.misfit_floor, name)
    with np.errstate(invalid="ignore"):
        suspect = suspect & (np.abs(residual) > floor)
    if name == "bottle_oxygen":
        suspect &= ~_ctd_agrees(data, floor)
    if not suspect.any():
        return []
    rows = np.flatnonzero(suspect)
    with np.errstate(invalid="ignore"):
        # A water mass that follows other rules is met by more samples than one, and lies on its cast's curve.
        alone = unlike(residual[rows], neighbours(data, residual, rows)) > np.abs(residual[rows]) / 2
        rows = rows[alone & _juts_out(data, name, residual, rows)]
    if not len(rows):
        return []
    values = [
        f"{value:g}, {plain(abs(by), 2)} umol/kg {'more' if by > 0 else 'less'}"
        for value, by in zip(data.floats(name)[rows], residual[rows], strict=True)
    ]
    words = "is {value} than the sample's other properties imply in this cruise"
    limit = f"within {floor:g} umol/kg, or {checks.misfit_sigma:g} times the scatter of other samples"
    return [Mark(_NAME, Severity.DOUBT, name, rows, values, words, limit)]


def _juts_out(data: Rows, name: str, residual: FloatArray, rows: NDArray[np.int64]) -> NDArray[np.bool_]:
    """Return which of some rows lie off the line between the samples above and below, to the side of their residual.

    At the ends of a cast, off the casts before and after. Shape (n_suspect,).
    """
    values = plausible(data, name)
    by = residual[rows, None]
    away = (values[rows, None] - neighbours(data, values, rows)) * np.sign(by)
    off = away > np.abs(by) / 2
    unknown = np.isnan(away)
    sides = (off | unknown)[:, BEFORE] & (off | unknown)[:, AFTER] & ~(unknown[:, BEFORE] & unknown[:, AFTER])
    return np.where(unknown[:, BETWEEN], sides, off[:, BETWEEN])


def _ctd_agrees(data: Rows, floor: float) -> NDArray[np.bool_]:
    """Return where the CTD measured the same oxygen, (n_row,): then something else of the sample is at fault."""
    with np.errstate(invalid="ignore"):
        return np.asarray(np.abs(plausible(data, "bottle_oxygen") - plausible(data, "ctd_oxygen")) <= floor)
