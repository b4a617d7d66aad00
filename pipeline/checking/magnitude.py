"""Whole columns that look like another unit, another quantity or another column: magnitudes, and nothing finer.

A unit is suspected where nearly all values of a column fit it and hardly any fit the unit that the column has.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import gsw
import numpy as np

from pipeline.checking.figures import label, plain, unit_of
from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.checking.relations import MOLAR_MASS, Misplaced, misplaced
from pipeline.checking.saturation import solubility
from pipeline.findings import Severity
from pipeline.units import OXYGEN_UMOL_PER_MG, OXYGEN_UMOL_PER_ML
from pipeline.variables import MEASURED, REGISTRY

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]

_NAME = "wrong-unit"
_LITRES_PER_KG = 1.0 / 1.0256  # of sea water: enough for a magnitude
_UMOL_PER_MMOL, _UMOL_PER_MOL = 1e3, 1e6
_CONDUCTIVITY = 42.914  # mS/cm at a salinity of 35, 15 degC (IPTS-68) and the surface (Culkin and Smith 1980)


@dataclass(frozen=True, slots=True)
class _Suspicion:
    """Another unit that a column may be in: what its values become by it, and what sea water then has.

    ``unit`` ends the sentence "has values from 1 to 2, as ...". ``own`` is what sea water has in the unit that
    the column should be in. Only samples from ``below`` (dbar) on are looked at, for near the surface some
    quantities are nearly nothing; the largest value has to be ``reaches`` at least.
    """

    variable: str
    unit: str
    factor: float
    offset: float
    fits: tuple[float, float]
    own: tuple[float, float]
    below: float = 0.0
    reaches: float = -np.inf


@dataclass(frozen=True, slots=True)
class _Whole:
    """The suspicion of a whole column: "has values from 1 to 2, <given>; expected <own>".

    ``possible`` is what the column can have if the suspicion is right.
    """

    values: FloatArray  # (n_row,)
    variable: str
    given: str
    own: str
    possible: tuple[float, float] | None = None
    exchanged: str = ""  # the column that stands in its place


def _amounts(name: str, deep: tuple[float, float], molar_mass: float) -> tuple[_Suspicion, ...]:
    """Return what a nutrient may be in. Its deep values in umol/kg are those of all oceans and the Mediterranean."""
    return (
        _Suspicion(name, "sea water has in nmol/kg", 1e-3, 0.0, deep, deep, 500.0),
        _Suspicion(name, "sea water has in mmol/kg or mmol/l", _UMOL_PER_MMOL, 0.0, deep, deep, 500.0),
        _Suspicion(name, "sea water has in mol/kg or mol/l", _UMOL_PER_MOL, 0.0, deep, deep, 500.0),
        _Suspicion(
            name, "sea water has in micrograms per litre", _LITRES_PER_KG / molar_mass, 0.0, deep, deep, 500.0
        ),
    )


# Ranges: common practice, no source. The molar mass of C, 12.011 g/mol (from memory).
_CARBON = (1700.0, 2600.0)
_SUSPICIONS = (
    _Suspicion("temperature", "sea water has in kelvin", 1.0, -273.15, (-2.5, 36.0), (-2.5, 40.0)),
    _Suspicion(
        "temperature",
        "sea water has in degrees Fahrenheit",
        1 / 1.8,
        -32 / 1.8,
        (-2.5, 32.0),
        (-2.5, 31.0),
        reaches=38.0,
    ),
    *(
        _Suspicion(name, f"sea water has in {unit}", factor, 0.0, (30.0, 42.0), (0.1, 42.0))
        for name in ("bottle_salinity", "ctd_salinity")
        for unit, factor in (("kg/kg", 1e3), ("parts per million", 1e-3))
    ),
    *(
        _Suspicion(name, f"sea water has in {unit}", factor, 0.0, _CARBON, (100.0, 3500.0))
        for name in ("dic", "alkalinity")
        for unit, factor in (("mol/kg", _UMOL_PER_MOL), ("mmol/kg", _UMOL_PER_MMOL), ("nmol/kg", 1e-3))
    ),
    *(
        _Suspicion(name, f"sea water has in {unit}", factor, 0.0, _CARBON, (700.0, 4500.0), 500.0)
        for name in ("dic", "alkalinity")
        for unit, factor in (("tens of umol/kg", 10.0), ("tenths of umol/kg", 0.1))
    ),
    _Suspicion(
        "dic",
        "sea water has in mg of carbon per litre",
        1e3 * _LITRES_PER_KG / 12.011,
        0.0,
        _CARBON,
        (100.0, 3500.0),
    ),
    _Suspicion("delta_carbon_13", "the carbon of organic matter has", 1.0, 0.0, (-40.0, -12.0), (-5.0, 5.0)),
)
_NUTRIENTS = (
    *_amounts("nitrate", (3.0, 47.0), MOLAR_MASS["nitrate"]),
    *_amounts("nitrate_plus_nitrite", (3.0, 47.0), MOLAR_MASS["nitrate"]),
    *_amounts("phosphate", (0.1, 3.8), MOLAR_MASS["phosphate"]),
    *_amounts("silicate", (3.0, 250.0), MOLAR_MASS["silicate"]),
)
# Columns that may stand in each other's place: what each has, in the deep for nutrients.
_EXCHANGED = (
    (("silicate", (3.0, 250.0)), ("phosphate", (0.1, 3.8)), 500.0),
    (("nitrate", (3.0, 47.0)), ("phosphate", (0.1, 3.8)), 500.0),
    (("nitrate", (3.0, 47.0)), ("nitrite", (-0.1, 0.5)), 500.0),
)


def wrong_unit(data: Rows, settings: Settings) -> list[Mark]:
    """Columns that look as if they were in another unit, or another column's."""
    share, fewest = settings.checks.whole_column, settings.checks.whole_column_samples
    wrong: dict[str, _Whole] = {}
    with np.errstate(all="ignore"):  # values of any size are what is looked for
        for look in _LOOKS:
            for whole in look(data, share, fewest):
                wrong.setdefault(whole.variable, whole)  # the first suspicion of a column is told
        for off in misplaced(data, wrong, share, fewest):
            wrong[off.name] = _times(data, off)
        for whole in _units(data, share, fewest, _NUTRIENTS):  # what the other columns do not tell
            wrong.setdefault(whole.variable, whole)
    outcome = "" if settings.use.doubtful else "the column is not used"
    return [mark for whole in wrong.values() for mark in _marks(whole, wrong.get(whole.exchanged), outcome)]


