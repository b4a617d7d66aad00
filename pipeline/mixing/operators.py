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

RANK_TOLERANCE = 1e-10  # smallest over largest singular value below which columns count as dependent
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
    rank: NDArray[np.int64]  # (n_support,) unknowns that take part, less one for an exact sum


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
    basis of the plane of the sum, then a singular value decomposition of the system on that plane
    (the null-space method; Lawson and Hanson 1974, chapter 20).

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
    n_support = 1 << n_constrained
    inside = np.ones((n_support, n_unknown), dtype=bool)
    inside[:, constrained] = (np.arange(n_support)[:, None] >> np.arange(n_constrained)) & 1
    n_summed = inside[:, summed].sum(axis=1)
    n_inside = inside.sum(axis=1)
    rank = n_inside - (1 if summed.any() else 0)

    result = SupportOperators(
        matrix=np.zeros((n_support, n_equation, n_unknown)),
        constant=np.zeros((n_support, n_unknown)),
        usable=np.zeros(n_support, dtype=bool),
        inside=inside,
        rank=rank,
    )
    possible = (rank <= n_equation) & ((n_summed > 0) | ~summed.any())
    # Supports with as many shares and as many other unknowns have the same shapes and are done together.
    columns = np.ascontiguousarray(A.T)
    kinds = n_summed * (n_unknown + 1) + n_inside
    for kind in np.unique(kinds[possible]):
        _fill(result, np.flatnonzero(possible & (kinds == kind)), columns, summed)
    return result


def _fill(
    result: SupportOperators, members: NDArray[np.int64], columns: FloatArray, summed: BoolArray
) -> None:
    """Fill in the operators of supports ``members``, which have equally many unknowns of each kind.

    ``columns`` are those of the system, (n_unknown, n_equation).
    """
    n_unknown, n_equation = columns.shape
    n_member = len(members)
    inside = result.inside[members]
    taking = np.nonzero(inside)[1].reshape(n_member, -1)  # (n_member, n_inside)
    resting = np.nonzero(~inside)[1].reshape(n_member, n_unknown - taking.shape[1])

    B = columns[taking].transpose(0, 2, 1)  # (n_member, n_equation, n_inside)
    own_sum = summed[taking[0]]  # the same for all members: shares come before the other unknowns
    plane = _plane(own_sum)  # (n_inside, rank)
    start = own_sum / max(1, own_sum.sum())  # equal shares: a point of the plane
    at_start = B @ start  # (n_member, n_equation)

    U, size, Vt = np.linalg.svd(B @ plane, full_matrices=False)
    largest = size[:, :1] if size.shape[1] else np.ones((n_member, 1))
    dependent = size <= RANK_TOLERANCE * largest
    result.usable[members] = ~dependent.any(axis=1) & (largest[:, 0] > 0)
    size = np.where(dependent, np.inf, size)  # keeps unusable operators finite
    V = plane @ Vt.transpose(0, 2, 1)  # (n_member, n_inside, rank)
    value = (V / size[:, None, :]) @ U.transpose(0, 2, 1)  # (n_member, n_inside, n_equation)

    # At the optimum the gradients of all shares that take part are equal: their mean is the multiplier.
    mean_column = at_start if own_sum.any() else np.zeros_like(at_start)
    pull = columns[resting] - summed[resting][:, :, None] * mean_column[:, None, :]
    pull -= (pull @ U) @ U.transpose(0, 2, 1)  # acts on the part of the data that is not explained
    gradient = -pull / _sizes(columns)[resting][:, :, None]

    each = np.arange(n_member)[:, None]
    matrix = np.empty((n_member, n_unknown, n_equation))
    matrix[each, taking] = value
    matrix[each, resting] = gradient
    constant = -(matrix @ at_start[:, :, None])[:, :, 0]
    constant[each, taking] += start
    result.matrix[members] = matrix.transpose(0, 2, 1)
    result.constant[members] = constant


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
