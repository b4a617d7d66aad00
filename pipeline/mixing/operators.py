"""For every support of a small constrained least-squares problem, the affine map from data to its optimum.

Kernel ring: arrays in, arrays out. What a support is good for is decided in ``kernel``, for each sample.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]

RANK_TOLERANCE = 1e-10  # part of the strongest direction below which another counts as dependent
MOST_CONSTRAINED = 14  # 2**14 supports of 15 equations are 30 MB; no catalogue comes near it

# No column is weaker than this part of the strongest when gradients are scaled: a source in the very
# middle of the others has a centred column of zeros.
_WEAKEST_COLUMN = 1e-6


@dataclass(frozen=True)
class SupportOperators:
    """One affine map per support; the support's number has bit i set where constrained unknown i takes part.

    For data ``b``, ``b @ matrix[s] + constant[s]`` is, for an unknown that takes part, its value, and for
    one held at zero the reduced gradient: what half the squared misfit gains per unit of it, over the
    square of its column, so that both carry the unit of the unknown. The support is optimal exactly when
    no constrained entry is negative (the Karush-Kuhn-Tucker conditions).
    """

    matrix: FloatArray  # (n_support, n_equation, n_unknown)
    constant: FloatArray  # (n_support, n_unknown)
    usable: BoolArray  # (n_support,) False where the columns that take part are dependent
    inside: BoolArray  # (n_support, n_unknown) which unknowns take part


def singular_values(A: FloatArray, summed: BoolArray) -> FloatArray:
    """Return the singular values of a system on the plane where the summed unknowns add up to a constant.

    Parameters
    ----------
    A
        Weighted system, (n_equation, n_unknown).
    summed
        Unknowns whose sum is held exactly, (n_unknown,), before all others; none where no sum is held.

    Returns
    -------
    array
        From the largest down, (n_unknown - 1,) where a sum is held, else (n_unknown,); zeros are
        appended where there are fewer equations than that.

    """
    system = A @ _plane(summed)
    n_free = system.shape[1]
    values = np.linalg.svd(system, compute_uv=False)
    return np.concatenate([values, np.zeros(n_free - len(values))])


def support_operators(A: FloatArray, constrained: BoolArray, summed: BoolArray) -> SupportOperators:
    """Return the operators of all supports of ``min |A x - b|`` with ``x[constrained] >= 0``.

    Where ``summed`` names unknowns, their sum is held at one exactly. Orthogonal factorisations only: a
    basis of the plane of the sum, then a factorisation of the system on that plane (the null-space
    method; Lawson and Hanson 1974, chapter 20).

    Parameters
    ----------
    A
        Weighted system, (n_equation, n_unknown).
    constrained, summed
        Masks of the unknowns, (n_unknown,). Summed unknowns are constrained and stand before all others.

    """
    n_equation, n_unknown = A.shape
    n_constrained = int(constrained.sum())
    if n_constrained > MOST_CONSTRAINED:
        raise ValueError(f"{n_constrained} constrained unknowns; at most {MOST_CONSTRAINED} can be solved")
    from pipeline.mixing import making  # noqa: PLC0415 - numba takes longer to import than all else here

    n_support = 1 << n_constrained
    inside = np.ones((n_support, n_unknown), dtype=bool)
    inside[:, constrained] = (np.arange(n_support)[:, None] >> np.arange(n_constrained)) & 1
    columns = np.ascontiguousarray(A.T)
    matrix = np.zeros((n_support, n_unknown, n_equation))
    constant = np.zeros((n_support, n_unknown))
    usable = np.zeros(n_support, dtype=bool)
    making.make_operators(
        columns, _sizes(columns), inside, int(summed.sum()), RANK_TOLERANCE, matrix, constant, usable
    )
    return SupportOperators(matrix.transpose(0, 2, 1), constant, usable, inside)


def _plane(summed: BoolArray) -> FloatArray:
    """Return an orthonormal basis of the vectors whose summed entries add up to zero, (n, n - 1) or (n, n).

    The rest are unit vectors. For the summed entries the columns are those of Helmert's matrix.
    """
    n_unknown, n_summed = len(summed), int(summed.sum())
    where, others = np.flatnonzero(summed), np.flatnonzero(~summed)
    basis = np.zeros((n_unknown, n_unknown - (1 if n_summed else 0)))
    for j in range(n_summed - 1):
        basis[where[: j + 1], j] = 1 / np.sqrt((j + 1) * (j + 2))
        basis[where[j + 1], j] = -(j + 1) / np.sqrt((j + 1) * (j + 2))
    first_other = max(0, n_summed - 1)
    basis[others, first_other + np.arange(len(others))] = 1.0
    return basis


def _sizes(columns: FloatArray) -> FloatArray:
    """Return the squared length of every column of the system, (n_unknown,), none of them zero."""
    sizes = np.einsum("ij,ij->i", columns, columns)
    strongest = float(sizes.max(initial=0.0)) or 1.0
    return np.asarray(np.maximum(sizes, _WEAKEST_COLUMN * strongest))