def _times(data: Rows, off: Misplaced) -> _Whole:
    """Return the suspicion of a column that is some times too large or small."""
    own = f"about {plain(off.fits[0])} to {plain(off.fits[1])} {unit_of(off.name)} there"
    low, high = _plausible(off.name)
    return _Whole(data.usable(off.name), off.name, off.words, own, (off.factor * low, off.factor * high))


def _others(data: Rows, share: float, fewest: int) -> Iterator[_Whole]:
    yield from _units(data, share, fewest, _SUSPICIONS)


def _units(data: Rows, share: float, fewest: int, suspicions: tuple[_Suspicion, ...]) -> Iterator[_Whole]:
    pressure = hydrography(data).pressure
    for suspicion in suspicions:
        if suspicion.variable not in data.names:
            continue
        values = data.usable(suspicion.variable)
        with np.errstate(invalid="ignore"):
            judged = values[(pressure >= suspicion.below) & ~np.isnan(values)]
        if len(judged) < fewest or judged.max() < suspicion.reaches:
            continue
        if _within(judged, suspicion.own) > 1.0 - share:
            continue
        if _within(judged * suspicion.factor + suspicion.offset, suspicion.fits) >= share:
            where = f" from {suspicion.below:g} dbar down" if suspicion.below else ""
            low, high = suspicion.own if suspicion.variable == "delta_carbon_13" else suspicion.fits
            own = f"about {low:g} to {high:g} {unit_of(suspicion.variable)}".rstrip() + where
            ends = ((end - suspicion.offset) / suspicion.factor for end in _plausible(suspicion.variable))
            low, high = sorted(ends)
            yield _Whole(values, suspicion.variable, f"as {suspicion.unit}", own, (low, high))


