"""The batched mixing solver against a loop over scipy.optimize.nnls: time and largest difference."""

from __future__ import annotations

import argparse
import time
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.optimize import nnls

from pipeline.mixing.problem import MixingProblem
from pipeline.mixing.solver import solve
from pipeline.mixing.status import MixingStatus

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from pipeline.mixing.solver import MixingSolution

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

N_SOURCE, N_PROPERTY, MASS_WEIGHT = 5, 7, 20.0  # the sum is the eighth equation
OTHERS = {3: 7, 8: 10, 12: 14}  # properties for other numbers of sources, enough to determine them
MISSING = 0.1
SAMPLES_OF_A_CAST = 24
ROUNDS, ROUNDS_OF_OTHERS = 9, 4  # each measures all; of each the best counts


@dataclass(frozen=True)
class Case:
    """One problem and its samples, for the batch and for the loop."""

    problem: MixingProblem
    samples: FloatArray  # (n_sample, n_property)
    solution: MixingSolution
    drawn: IntArray  # (n_drawn,) solved samples for the loop, drawn at random
    systems: list[tuple[FloatArray, FloatArray]]  # what nnls takes for each of them, made beforehand

    @property
    def n_solved(self) -> int:
        """Samples that the loop would have to do."""
        return int((self.solution.status == MixingStatus.SOLVED).sum())

    def batch(self) -> float:
        """Return the seconds of the whole batch."""
        return _seconds(lambda: solve(self.problem, self.samples))

    def loop(self) -> float:
        """Return the seconds of the loop over all solved samples, from those drawn."""
        seconds = _seconds(lambda: [nnls(matrix, right) for matrix, right in self.systems])
        return seconds * self.n_solved / len(self.drawn)

    def plain(self) -> float:
        """Return the seconds of a plain read and write of what the batch reads and writes."""
        solution = self.solution
        written = (solution.shares, solution.reduced_chi_square, solution.optimality)
        codes = (solution.status, solution.choice)

        def read_and_write() -> None:
            self.samples.min()
            for array in (*written, *codes):
                np.empty(array.shape, array.dtype).fill(1)

        return _seconds(read_and_write)

    def difference(self) -> float:
        """Return the largest difference of the drawn samples' shares from those of nnls."""
        reference = np.array([nnls(matrix, right)[0] for matrix, right in self.systems])
        return float(np.abs(self.solution.shares[self.drawn] - reference).max())


