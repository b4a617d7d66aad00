"""DIC and alkalinity from any two measured quantities of the carbonate system, and how uncertain they are.

Arrays in, arrays out: one element a sample. Amounts in umol/kg, fugacities in uatm.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.tracers.alkalinity import LN10, dissociation, ln_h_of, root

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from numpy.typing import NDArray

    from pipeline.tables import FloatArray
    from pipeline.tracers.alkalinity import Dissociation
    from pipeline.tracers.equilibria import Equilibria

    IntArray = NDArray[np.int64]

QUANTITIES = ("dic", "alkalinity", "ph", "fco2")
# In order of preference. DIC and alkalinity first, for they keep in a bottle and mix in proportion; then pH, then
# the gas, each with DIC before alkalinity; pH with the gas last, for both say nearly the same.
PAIRS = ((0, 1), (0, 2), (1, 2), (0, 3), (1, 3), (2, 3))
NO_PAIR = -1


@dataclass(frozen=True, slots=True)
class Measured:
    """What was measured, and its standard uncertainty; all (n,), NaN where it was not."""

    dic: FloatArray
    alkalinity: FloatArray
    ph: FloatArray  # total scale, at its own temperature and no pressure
    fco2: FloatArray  # at its own temperature and no pressure
    uncertainty: Mapping[str, FloatArray]  # of each of QUANTITIES

    def take(self, rows: IntArray) -> Measured:
        """Return those of some rows."""
        return Measured(
            self.dic[rows],
            self.alkalinity[rows],
            self.ph[rows],
            self.fco2[rows],
            {name: values[rows] for name, values in self.uncertainty.items()},
        )


@dataclass(frozen=True, slots=True)
class Conditions:
    """Constants in situ, where pH was measured, and where the gas was measured; of n samples each."""

    in_situ: Equilibria
    of_ph: Equilibria
    of_gas: Equilibria

    def take(self, rows: IntArray) -> Conditions:
        """Return those of some rows."""
        return self._each(lambda k: k.take(rows))

    def scaled(self, factors: Mapping[str, float]) -> Conditions:
        """Return the same with some constants multiplied everywhere: one fit gives all three."""
        return self._each(lambda k: k.scaled(factors))

    def _each(self, change: Callable[[Equilibria], Equilibria]) -> Conditions:
        """Return the same with all three changed; conditions that are one stay one."""
        in_situ = change(self.in_situ)
        others = (in_situ if k is self.in_situ else change(k) for k in (self.of_ph, self.of_gas))
        return Conditions(in_situ, *others)


@dataclass(frozen=True, slots=True)
class State:
    """Water of known DIC and alkalinity under some conditions, (n,); NaN where there is no such water."""

    dic: FloatArray
    ln_h: FloatArray
    acids: Dissociation
    k: Equilibria

    @property
    def ph(self) -> FloatArray:
        """On the total scale."""
        return -self.ln_h / LN10

    @property
    def fco2(self) -> FloatArray:
        """Fugacity of carbon dioxide, uatm."""
        return self.dic * self.acids.aqueous_co2 / self.k.k0

    @property
    def ln_h_gradient(self) -> FloatArray:
        """Derivatives of ln H by DIC and alkalinity, (2, n)."""
        slope = self.acids.slope(self.dic)
        return np.stack((-self.acids.charge / slope, 1.0 / slope))

    @property
    def ln_fco2_gradient(self) -> FloatArray:
        """Derivatives of the logarithm of fCO2 by DIC and alkalinity, (2, n)."""
        gradient = self.acids.charge * self.ln_h_gradient
        gradient[0] += 1.0 / self.dic
        return gradient


def state(dic: FloatArray, alkalinity: FloatArray, k: Equilibria) -> State:
    """Return the state of water of that DIC and alkalinity."""
    ln_h = ln_h_of(dic, alkalinity, k)
    return State(dic, ln_h, dissociation(ln_h, k), k)


def pairs_of(dic: FloatArray, alkalinity: FloatArray, ph: FloatArray, fco2: FloatArray) -> IntArray:
    """Return which of ``PAIRS`` each sample is solved from, (n,): the first that was measured, else ``NO_PAIR``."""
    there = [~np.isnan(values) for values in (dic, alkalinity, ph, fco2)]
    pair = np.full(len(there[0]), NO_PAIR, dtype=np.int64)
    for number in reversed(range(len(PAIRS))):
        first, second = PAIRS[number]
        pair[there[first] & there[second]] = number
    return pair


def solved(measured: Measured, pair: IntArray, conditions: Conditions) -> tuple[FloatArray, FloatArray]:
    """Return DIC and alkalinity of every sample from its pair, (n,) each; NaN where no water fits it."""
    dic, alkalinity = np.full(len(pair), np.nan), np.full(len(pair), np.nan)
    for number, members in enumerate(PAIRS):
        rows = np.flatnonzero(pair == number)
        if len(rows):
            dic[rows], alkalinity[rows] = _solve(members, measured.take(rows), conditions.take(rows))
    with np.errstate(invalid="ignore"):
        possible = (dic > 0) & (alkalinity > 0)
    return np.where(possible, dic, np.nan), np.where(possible, alkalinity, np.nan)


def _solve(pair: tuple[int, int], m: Measured, at: Conditions) -> tuple[FloatArray, FloatArray]:
    if pair == (0, 1):
        return m.dic, m.alkalinity
    if pair in {(0, 2), (1, 2)}:
        acids = dissociation(-LN10 * m.ph, at.of_ph)
        dic = m.dic if pair == (0, 2) else (m.alkalinity - acids.others) / acids.charge
        return dic, acids.alkalinity(dic)
    ln_h = _ln_h_of_gas(pair, m, at)
    acids = dissociation(ln_h, at.of_gas)
    dic = at.of_gas.k0 * m.fco2 / acids.aqueous_co2
    return dic, acids.alkalinity(dic)


def _ln_h_of_gas(pair: tuple[int, int], m: Measured, at: Conditions) -> FloatArray:
    """Return ln H where the gas was measured, (n,), from its fugacity and one other quantity.

    With pH, which may have been measured at another temperature, ln H is sought at which both give one alkalinity.
    """
    co2 = at.of_gas.k0 * m.fco2
    of_ph = dissociation(-LN10 * m.ph, at.of_ph)

    def residual(ln_h: FloatArray) -> tuple[FloatArray, FloatArray]:
        acids = dissociation(ln_h, at.of_gas)
        dic = co2 / acids.aqueous_co2
        dic_slope = -dic * acids.charge
        if pair == (0, 3):
            return dic - m.dic, dic_slope
        total, total_slope = acids.alkalinity(dic), acids.slope(dic) + acids.charge * dic_slope
        if pair == (1, 3):
            return total - m.alkalinity, total_slope
        return total - of_ph.alkalinity(dic), total_slope - of_ph.charge * dic_slope

    return root(residual, len(m.fco2))


def covariance(measured: Measured, pair: IntArray, of_ph: State, of_gas: State) -> FloatArray:
    """Return the covariance of DIC and alkalinity of every sample, (3, n): variance, covariance, variance.

    First order: the derivatives of the two measured quantities by DIC and alkalinity, inverted.
    """
    n = len(pair)
    found = np.full((3, n), np.nan)
    one, none = np.ones(n), np.zeros(n)
    # Of each of QUANTITIES: derivatives (2, n), and standard uncertainty (n,); of the gas those of its logarithm.
    derivatives = (
        np.stack((one, none)),
        np.stack((none, one)),
        -of_ph.ln_h_gradient / LN10,
        of_gas.ln_fco2_gradient,
    )
    scales = (one, one, one, measured.fco2)
    for number, (first, second) in enumerate(PAIRS):
        rows = np.flatnonzero(pair == number)
        (a, b), (c, d) = derivatives[first][:, rows], derivatives[second][:, rows]
        var1, var2 = (
            (measured.uncertainty[QUANTITIES[i]][rows] / scales[i][rows]) ** 2 for i in (first, second)
        )
        determinant = (a * d - b * c) ** 2
        found[0, rows] = (d * d * var1 + b * b * var2) / determinant
        found[1, rows] = -(c * d * var1 + a * b * var2) / determinant
        found[2, rows] = (c * c * var1 + a * a * var2) / determinant
    return found


def propagated(gradient: FloatArray, spread: FloatArray) -> FloatArray:
    """Return the standard uncertainty, (n,), of what has a gradient (2, n) by DIC and alkalinity."""
    variance = (
        gradient[0] ** 2 * spread[0]
        + 2.0 * gradient[0] * gradient[1] * spread[1]
        + gradient[1] ** 2 * spread[2]
    )
    found: FloatArray = np.sqrt(np.maximum(variance, 0.0))
    return found