def _exchanged(data: Rows, share: float, fewest: int) -> Iterator[_Whole]:
    """Yield two marks for each pair of columns of which each holds what the other should."""
    pressure = hydrography(data).pressure
    for (one, of_one), (other, of_other), below in _EXCHANGED:
        if one not in data.names or other not in data.names:
            continue
        ones, others = data.usable(one), data.usable(other)
        with np.errstate(invalid="ignore"):
            rows = (pressure >= below) & ~np.isnan(ones + others)
        pairs = ((ones[rows], of_one, of_other), (others[rows], of_other, of_one))
        if rows.sum() < fewest:
            continue
        if all(_within(v, own) <= 1.0 - share and _within(v, fits) >= share for v, own, fits in pairs):
            for values, name, wrong, (low, high) in (
                (ones, one, other, of_one),
                (others, other, one, of_other),
            ):
                own = f"about {low:g} to {high:g} {unit_of(name)} from {below:g} dbar down"
                given = f"as {label(wrong)} has; the two columns may be exchanged"
                yield _Whole(values, name, given, own, _plausible(wrong), wrong)
    yield from _carbon_exchanged(data, share, fewest)


def _carbon_exchanged(data: Rows, share: float, fewest: int) -> Iterator[_Whole]:
    """Yield marks where DIC lies above alkalinity everywhere, as it does in no sea."""
    carbon, alkalinity = data.usable("dic"), data.usable("alkalinity")
    rows = ~np.isnan(carbon + alkalinity)
    if rows.sum() < fewest:
        return
    fits = (carbon[rows] - alkalinity[rows] > 20.0) & (np.abs(carbon[rows] - alkalinity[rows]) < 500.0)
    if fits.mean() >= share:
        own = "below ALKALI, as in all oceans"
        for values, name, wrong in ((carbon, "dic", "alkalinity"), (alkalinity, "alkalinity", "dic")):
            yield _Whole(
                values, name, f"as {label(wrong)} has; the two columns may be exchanged", own, None, wrong
            )


def _oxygen(data: Rows, share: float, fewest: int) -> Iterator[_Whole]:
    """Yield a mark where oxygen near the surface is that of air in another unit, and not in its own."""
    water = hydrography(data)
    units = {
        "ml/l": OXYGEN_UMOL_PER_ML * _LITRES_PER_KG,
        "mg/l": OXYGEN_UMOL_PER_MG * _LITRES_PER_KG,
        "mmol/kg": _UMOL_PER_MMOL,
        "mol/kg": _UMOL_PER_MOL,
        "tenths of umol/kg": 0.1,
        "tens of umol/kg": 10.0,
        "umol/kg when that is taken for ml/l and converted": 1.0 / (OXYGEN_UMOL_PER_ML * _LITRES_PER_KG),
    }
    for name in ("bottle_oxygen", "ctd_oxygen"):
        if name not in data.names:
            continue
        values = data.usable(name)
        with np.errstate(invalid="ignore"):
            upper = (water.pressure <= 100.0) & ~np.isnan(values)
            saturation = (values / solubility(data))[upper]
        saturation = saturation[~np.isnan(saturation)]
        if len(saturation) < fewest or _within(saturation, (0.15, 3.0)) > 1.0 - share:
            continue
        middles = {
            unit: abs(np.log(max(float(np.median(saturation)) * f, 1e-9))) for unit, f in units.items()
        }
        unit = min(middles, key=lambda unit: middles[unit])
        whole = values[~np.isnan(values)] * units[unit]
        if (
            _within(saturation * units[unit], (0.4, 1.6)) >= share / 2
            and _within(whole, (-2.0, 500.0)) >= share
        ):
            own = "oxygen near saturation close to the surface, 150 to 450 umol/kg"
            low, high = (end / units[unit] for end in _plausible(name))
            yield _Whole(values, name, f"as sea water has in {unit}", own, (low, high))


def _conductivity(data: Rows, share: float, fewest: int) -> Iterator[_Whole]:
    """Yield a mark where salinity follows temperature as conductivity does, and is even when taken as that."""
    water = hydrography(data)
    for name in ("bottle_salinity", "ctd_salinity"):
        if name not in data.names:
            continue
        values = data.usable(name)
        with np.errstate(invalid="ignore"):
            rows = np.flatnonzero(
                (values > 0.2)
                & (values < 80.0)
                & (np.abs(water.temperature) < 40.0)
                & (np.abs(water.pressure) < 1.2e4)
            )
        if len(rows) < fewest:
            continue
        own = _spread(values[rows])
        for unit, factor in (
            ("mS/cm", 1.0),
            ("S/m", 10.0),
            ("parts of that at a salinity of 35 and 15 degC", _CONDUCTIVITY),
        ):
            largest = np.max(values[rows]) * factor
            if not 20.0 < largest < 80.0 or own * factor < 3.0:
                continue
            salinity = gsw.SP_from_C(values[rows] * factor, water.temperature[rows], water.pressure[rows])
            if _within(salinity, (28.0, 41.0)) >= share and _spread(salinity) < 0.3 * own * factor:
                given = f"as the conductivity of sea water has in {unit}"
                yield _Whole(values, name, given, "practical salinity")
                break


