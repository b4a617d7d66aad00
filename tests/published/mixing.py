"""Mixing: a worked case with illustrative sources, the published practice of a weighted sum, and plain NNLS."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.problem import MixingProblem, weighted_system
from pipeline.mixing.solver import solve

from .check import Check, Status

if TYPE_CHECKING:
    from pipeline.mixing.solver import MixingSolution
    from pipeline.tables import FloatArray

# Properties: potential temperature, salinity, oxygen, phosphate, nitrate, silicate. The sources are made up.
SOURCES = np.array(
    [
        [2.5, 34.92, 255.0, 1.35, 20.5, 25.0],
        [-0.5, 34.66, 225.0, 2.25, 32.5, 125.0],
        [4.0, 34.25, 250.0, 2.05, 29.0, 20.0],
    ]
)
RESPIRATION = np.array([[0.0, 0.0, -170.0, 1.0, 16.0, 0.0]])
NO_PROCESS = np.zeros((0, 6))
# Rows are divided by the spread of the sources and multiplied by these, as in Tomczak and Large 1989.
SCALED_WEIGHTS = np.array([10.0, 10.0, 4.0, 3.0, 3.0, 2.0])
MASS_WEIGHT = 50.0

SAMPLES = {
    "0.5 0.3 0.2": (1.9, 34.708, 245.0, 1.76, 25.8, 54.0),
    "and 0.15 respired": (1.9, 34.708, 219.5, 1.91, 28.2, 54.0),
    "with noise": (1.92, 34.711, 246.5, 1.74, 26.1, 53.0),
    "outside": (3.1, 34.972, 261.0, 1.17, 18.1, 5.0),
}
WORKED = "illustrative sources, not published; scipy 1.17.1, optimize.nnls"
OMP = (
    "property of the weighted problem of Tomczak and Large 1989 with centred rows, derived and computed here"
)
SCIPY = "example in the documentation of scipy.optimize.nnls"


def _problem(mass_weight: float | None, *, extended: bool, ddof: int = 1) -> MixingProblem:
    weights = SCALED_WEIGHTS / SOURCES.std(axis=0, ddof=ddof)
    return MixingProblem(
        sources=SOURCES,
        uncertainty=1.0 / weights,
        weight=weights,
        processes=RESPIRATION if extended else NO_PROCESS,
        signs=("non_negative",) if extended else (),
        mass_weight=mass_weight,
    )


def _solution(sample: str, mass_weight: float | None, *, extended: bool, ddof: int = 1) -> MixingSolution:
    problem = _problem(mass_weight, extended=extended, ddof=ddof)
    return solve(problem, np.array([SAMPLES[sample]]))


def classical(sample: str, source: float, mass_weight: float) -> float:
    return float(_solution(sample, mass_weight, extended=False).shares[0, int(source)])


def classical_exact_sum(sample: str, source: float) -> float:
    return float(_solution(sample, None, extended=False).shares[0, int(source)])


def extended(sample: str, source: float, mass_weight: float) -> float:
    return float(_solution(sample, mass_weight, extended=True).shares[0, int(source)])


def respired(sample: str, mass_weight: float) -> float:
    return float(_solution(sample, mass_weight, extended=True).processes[0, 0])


def misfit(sample: str, mass_weight: float) -> float:
    """Return the norm of the weighted residual, the row of the sum included."""
    solution = _solution(sample, mass_weight, extended=False)
    rows: FloatArray = solution.residuals[0] * SCALED_WEIGHTS / SOURCES.std(axis=0, ddof=1)
    return float(np.hypot(np.linalg.norm(rows), mass_weight * (solution.shares[0].sum() - 1.0)))


def sum_less_one(sample: str, mass_weight: float) -> float:
    return float(_solution(sample, mass_weight, extended=False).shares[0].sum() - 1.0)


def exact_sum_less_one(sample: str) -> float:
    return float(_solution(sample, None, extended=False).shares[0].sum() - 1.0)


def cost_of_ddof(sample: str) -> float:
    """Return how far the shares move when the spread of the sources is taken with ddof 0 and not 1."""
    one, other = (_solution(sample, MASS_WEIGHT, extended=False, ddof=d).shares[0] for d in (0, 1))
    return float(np.abs(one - other).max())


def condition_number(mass_weight: float, unknowns: float) -> float:
    """Return that of the whole system, the row of the sum included; samples are judged without that row."""
    problem = _problem(mass_weight, extended=unknowns > len(SOURCES))
    return float(np.linalg.cond(weighted_system(problem, np.arange(len(SCALED_WEIGHTS))).A))


def nnls(right: str, unknown: float) -> float:
    """Return an unknown of the plain non-negative problem: one source of zeros, and two processes."""
    return float(_nnls(right).processes[0, int(unknown)])


def nnls_norm(right: str) -> float:
    return float(np.linalg.norm(_nnls(right).residuals[0]))


def _nnls(right: str) -> MixingSolution:
    problem = MixingProblem(
        sources=np.zeros((1, 3)),
        uncertainty=np.ones(3),
        weight=np.ones(3),
        processes=np.array([[1.0, 1.0, 0.0], [0.0, 0.0, 1.0]]),
        signs=("non_negative", "non_negative"),
    )
    return solve(problem, np.array([[float(number) for number in right.split()]]))


_SHARES = (
    # sample, by, mass weight, shares of A, B, C
    ("0.5 0.3 0.2", classical, MASS_WEIGHT, ("0.50000000", "0.30000000", "0.20000000")),
    ("and 0.15 respired", extended, MASS_WEIGHT, ("0.50000000", "0.30000000", "0.20000000")),
    ("and 0.15 respired", classical, MASS_WEIGHT, ("0.34177545", "0.46639652", "0.19182802")),
    ("with noise", classical, MASS_WEIGHT, ("0.51267211", "0.28739758", "0.19993031")),
    ("outside", classical, MASS_WEIGHT, ("1.01245459", "0.00000000", "0.00000000")),
    ("outside", classical, 10.0, ("1.14621291", "0.00000000", "0.01529143")),
    ("outside", classical, 1000.0, ("1.00003264", "0.00000000", "0.00000000")),
)
_INSIDE = ("0.5 0.3 0.2", "and 0.15 respired", "with noise")

ROWS = (
    *(
        Check(f"share of source {letter}", {"sample": sample, "source": source, "mass_weight": weight}, by,
              printed, WORKED, Status.COMPUTED)
        for sample, by, weight, values in _SHARES
        for source, (letter, printed) in enumerate(zip("ABC", values, strict=True))
    ),
    Check("phosphate respired, umol/kg", {"sample": "and 0.15 respired", "mass_weight": MASS_WEIGHT}, respired,
          "0.15000000", WORKED, Status.COMPUTED),
    *(
        Check("norm of the weighted residual", {"sample": sample, "mass_weight": MASS_WEIGHT}, misfit, printed,
              WORKED, Status.COMPUTED)
        for sample, printed in (("0.5 0.3 0.2", "0.00000000"), ("and 0.15 respired", "5.72348327"),
                                ("with noise", "0.36780359"), ("outside", "3.76471187"))
    ),
    Check("condition number, classical", {"mass_weight": MASS_WEIGHT, "unknowns": 3}, condition_number, "6.580",
          WORKED, Status.COMPUTED),
    Check("condition number, with respiration", {"mass_weight": MASS_WEIGHT, "unknowns": 4}, condition_number,
          "7.474", WORKED, Status.COMPUTED),
    # A sum that misses one tells of an active bound and of nothing else, whatever its weight.
    *(
        Check("sum of the shares less one, no bound active", {"sample": sample, "mass_weight": weight},
              sum_less_one, "0", OMP, Status.EXACT, within=1e-12)
        for sample in _INSIDE
        for weight in (1.0, 50.0, 1000.0)
    ),
    Check("sum of the shares less one, a bound active", {"sample": "outside", "mass_weight": 10.0}, sum_less_one,
          "0.161504", WORKED, Status.COMPUTED),
    Check("sum of the shares less one, a bound active", {"sample": "outside", "mass_weight": 1000.0},
          sum_less_one, "0.000033", WORKED, Status.COMPUTED),
    *(
        Check("sum of the shares less one, held exactly", {"sample": sample}, exact_sum_less_one, "0",
              "constraint of the default problem", Status.EXACT, within=1e-15)
        for sample in SAMPLES
    ),
    *(
        Check(f"share of source {letter}, sum held exactly", {"sample": "with noise", "source": source},
              classical_exact_sum, printed, f"{WORKED}; same as with a weighted sum, no bound being active",
              Status.COMPUTED)
        for source, (letter, printed) in enumerate(
            zip("ABC", ("0.51267211", "0.28739758", "0.19993031"), strict=True))
    ),
    *(
        Check("what ddof of the spread changes in the shares, no bound active", {"sample": sample}, cost_of_ddof,
              "0", OMP, Status.EXACT, within=1e-12)
        for sample in _INSIDE
    ),
    *(
        Check("non-negative least squares", {"right": right, "unknown": unknown}, nnls, printed, SCIPY,
              Status.COMPUTED, within=1e-12)
        for right, values in (("2 1 1", ("1.5", "1")), ("-1 -1 -1", ("0", "0")))
        for unknown, printed in enumerate(values)
    ),
    Check("norm of its residual", {"right": "2 1 1"}, nnls_norm, "0.70710678", SCIPY, Status.COMPUTED),
    Check("norm of its residual", {"right": "-1 -1 -1"}, nnls_norm, "1.73205081", SCIPY, Status.COMPUTED),
)  # fmt: skip