def main(arguments: list[str]) -> None:
    """Measure and print."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench solver", description=__doc__)
    parser.add_argument("--samples", type=int, default=1_000_000, help="samples of the batch")
    parser.add_argument("--loop", type=int, default=20_000, help="samples of the nnls loop, drawn at random")
    options = parser.parse_args(arguments)
    random = np.random.default_rng(20261201)
    problem = _problem(random, N_SOURCE, N_PROPERTY)
    samples = _samples(random, problem, options.samples)
    first = _seconds(lambda: solve(problem, samples[:10]))
    _ = solve(problem, samples[:10]).residuals, solve(problem, samples[:10]).hull  # compiled as well
    case = _case(random, problem, samples, options.loop)
    shuffled = random.permutation(samples)
    rounds = [
        (case.batch(), _seconds(lambda: solve(problem, shuffled)), case.loop(), case.plain())
        for _ in range(ROUNDS)
    ]
    batch, batch_shuffled, loop, plain = (min(seconds) for seconds in zip(*rounds, strict=True))

    shares = case.solution.shares
    print(f"{len(samples)} samples x {N_PROPERTY + 1} equations x {N_SOURCE} unknowns, one thread")
    print(f"solved: {case.n_solved / len(samples):.6f} of the samples")
    print(f"with an active bound: {np.mean((shares == 0).any(axis=1)):.3f} of the samples")
    print(f"first solution, kernel compiled or loaded: {first:.2f} s")
    print(
        f"nnls loop: {loop:.3f} s, from {len(case.drawn)} samples drawn at random and scaled up; "
        f"best of {ROUNDS}"
    )
    print(f"batch, samples in the order of casts: {batch:.3f} s; best of {ROUNDS}")
    print(f"batch, samples shuffled: {batch_shuffled:.3f} s; best of {ROUNDS}")
    print(f"plain read and write of the same arrays: {plain:.3f} s")
    print(
        "the batch is solve() with shares, chi-square and optimality; the loop is the shares alone. "
        f"Residuals, made from the shares when asked for: {_seconds(lambda: case.solution.residuals):.3f} s more; "
        f"distances from the mixing hull likewise: {_seconds(lambda: case.solution.hull):.3f} s more"
    )
    print(f"ratio when shuffled: {loop / batch_shuffled:.1f}")
    print(f"ratio: {loop / batch:.1f}")
    print(f"optimality over all samples, largest violation: {_violation(problem, samples, shares):.2e}")
    print(f"difference: {case.difference():.2e}")

    gaps = np.where(random.random(samples.shape) < MISSING, np.nan, samples)
    patterns = len(np.unique(np.isnan(gaps), axis=0))
    _print_other(
        f"with {MISSING:.0%} missing values",
        _case(random, problem, gaps, options.loop // 4),
        f" {patterns} patterns of missing values,",
    )
    for n_source, n_property in OTHERS.items():
        other = _problem(random, n_source, n_property)
        its_samples = _samples(random, other, options.samples)
        _print_other(f"with {n_source} sources", _case(random, other, its_samples, options.loop // 4), "")
    # The last of them, with so many patterns of missing values that few samples share one.
    for n_sample in (options.samples // 10, options.samples // 1000):
        gaps = np.where(
            random.random((n_sample, n_property)) < MISSING, np.nan, _samples(random, other, n_sample)
        )
        patterns = len(np.unique(np.isnan(gaps), axis=0))
        _print_other(
            f"with {n_source} sources and {MISSING:.0%} missing values",
            _case(random, other, gaps, options.loop // 4),
            f" {n_sample} samples, {patterns} patterns of missing values,",
        )


def _print_other(name: str, case: Case, remark: str) -> None:
    rounds = [(case.batch(), case.loop(), case.plain()) for _ in range(ROUNDS_OF_OTHERS)]
    batch, loop, plain = (min(seconds) for seconds in zip(*rounds, strict=True))
    n_source, n_property = case.problem.sources.shape
    print(
        f"{name}: {n_property + 1} equations,{remark} {n_source} unknowns, "
        f"{case.n_solved / len(case.samples):.6f} solved; batch {batch:.3f} s, "
        f"nnls loop {loop:.3f} s scaled up from {len(case.drawn)}, plain read and write {plain:.3f} s"
    )
    print(f"ratio {name}: {loop / batch:.1f}")
    print(f"difference {name}: {case.difference():.2e}")


def _problem(random: np.random.Generator, n_source: int, n_property: int) -> MixingProblem:
    uncertainty = np.full(n_property, 0.1)
    return MixingProblem(
        sources=random.normal(size=(n_source, n_property)),
        uncertainty=uncertainty,
        weight=1 / uncertainty,
        processes=np.zeros((0, n_property)),
        mass_weight=MASS_WEIGHT,
    )


def _samples(random: np.random.Generator, problem: MixingProblem, n_sample: int) -> FloatArray:
    """Return noisy mixtures, (n_sample, n_property): every cast runs from one mixture to another."""
    n_cast = -(-n_sample // SAMPLES_OF_A_CAST)
    n_source, n_property = problem.sources.shape
    ends = random.dirichlet(np.full(n_source, 0.4), (2, n_cast))
    depth = np.linspace(0, 1, SAMPLES_OF_A_CAST)[:, None]
    shares = (1 - depth) * ends[0][:, None] + depth * ends[1][:, None]
    values = (shares @ problem.sources).reshape(-1, n_property)[:n_sample]
    return np.asarray(values + random.normal(size=values.shape) * problem.uncertainty)


def _case(random: np.random.Generator, problem: MixingProblem, samples: FloatArray, n_drawn: int) -> Case:
    """Solve once, draw samples for the loop, and lay out what it takes."""
    solution = solve(problem, samples)
    solved = np.flatnonzero(solution.status == MixingStatus.SOLVED)
    drawn = random.choice(solved, min(n_drawn, len(solved)), replace=False)
    matrix, right = _system(problem, samples[drawn])
    there = ~np.isnan(right)
    if there.all():
        systems = [(matrix, row) for row in right]
    else:
        systems = [(matrix[own], row[own]) for row, own in zip(right, there, strict=True)]
    return Case(problem, samples, solution, drawn, systems)


def _system(problem: MixingProblem, samples: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the same problem as nnls takes it: (n_equation, n_unknown) and (n_sample, n_equation)."""
    mean = problem.sources.mean(axis=0)
    mass = np.full(len(problem.sources), MASS_WEIGHT)
    matrix = np.vstack([((problem.sources - mean) * problem.weight).T, mass])
    right = np.column_stack([(samples - mean) * problem.weight, np.full(len(samples), MASS_WEIGHT)])
    return matrix, right


def _violation(problem: MixingProblem, samples: FloatArray, shares: FloatArray) -> float:
    """Return by how much the worst sample misses the Karush-Kuhn-Tucker conditions, in shares."""
    matrix, right = _system(problem, samples)
    gradient = ((shares @ matrix.T - right) @ matrix) / (matrix**2).sum(axis=0)
    return float(max(np.where(shares > 0, np.abs(gradient), -gradient).max(), -shares.min()))


def _seconds(action: Callable[[], object]) -> float:
    start = time.perf_counter()
    action()
    return time.perf_counter() - start