def _pressure(data: Rows, share: float, fewest: int) -> Iterator[_Whole]:
    """Yield a mark where casts end at a tenth, a hundredth or ten times the depth of the sea floor."""
    pressure, bottom = data.usable("pressure"), data.floats("bottom_depth")
    with np.errstate(invalid="ignore"):
        rows = np.flatnonzero(~np.isnan(pressure) & (bottom > 500.0))
    casts, first = np.unique(data.casts[rows], return_index=True)
    if len(rows) < fewest or len(casts) < 3:
        return
    deepest = np.full(int(casts.max()) + 1, -np.inf)
    np.maximum.at(deepest, data.casts[rows], pressure[rows])
    part = deepest[casts] / bottom[rows[first]]
    for unit, factor in (("bar", 10.0), ("MPa", 100.0), ("kPa", 0.1), ("Pa", 1e-4)):
        if (
            np.median(part * factor) > 0.9
            and (part * factor <= 1.06).mean() >= share
            and (part > 2).all() | (part < 0.2).all()
        ):
            own = f"dbar: the casts end at {float(np.median(part)):.2g} of the depth of the sea floor"
            yield _Whole(pressure, "pressure", f"as the casts would have in {unit}", own)
            return


def _marks(whole: _Whole, other: _Whole | None, outcome: str) -> Iterator[Mark]:
    """Yield the doubt of a whole column, and the faults of values that are none in the other unit either.

    Two columns that are exchanged are told of together, at the first of them.
    """
    values, name = whole.values, whole.variable
    rows = np.flatnonzero(~np.isnan(values))
    if other is not None and other.exchanged == name:
        if MEASURED.index(name) < MEASURED.index(other.variable):
            both = np.flatnonzero(~np.isnan(values) | ~np.isnan(other.values))
            words = f"seem to be exchanged: nine tenths of {label(name)} lie from {{value}}"
            value = f"{_range(values)}, and of {label(other.variable)} from {_range(other.values)}"
            yield Mark(
                _NAME, Severity.DOUBT, name, both, [value], words, f"{label(name)} {whole.own}", together=True,
                also=(other.variable,), outcome=outcome.replace("column is", "columns are"),
            )  # fmt: skip
    else:
        words = f"has {len(rows)} values, nine tenths of them from {{value}}, {whole.given}"
        yield Mark(
            _NAME,
            Severity.DOUBT,
            name,
            rows,
            [_range(values)],
            words,
            whole.own,
            together=True,
            outcome=outcome,
        )
    if whole.possible is not None:
        least, most = whole.possible
        span = most - least
        odd = np.flatnonzero((values < least - span) | (values > most + span))
        limit = f"{least:.4g} to {most:.4g} in a column like that"
        if len(odd):
            yield Mark(
                _NAME,
                Severity.FAULT,
                name,
                odd,
                values[odd].tolist(),
                "is {value}, which is none of these either",
                limit,
            )


def _range(values: FloatArray) -> str:
    """Return what the middle nine tenths of values, (n,), span, in words."""
    low, high = np.nanquantile(values, [0.05, 0.95])
    return f"{low:.4g} to {high:.4g}"


_LOOKS = (_exchanged, _conductivity, _others, _oxygen, _pressure)


def _plausible(name: str) -> tuple[float, float]:
    return REGISTRY[name].plausible or (-np.inf, np.inf)


def _within(values: FloatArray, limits: tuple[float, float]) -> float:
    """Return the share of values, (n,), that lie within limits."""
    with np.errstate(invalid="ignore"):
        return float(np.mean((values >= limits[0]) & (values <= limits[1])))


def _spread(values: FloatArray) -> float:
    """Return what the middle nine tenths of values, (n,), span; infinite where one is missing."""
    low, high = np.quantile(values, [0.05, 0.95])
    return float(high - low) if np.isfinite(high - low) else float("inf")
