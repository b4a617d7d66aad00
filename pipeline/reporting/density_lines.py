"""Kernel: lines of equal potential density over Absolute Salinity and Conservative Temperature."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import gsw
import numpy as np
from contourpy import contour_generator

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]

STEPS = (0.1, 0.2, 0.5, 1.0, 2.0, 5.0)  # kg m-3 between lines
MOST_LINES = 12
NODES = 41  # of the grid, each way


@dataclass(frozen=True, slots=True)
class DensityLine:
    """A line of equal density, (n_point,) both."""

    sigma: float  # kg m-3
    absolute_salinity: FloatArray  # g kg-1
    conservative_temperature: FloatArray  # degree_C


def density_lines(salinity: tuple[float, float], temperature: tuple[float, float]) -> list[DensityLine]:
    """Return lines of sigma0 at round values over a range of Absolute Salinity and Conservative Temperature.

    Source: TEOS-10, gsw.sigma0. Straight between the nodes of a grid.
    """
    sa, ct = np.linspace(*salinity, NODES), np.linspace(*temperature, NODES)
    sigma = gsw.sigma0(*np.meshgrid(sa, ct))
    low, high = float(sigma.min()), float(sigma.max())
    step = next((s for s in STEPS if (high - low) / s <= MOST_LINES), STEPS[-1])
    drawn = contour_generator(sa, ct, sigma)
    levels = np.arange(math.ceil(low / step), math.floor(high / step) + 1) * step
    return [
        DensityLine(round(float(level), 3), np.asarray(line)[:, 0], np.asarray(line)[:, 1])
        for level in levels
        for line in drawn.lines(level)
    ]
