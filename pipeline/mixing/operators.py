"""For a support of a small constrained least-squares problem, the affine map from data to its optimum.

Kernel ring: arrays in, arrays out. What a support is good for is decided in ``kernel``, for each sample. There
are 2**n supports and samples visit few of them, so an operator is made when it is first visited.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.mixing.blocks import Equations, Operators, Work

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

RANK_TOLERANCE = 1e-10  # part of the strongest direction below which another counts as dependent
MOST_CONSTRAINED = 14  # 2**14 supports of 15 equations would be 30 MB; no catalogue comes near it

# No column is weaker than this part of the strongest when gradients are scaled: a source in the very
# middle of the others has a centred column of zeros.
_WEAKEST_COLUMN = 1e-6


@dataclass(frozen=True, eq=False)
class Operator:
    """The affine map of one support; the support's number has bit i set where constrained unknown i takes part.

    For deviations ``d``, ``matrix @ d + constant`` is, for an unknown that takes part, its value, and for
    one held at zero the reduced gradient: what half the squared misfit gains per unit of it, over the
    square of its column, so that both carry the unit of the unknown. The support is optimal exactly when
    no constrained entry is negative (the Karush-Kuhn-Tucker conditions).
    """

    matrix: FloatArray  # (n_unknown, n_used)
    constant: FloatArray  # (n_unknown,)
    inside: BoolArray  # (n_unknown,) which unknowns take part


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


def equations_of(
    A: FloatArray, constrained: BoolArray, summed: BoolArray, weight: FloatArray, mass: float | None = None
) -> Equations:
    """Return ``min |A x - b|`` with ``x[constrained] >= 0``, as operators are made of it.

    Where ``summed`` names unknowns, their sum is held at one exactly. Orthogonal factorisations only: a
    basis of the plane of the sum, then a factorisation of the system on that plane (the null-space
    method; Lawson and Hanson 1974, chapter 20).

    Parameters
    ----------
    A
        Weighted system, (n_equation, n_unknown): a row per property, and one more where a mass is given.
    constrained, summed
        Masks of the unknowns, (n_unknown,). Summed unknowns are constrained and stand before all others.
    weight
        What a deviation is multiplied with, (n_used,).
    mass
        What the last row adds up to, None where there is no such row.

    """
    n_constrained = int(constrained.sum())
    if n_constrained > MOST_CONSTRAINED:
        raise ValueError(f"{n_constrained} constrained unknowns; at most {MOST_CONSTRAINED} can be solved")
    columns = np.ascontiguousarray(A.T)
    return Equations(
        columns=columns,
        sizes=sizes_of(columns),
        bit=bits_of(constrained),
        n_summed=int(summed.sum()),
        weight=np.ascontiguousarray(weight, dtype=np.float64),
        mass=mass or 0.0,
        tolerance=RANK_TOLERANCE,
    )


def work_for(equations: Equations) -> Work:
    """Return room to make operators in."""
    n_unknown, n_equation = equations.columns.shape
    return Work(
        P=np.empty((n_unknown, n_unknown)),
        Q=np.empty((n_unknown, n_equation)),
        start=np.empty((1, n_unknown)),
        at_start=np.empty((1, n_equation)),
        row=np.empty((1, n_equation)),
    )


def everything(equations: Equations) -> int:
    """Return the support in which all unknowns take part."""
    return int(equations.bit.sum())


def operator_of(equations: Equations, support: int) -> Operator | None:
    """Return the operator of one support, None where the columns that take part are dependent."""
    from pipeline.mixing import making  # noqa: PLC0415 - numba takes longer to import than all else here

    n_unknown, n_used = len(equations.bit), len(equations.weight)
    matrix, constant = np.empty((n_unknown, n_used)), np.empty(n_unknown)
    if not making.make_one(equations, support, work_for(equations), matrix, constant):
        return None
    return Operator(matrix, constant, inside(equations.bit, np.array([support]))[0])


def no_operators(equations: Equations, first_choice: int) -> Operators:
    """Return room for the operators of all supports, of which none is made yet."""
    n_unknown, n_used = len(equations.bit), len(equations.weight)
    n_support = everything(equations) + 1
    return Operators(
        matrix=np.empty((n_support * n_unknown, n_used)),
        constant=np.empty(n_support * n_unknown),
        per_freedom=np.empty(n_support),
        support=np.empty(n_support, dtype=np.int64),
        slot=np.full(n_support, -1, dtype=np.int32),
        n_made=np.zeros(1, dtype=np.int64),
        first_choice=first_choice,
        equations=equations,
        work=work_for(equations),
    )


def bits_of(constrained: BoolArray) -> IntArray:
    """Return the bit of every unknown in the number of a support, (n_unknown,), 0 for one that is free."""
    bit = np.zeros(len(constrained), dtype=np.int64)
    bit[constrained] = 1 << np.arange(int(constrained.sum()))
    return bit


def inside(bit: NDArray[np.integer[Any]], support: NDArray[np.integer[Any]]) -> BoolArray:
    """Return which unknowns take part in supports (n,), as (n, n_unknown)."""
    return np.asarray((bit == 0) | (bit & support[:, None] != 0))


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


def sizes_of(columns: FloatArray) -> FloatArray:
    """Return the squared length of every column of one or more systems, (..., n_unknown), none of them zero.

    Parameters
    ----------
    columns
        (..., n_unknown, n_equation).

    """
    sizes = np.einsum("...ij,...ij->...i", columns, columns)
    strongest = sizes.max(axis=-1, keepdims=True, initial=0.0)
    return np.asarray(np.maximum(sizes, _WEAKEST_COLUMN * np.where(strongest > 0, strongest, 1.0)))
