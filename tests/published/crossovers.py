"""Crossovers: the weighted mean of offsets, and from which size on a correction is proposed."""

from __future__ import annotations

import numpy as np

from pipeline.crossovers.averaging import weighted_mean
from pipeline.crossovers.quantities import QUANTITIES, CorrectionKind

from .check import Check, Status

BECKER = "Becker et al. 2016, ESSD 8:559, eq. 2"
CROSSOVER_PAPERS = "form of the crossover papers, Tanhua et al. 2010, ESSD 2:35-49"
LAUVSET = "Lauvset et al. 2024, ESSD 16:2047, Table 3"

MADE_UP = {"offsets": "2 1 3", "uncertainties": "1 0.5 2"}


def mean_of_offsets(offsets: str, uncertainties: str) -> float:
    return weighted_mean(_numbers(offsets), _numbers(uncertainties)).value


def uncertainty_of_independent(offsets: str, uncertainties: str) -> float:
    return weighted_mean(_numbers(offsets), _numbers(uncertainties)).independent


def uncertainty_of_common(offsets: str, uncertainties: str) -> float:
    return weighted_mean(_numbers(offsets), _numbers(uncertainties)).common


def limit_of(quantity: str, kind: str) -> float:
    """Return the least correction proposed, NaN where it is of another kind than said."""
    (found,) = [q for q in QUANTITIES if q.name == quantity]
    return found.limit if found.kind is CorrectionKind(kind) else float("nan")


def _numbers(text: str) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    return np.array([float(part) for part in text.split()])


def _limit(quantity: str, kind: str, expected: str) -> Check:
    inputs = {"quantity": quantity, "kind": kind}
    return Check(
        "initial minimum adjustment", inputs, limit_of, expected, LAUVSET, Status.VERIFIED, within=1e-12
    )


ROWS = (
    Check("weighted mean", MADE_UP, mean_of_offsets, "1.28571429", f"made-up offsets in {BECKER}", Status.EXACT),
    Check("its uncertainty, independent", MADE_UP, uncertainty_of_independent, "0.43643578",
          "sqrt(1 / sum(1 / s^2)) of made-up offsets", Status.FROM_MEMORY),
    Check("its uncertainty, common", MADE_UP, uncertainty_of_common, "0.66666667",
          f"sum(1 / s) / sum(1 / s^2) of made-up offsets; {CROSSOVER_PAPERS}", Status.FROM_MEMORY),
    _limit("bottle_salinity", "additive", "0.005"),
    _limit("bottle_oxygen", "multiplicative", "0.01"),
    _limit("nitrate", "multiplicative", "0.02"),
    _limit("phosphate", "multiplicative", "0.02"),
    _limit("silicate", "multiplicative", "0.02"),
    _limit("dic", "additive", "4"),
    _limit("alkalinity", "additive", "4"),
    _limit("ph_total", "additive", "0.01"),
)  # fmt: skip
