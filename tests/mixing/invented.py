"""Invented mixing problems, and slow obvious solvers of them."""

from __future__ import annotations

from itertools import combinations
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.problem import MixingProblem

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.problem import Sign

    FloatArray = NDArray[np.float64]


def problem(
    sources: FloatArray,
    uncertainty: FloatArray | float = 1.0,
    *,
    weight: FloatArray | None = None,
    processes: FloatArray | None = None,
    signs: tuple[Sign, ...] = (),
    mass_weight: float | None = None,
) -> MixingProblem:
    """Return a problem with one over the uncertainty as weight and no processes, unless said otherwise."""
    n_property = sources.shape[1]
    each = np.broadcast_to(np.asarray(uncertainty, dtype=float), (n_property,))
    return MixingProblem(
        sources=sources,
        uncertainty=each,
        weight=1 / each if weight is None else weight,
        processes=np.zeros((0, n_property)) if processes is None else processes,
        signs=signs,
        mass_weight=mass_weight,
    )


def random_problem(
    random: np.random.Generator,
    *,
    n_source: int,
    n_property: int,
    signs: tuple[Sign, ...] = (),
    mass_weight: float | None = None,
) -> MixingProblem:
    """Return a well-conditioned problem, its properties in very different units and far from zero."""
    unit = 10.0 ** random.uniform(-2, 2, n_property)
    shift = random.uniform(-100, 100, n_property)
    return problem(
        (random.normal(size=(n_source, n_property)) + shift) * unit,
        unit * random.uniform(0.05, 0.2, n_property),
        processes=random.normal(size=(len(signs), n_property)) * unit,
        signs=signs,
        mass_weight=mass_weight,
    )


def random_samples(random: np.random.Generator, of: MixingProblem, n_sample: int) -> FloatArray:
    """Return noisy mixtures, inside and around the sources; many have active bounds."""
    shares = random.dirichlet(np.full(len(of.sources), 0.5), n_sample)
    amounts = random.normal(0.3, 0.5, (n_sample, len(of.processes)))
    noise = random.normal(size=(n_sample, of.sources.shape[1])) * of.uncertainty
    size = random.choice([0.1, 1.0, 10.0], (n_sample, 1))
    return np.asarray(shares @ of.sources + amounts @ of.processes + noise * size)


def system(of: MixingProblem, samples: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return matrix (n_equation, n_unknown) and right-hand sides (n_sample, n_equation), spelled out."""
    mean = of.sources.mean(axis=0)
    A = np.vstack([(of.sources - mean) * of.weight, of.processes * of.weight]).T
    b = (samples - mean) * of.weight
    if of.mass_weight is not None:
        ones = np.r_[np.ones(len(of.sources)), np.zeros(len(of.processes))]
        A = np.vstack([A, of.mass_weight * ones])
        b = np.column_stack([b, np.full(len(b), of.mass_weight)])
    return A, b


def enumerated(of: MixingProblem, sample: FloatArray) -> FloatArray:
    """Return the unknowns (n_unknown,) of the best feasible stationary point over all choices of unknowns.

    Every choice is solved as one linear system of its normal equations and, with an exact sum, the
    multiplier's. The optimum is one of these points, and no feasible point is better.
    """
    A, b = system(of, sample[None])
    n_source, n_unknown = len(of.sources), of.n_unknown
    free = [n_source + i for i, sign in enumerate(of.signs) if sign == "free"]
    held = [i for i in range(n_unknown) if i not in free]
    e = np.r_[np.ones(n_source), np.zeros(n_unknown - n_source)]
    best, least = np.full(n_unknown, np.nan), np.inf
    for size in range(len(held) + 1):
        for chosen in combinations(held, size):
            part = [*chosen, *free]
            x = np.zeros(n_unknown)
            B = A[:, part]
            if of.mass_weight is None:
                if not e[part].any():
                    continue
                kkt = np.block([[B.T @ B, e[part][:, None]], [e[part][None], np.zeros((1, 1))]])
                x[part] = np.linalg.solve(kkt, np.r_[B.T @ b[0], 1.0])[:-1]
            else:
                x[part] = np.linalg.solve(B.T @ B, B.T @ b[0]) if part else []
            misfit = float(np.sum((A @ x - b[0]) ** 2))
            if (x[held] >= -1e-12).all() and misfit < least:
                best, least = x, misfit
    return best


def kkt_violation(of: MixingProblem, samples: FloatArray, unknowns: FloatArray) -> float:
    """Return by how much the worst sample misses the conditions of an optimum, gradients over column sizes."""
    A, b = system(of, samples)
    n_source = len(of.sources)
    gradient = (unknowns @ A.T - b) @ A  # (n_sample, n_unknown)
    if of.mass_weight is None:
        # With an exact sum the gradients of all positive shares are one number, the multiplier.
        shares = unknowns[:, :n_source]
        level = (shares * gradient[:, :n_source]).sum(axis=1) / shares.sum(axis=1)
        gradient = gradient.copy()
        gradient[:, :n_source] -= level[:, None]
    size = np.linalg.norm(A, axis=0) ** 2
    gradient /= np.maximum(size, 1e-3 * size.max() or 1.0)
    free = np.array([False] * n_source + [sign == "free" for sign in of.signs])
    positive = (unknowns > 0) | free
    return float(
        max(
            np.abs(gradient[positive]).max(initial=0.0),
            (-gradient[~positive]).max(initial=0.0),
            (-unknowns[:, ~free]).max(initial=0.0),
        )
    )
