"""What nutrients and oxygen of deep water have to do with each other, and columns that a power of ten puts right."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from pipeline.checking.figures import label, named
from pipeline.checking.hydrography import hydrography
from pipeline.checking.neighbours import plausible
from pipeline.checking.saturation import solubility

if TYPE_CHECKING:
    from collections.abc import Collection, Iterator, Mapping

    from numpy.typing import NDArray

    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]

DEEP = 1000.0  # dbar
# How much too large a column may be, and what that is called.
_FACTORS = {
    10.0: ("ten times", ""), 0.1: ("a tenth of", ""), 100.0: ("a hundred times", ""), 0.01: ("a hundredth of", ""),
    1e3: ("a thousand times", "nmol/kg"), 1e-3: ("a thousandth of", "mmol/kg or mmol/l"),
    1e-6: ("a millionth of", "mol/kg or mol/l"),
}  # fmt: skip
_MICROGRAMS = "micrograms per litre"
# g/mol, of N, P and Si (from memory), and litres of sea water in a kg: enough for a magnitude.
MOLAR_MASS = {"nitrate": 14.007, "phosphate": 30.974, "silicate": 28.085}
_LITRES_PER_KG = 1.0 / 1.0256
# How well the middle of what the others leave room for is known, as a factor (our choice, no source): where two
# suspicions are equally near to it, both are told.
_KNOWN_WITHIN = {"nitrate": 1.1, "phosphate": 1.1, "silicate": 3.0}
_NITRATES = ("nitrate", "nitrate_plus_nitrite")
# What deep water of all oceans and of the Mediterranean has, umol/kg (common practice, no source).
_OWN: Mapping[str, tuple[float, float]] = {
    "nitrate": (3.0, 48.0),
    "phosphate": (0.12, 3.8),
    "silicate": (3.0, 260.0),
}
# Where a quantity lies for given others below DEEP: for each value of the other one, the least and the most (umol/kg;
# from memory of the oceans' extremes: N loss, the Mediterranean, the Nordic and the Weddell Sea, the Bering Sea,
# Baffin Bay; common practice, no source). Far apart, but by less than a factor of ten.
_GIVEN: Mapping[tuple[str, str], tuple[tuple[float, float, float], ...]] = {
    ("nitrate", "phosphate"): ((0.0, 0.0, 3.0), (0.4, 1.4, 13.4), (1.0, 5.0, 29.0), (4.0, 23.0, 107.0)),
    ("nitrate", "oxygen used"): ((-50.0, 0.0, 25.0), (0.0, 0.0, 30.0), (100.0, 2.0, 39.4), (350.0, 22.0, 63.0)),
    ("phosphate", "oxygen used"): ((-50.0, 0.0, 1.7), (0.0, 0.0, 2.0), (100.0, 0.15, 2.6), (350.0, 1.5, 4.1)),
    ("silicate", "nitrate"): (
        (0.0, 1.0, 10.0), (5.0, 3.0, 16.0), (9.0, 4.0, 20.0), (14.0, 4.0, 40.0), (17.0, 6.0, 90.0), (20.0, 7.0, 130.0),
        (24.0, 9.0, 150.0), (28.0, 14.0, 170.0), (32.0, 25.0, 200.0), (36.0, 35.0, 220.0), (48.0, 45.0, 260.0),
    ),
    ("silicate", "oxygen used"): (
        (-50.0, 1.0, 20.0), (30.0, 3.0, 30.0), (50.0, 4.0, 75.0), (80.0, 5.0, 110.0), (100.0, 6.0, 150.0),
        (150.0, 10.0, 200.0), (200.0, 16.0, 230.0), (350.0, 25.0, 260.0),
    ),
}  # fmt: skip
# Part of the values that may lie inside all the same: of the silicate of young water ten times is not yet impossible.
_SOME = 0.5
_N_PER_P = 14.5  # of deep water, to look silicate up by phosphate


class Misplaced(NamedTuple):
    """A column that is too large or too small by the factor of another unit, or a power of ten."""

    name: str
    words: str  # what it is of what it should be, by what
    factor: float
    fits: tuple[float, float]  # what it would then be in the deep, the middle nine tenths
    deep: BoolArray  # (n_row,)


def misplaced(data: Rows, wrong: Collection[str], share: float, fewest: int) -> Iterator[Misplaced]:
    """Yield the nutrients that another unit or a power of ten brings to where the other deep values say they are.

    Most values have to lie outside what one or more of the others leave room for, and nearly all inside what
    every one of them does when multiplied: where one of the others is wrong, or the sea is unusual,
    nothing is said.

    Parameters
    ----------
    data
        Samples.
    wrong
        Columns that are known to be something else: they say nothing.
    share
        The part that is nearly all.
    fewest
        Fewest deep samples.

    """
    if "pressure" in wrong:
        return
    nitrate = next((name for name in _NITRATES if name in data.names and name not in wrong), "nitrate")
    columns = {"nitrate": nitrate, "phosphate": "phosphate", "silicate": "silicate"}
    with np.errstate(invalid="ignore"):
        deep = hydrography(data).pressure >= DEEP
    rows = np.flatnonzero(deep)
    known = {
        short: data.usable(name)[rows]
        for short, name in columns.items()
        if name in data.names and name not in wrong
    }
    if len(known) < 2 or len(rows) < fewest:
        return
    used, oxygen = _oxygen_used(data, wrong)
    known["oxygen used"] = used[rows]
    names = {**columns, "oxygen used": oxygen}
    for short, name in columns.items():
        values = known.get(short)
        if values is None:
            continue
        judges = [
            judge for judge in _judges(short, known) if (~np.isnan(values * known[judge])).sum() >= fewest
        ]
        if not any(judge != "oxygen used" for judge in judges):
            continue
        if np.nanmean(_inside(short, values, judges, known)) > _SOME:
            continue
        micrograms = MOLAR_MASS[short] / _LITRES_PER_KG
        units = {**_FACTORS, micrograms: (f"{micrograms:.0f} times", _MICROGRAMS)}
        fits = sorted(
            (_from_the_middle(short, values / factor, judges, known), factor)
            for factor in units
            if np.nanmean(_inside(short, values / factor, judges, known)) >= share
        )
        if fits:
            near, factor = fits[0]
            by = named([label(names[judge]) for judge in judges])
            words = f"{units[factor][0]} what {by} of the same samples lead to expect below {DEEP:g} dbar"
            words += _as_in(units[factor][1])
            for far, another in fits[1:]:
                if far - near <= np.log(_KNOWN_WITHIN[short]):
                    words += f", or {units[another][0]} that{_as_in(units[another][1])}"
            low, high = np.nanquantile(values / factor, [0.05, 0.95])
            yield Misplaced(name, words, factor, (float(low), float(high)), deep)


def _as_in(unit: str) -> str:
    return f", as in {unit}" if unit else ""


def _judges(short: str, known: Mapping[str, FloatArray]) -> list[str]:
    """Return what may say where a nutrient lies, of what is known."""
    return [
        other
        for other in known
        if other != short and ((short, other) in _GIVEN or _turned(short, other) is not None)
    ]


def _turned(short: str, other: str) -> tuple[str, str] | None:
    """Return the relation that holds a nutrient as the given one, or by nitrate in place of phosphate."""
    for pair in ((other, short), ("silicate", "nitrate")):
        if pair in _GIVEN and {short, other} <= {*pair, "phosphate"} and short != other:
            return pair
    return None


def _inside(short: str, values: FloatArray, judges: list[str], known: Mapping[str, FloatArray]) -> FloatArray:
    """Return 1 where a value lies in its own range and where all others let it lie, else 0; NaN where unknown, (n,)."""
    low, high = _OWN[short]
    with np.errstate(invalid="ignore", over="ignore"):
        fits = (values >= low) & (values <= high)
        there = np.zeros(len(values), dtype=bool)
        for judge in judges:
            both = ~np.isnan(values * known[judge])
            there |= both
            fits &= ~both | _allowed(short, judge, values, known[judge])
    return np.where(there, fits, np.nan)


def _allowed(short: str, other: str, values: FloatArray, given: FloatArray) -> BoolArray:
    """Return where two quantities of a sample go together, (n,)."""
    if (short, other) not in _GIVEN:  # turned about, or silicate with phosphate
        pair = _turned(short, other)
        if pair == (other, short):
            return _allowed(other, short, given, values)
        if short == "silicate":
            return _allowed("silicate", "nitrate", values, _N_PER_P * given)
        return _allowed("silicate", "nitrate", given, _N_PER_P * values)
    at, least, most = np.array(_GIVEN[short, other]).T
    return np.asarray((values >= np.interp(given, at, least)) & (values <= np.interp(given, at, most)))


def _from_the_middle(
    short: str, values: FloatArray, judges: list[str], known: Mapping[str, FloatArray]
) -> float:
    """Return how far values are, as the logarithm of a factor, from the middle of what another lets them be."""
    (judge,) = judges[:1]
    given = known[judge]
    if (short, judge) in _GIVEN:
        at, least, most = np.array(_GIVEN[short, judge]).T
        middle = np.sqrt(np.maximum(np.interp(given, at, least), 0.1) * np.interp(given, at, most))
    elif short == "phosphate" and judge == "nitrate":
        middle = given / _N_PER_P
    else:
        return 0.0
    with np.errstate(invalid="ignore", divide="ignore"):
        return abs(float(np.nanmedian(np.log(values / middle))))


def _oxygen_used(data: Rows, wrong: Collection[str]) -> tuple[FloatArray, str]:
    """Return solubility less oxygen, umol/kg, (n_row,), and the oxygen that was taken."""
    unknown = not {"temperature", "bottle_salinity", "ctd_salinity"}.isdisjoint(wrong)
    for name in ("bottle_oxygen", "ctd_oxygen"):
        if name in data.names and name not in wrong and not unknown:
            return solubility(data) - plausible(data, name), name
    return np.full(len(data), np.nan), "bottle_oxygen"
