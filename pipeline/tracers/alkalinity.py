"""How the acids of sea water are dissociated at a pH, what alkalinity that makes, and which pH makes an alkalinity.

Arrays in, arrays out. Amounts in umol/kg, hydrogen ion on the total scale, as the natural logarithm of mol/kg.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Callable

    from pipeline.tables import FloatArray
    from pipeline.tracers.equilibria import Equilibria

    # From ln H to a residual and its derivative, each (n,). The residual falls as ln H rises.
    Residual = Callable[[FloatArray], tuple[FloatArray, FloatArray]]

LN10 = float(np.log(10.0))
# pH between which a state is looked for. No sea lies outside: the most acid water of an oxygen minimum has about
# 7.3, the most alkaline bloom about 8.8 (common practice, no source).
LOWEST_PH, HIGHEST_PH = 6.5, 9.0
_MOST_STEPS = 60
_CONVERGED = 1e-12  # in ln H


@dataclass(frozen=True, slots=True)
class Dissociation:
    """Acids at a pH, all (n,)."""

    aqueous_co2: FloatArray  # parts of DIC
    bicarbonate: FloatArray
    carbonate: FloatArray
    charge: FloatArray  # of DIC, mean, each: bicarbonate 1, carbonate 2
    spread: FloatArray  # of that charge, variance: what charge loses per ln H
    others: FloatArray  # alkalinity of all other acids and bases, umol/kg
    others_slope: FloatArray  # its derivative by ln H, negative

    def alkalinity(self, dic: FloatArray) -> FloatArray:
        """Return total alkalinity with that much DIC."""
        return dic * self.charge + self.others

    def slope(self, dic: FloatArray) -> FloatArray:
        """Return its derivative by ln H, negative."""
        return self.others_slope - dic * self.spread


def dissociation(ln_h: FloatArray, k: Equilibria) -> Dissociation:
    """Return how acids are dissociated at ``ln_h``.

    Alkalinity is that of Dickson 1981: bases of acids weaker than pK 4.5, less the protons of stronger ones. The
    derivative of a mean charge by ln H is the negative of its variance, for every acid.
    """
    h = np.exp(ln_h)
    both = k.k1 * k.k2
    whole = h * h + k.k1 * h + both
    co2, bicarbonate, carbonate = h * h / whole, k.k1 * h / whole, both / whole
    charge = bicarbonate + 2.0 * carbonate

    free = h * k.free_per_total
    hydroxide = 1e6 * k.water_k / h
    others, slope = hydroxide - 1e6 * free, -hydroxide - 1e6 * free
    for total, constant in (
        (k.borate, k.borate_k),
        (k.silicate, k.silicic_k),
        (k.ammonia, k.ammonium_k),
        (k.sulfide, k.sulfide_k),
    ):
        base = total * constant / (constant + h)
        others = others + base
        slope = slope - base * h / (constant + h)
    for total, constant in ((k.sulfate, k.bisulfate_k), (k.fluoride, k.fluoride_k)):
        acid = total * free / (constant + free)
        others = others - acid
        slope = slope - acid * constant / (constant + free)
    phosphate_charge, phosphate_spread = _phosphoric(h, k)
    return Dissociation(
        aqueous_co2=co2,
        bicarbonate=bicarbonate,
        carbonate=carbonate,
        charge=charge,
        spread=bicarbonate + 4.0 * carbonate - charge * charge,
        others=others + k.phosphate * (phosphate_charge - 1.0),  # H2PO4 is the zero level
        others_slope=slope - k.phosphate * phosphate_spread,
    )


def _phosphoric(h: FloatArray, k: Equilibria) -> tuple[FloatArray, FloatArray]:
    """Return mean and variance of the charge of phosphate, (n,)."""
    second, third = k.phosphoric_k1 * k.phosphoric_k2, k.phosphoric_k1 * k.phosphoric_k2 * k.phosphoric_k3
    forms = (h**3, k.phosphoric_k1 * h * h, second * h, third)
    whole = forms[0] + forms[1] + forms[2] + forms[3]
    mean = (forms[1] + 2.0 * forms[2] + 3.0 * forms[3]) / whole
    square = (forms[1] + 4.0 * forms[2] + 9.0 * forms[3]) / whole
    return mean, square - mean * mean


def ln_h_of(dic: FloatArray, alkalinity: FloatArray, k: Equilibria) -> FloatArray:
    """Return ln H of water with that DIC and alkalinity, (n,), NaN where none between the limits of pH makes it."""

    def residual(ln_h: FloatArray) -> tuple[FloatArray, FloatArray]:
        acids = dissociation(ln_h, k)
        return acids.alkalinity(dic) - alkalinity, acids.slope(dic)

    return root(residual, len(dic))


def root(residual: Residual, n: int) -> FloatArray:
    """Return where a residual is zero, (n,) of ln H; NaN where it is not between the limits of pH.

    Newton's method inside a bracket that closes with every step, so that it ends for any input. Every element
    goes its own way: what stands beside it in the array changes nothing.
    """
    low, high = np.full(n, -LN10 * HIGHEST_PH), np.full(n, -LN10 * LOWEST_PH)
    with np.errstate(all="ignore"):
        inside = (residual(low)[0] > 0) & (residual(high)[0] < 0)
        found = np.full(n, -LN10 * 8.0)
        moving = inside.copy()
        for _ in range(_MOST_STEPS):
            if not moving.any():
                break
            value, slope = residual(found)
            low = np.where(value > 0, found, low)
            high = np.where(value > 0, high, found)
            wanted = found - value / slope
            wanted = np.where((wanted >= low) & (wanted <= high), wanted, 0.5 * (low + high))
            wanted = np.where(moving, wanted, found)
            moving &= np.abs(wanted - found) > _CONVERGED
            found = wanted
    return np.where(inside & ~moving, found, np.nan)
