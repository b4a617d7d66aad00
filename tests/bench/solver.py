"""The batched mixing solver against a loop over scipy.optimize.nnls: time and largest difference."""

from __future__ import annotations

import argparse
import time
from typing import TYPE_CHECKING

import numpy as np
from scipy.optimize import nnls

from pipeline.mixing.problem import MixingProblem
from pipeline.mixing.solver import solve
from pipeline.mixing.status import MixingStatus

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]

N_SOURCE, N_PROPERTY, MASS_WEIGHT = 5, 7, 20.0  # the sum is the eighth equation
SAMPLES_OF_A_CAST = 24
ROUNDS = 9  # each measures all; of each the best counts


def main(arguments: list[str]) -> None:
    """Measure and print."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench solver", description=__doc__)
    parser.add_argument("--samples", type=int, default=1_000_000, help="samples of the batch")
    parser.add_argument("--loop", type=int, default=20_000, help="samples of the nnls loop, drawn at random")
    options = parser.parse_args(arguments)
    random = np.random.default_rng(20261201)
    problem = _problem(random)
    samples = _samples(random, problem, options.samples)
    matrix, right = _system(problem, samples)
    drawn = random.choice(len(samples), min(options.loop, len(samples)), replace=False)

    shuffled = random.permutation(samples)
    rows = list(right[drawn])
    first = _seconds(lambda: solve(problem, samples[:10]))
    rounds = [
        (
            _seconds(lambda: solve(problem, samples)),
            _seconds(lambda: solve(problem, shuffled)),
            _seconds(lambda: [nnls(matrix, row) for row in rows]),
        )
        for _ in range(ROUNDS)
    ]
    batch, batch_shuffled, loop = (min(seconds) for seconds in zip(*rounds, strict=True))
    loop *= len(samples) / len(drawn)

    solution = solve(problem, samples)
    reference = np.array([nnls(matrix, row)[0] for row in rows])
    print(f"{len(samples)} samples x {matrix.shape[0]} equations x {matrix.shape[1]} unknowns, one thread")
    print(f"solved: {np.mean(solution.status == MixingStatus.SOLVED):.6f} of the samples")
    print(f"with an active bound: {np.mean((solution.shares == 0).any(axis=1)):.3f} of the samples")
    print(f"first solution, kernel compiled or loaded: {first:.2f} s")
    print(
        f"nnls loop: {loop:.3f} s, from {len(drawn)} samples drawn at random and scaled up; best of {ROUNDS}"
    )
    print(f"batch, samples in the order of casts: {batch:.3f} s; best of {ROUNDS}")
    print(f"batch, samples shuffled: {batch_shuffled:.3f} s; best of {ROUNDS}")
    print(
        "the batch is the whole solve(), with residuals, chi-square and optimality; the loop is the shares alone"
    )
    print(f"ratio when shuffled: {loop / batch_shuffled:.1f}")
    print(f"ratio: {loop / batch:.1f}")
    print(f"optimality over all samples, largest violation: {_violation(matrix, right, solution.shares):.2e}")
    print(f"difference: {np.abs(solution.shares[drawn] - reference).max():.2e}")


def _problem(random: np.random.Generator) -> MixingProblem:
    uncertainty = np.full(N_PROPERTY, 0.1)
    return MixingProblem(
        sources=random.normal(size=(N_SOURCE, N_PROPERTY)),
        uncertainty=uncertainty,
        weight=1 / uncertainty,
        processes=np.zeros((0, N_PROPERTY)),
        mass_weight=MASS_WEIGHT,
    )


def _samples(random: np.random.Generator, problem: MixingProblem, n_sample: int) -> FloatArray:
    """Return noisy mixtures, (n_sample, n_property): every cast runs from one mixture to another."""
    n_cast = -(-n_sample // SAMPLES_OF_A_CAST)
    ends = random.dirichlet(np.full(N_SOURCE, 0.4), (2, n_cast))
    depth = np.linspace(0, 1, SAMPLES_OF_A_CAST)[:, None]
    shares = (1 - depth) * ends[0][:, None] + depth * ends[1][:, None]
    values = (shares @ problem.sources).reshape(-1, N_PROPERTY)[:n_sample]
    return np.asarray(values + random.normal(size=values.shape) * problem.uncertainty)


def _system(problem: MixingProblem, samples: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the same problem as nnls takes it: (n_equation, n_unknown) and (n_sample, n_equation)."""
    mean = problem.sources.mean(axis=0)
    matrix = np.vstack([((problem.sources - mean) * problem.weight).T, np.full(N_SOURCE, MASS_WEIGHT)])
    right = np.column_stack([(samples - mean) * problem.weight, np.full(len(samples), MASS_WEIGHT)])
    return matrix, right


def _violation(matrix: FloatArray, right: FloatArray, shares: FloatArray) -> float:
    """Return by how much the worst sample misses the Karush-Kuhn-Tucker conditions, in shares."""
    gradient = ((shares @ matrix.T - right) @ matrix) / (matrix**2).sum(axis=0)
    return float(max(np.where(shares > 0, np.abs(gradient), -gradient).max(), -shares.min()))


def _seconds(action: Callable[[], object]) -> float:
    start = time.perf_counter()
    action()
    return time.perf_counter() - start
