"""The compiled making of operators: one small orthogonal factorisation per support.

``operators`` imports it at its first use, because it loads numba. What it needs stays in this file: numba's
store of machine code does not notice when a function in another file has changed.
"""

from __future__ import annotations

from math import sqrt
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.mixing.compiled import compiled as _compiled

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Ints = NDArray[np.integer[Any]]
    Bools = NDArray[np.bool_]


@_compiled
def _dot(one: Floats, i: int, other: Floats, k: int) -> float:
    """Return the scalar product of two rows."""
    total = 0.0
    for j in range(one.shape[1]):
        total += one[i, j] * other[k, j]
    return total


@_compiled
def _add(one: Floats, i: int, factor: float, other: Floats, k: int) -> None:
    """Add a multiple of row ``k`` to row ``i``."""
    for j in range(one.shape[1]):
        one[i, j] += factor * other[k, j]


@_compiled
def _span(inside: Bools, n_summed: int, P: Floats, start: Floats) -> int:
    """Write unknowns that span what a support allows as rows of ``P``, and one point of it; return how many.

    Summed unknowns keep their sum: they change by rows of Helmert's matrix, one against the mean of those
    before it, from equal shares. Minus one where no share is there to add up to one.
    """
    P[:] = 0.0
    start[:] = 0.0
    n_row = n_before = 0
    for i in range(inside.size):
        if not inside[i]:
            continue
        if i >= n_summed:
            P[n_row, i] = 1.0
            n_row += 1
            continue
        if n_before:
            size = sqrt(n_before * (n_before + 1.0))
            for before in range(i):
                if inside[before]:
                    P[n_row, before] = 1.0 / size
            P[n_row, i] = -n_before / size
            n_row += 1
        n_before += 1
    if n_summed and n_before == 0:
        return -1
    for i in range(n_summed):
        if inside[i]:
            start[0, i] = 1.0 / n_before
    return n_row


@_compiled
def _orthogonalise(A: Floats, rank: int, tolerance: float, P: Floats, Q: Floats) -> bool:
    """Make the first ``rank`` rows of ``Q = P A`` orthonormal by changing ``P``; False where they are dependent.

    Gram-Schmidt, modified and repeated, always with the strongest row that is left.
    """
    Q[:] = 0.0
    for k in range(rank):
        for i in range(P.shape[1]):
            if P[k, i] != 0.0:
                _add(Q, k, P[k, i], A, i)
    strongest = 0.0
    for k in range(rank):
        best, largest = k, -1.0
        for after in range(k, rank):
            size = _dot(Q, after, Q, after)
            if size > largest:
                best, largest = after, size
        for j in range(Q.shape[1]):
            Q[k, j], Q[best, j] = Q[best, j], Q[k, j]
        for i in range(P.shape[1]):
            P[k, i], P[best, i] = P[best, i], P[k, i]
        for before in range(k):
            part = -_dot(Q, k, Q, before)
            _add(Q, k, part, Q, before)
            _add(P, k, part, P, before)
        size = sqrt(_dot(Q, k, Q, k))
        strongest = max(strongest, size)
        if not size > tolerance * strongest:
            return False
        for j in range(Q.shape[1]):
            Q[k, j] /= size
        for i in range(P.shape[1]):
            P[k, i] /= size
        for after in range(k + 1, rank):
            part = -_dot(Q, after, Q, k)
            _add(Q, after, part, Q, k)
            _add(P, after, part, P, k)
    return True


@_compiled
def make_operators(
    A: Floats, sizes: Floats, inside: Bools, n_summed: int, tolerance: float, matrix: Floats,
    constant: Floats, usable: Bools,
) -> None:  # fmt: skip
    """Make the operators of all supports and write them into the last three arguments.

    Parameters
    ----------
    A
        Columns of the system, (n_unknown, n_equation).
    sizes
        What the gradient of each unknown is divided by, (n_unknown,).
    inside
        Which unknowns take part, (n_support, n_unknown).
    n_summed
        The first so many unknowns add up to one exactly; 0 where no sum is held.
    tolerance
        Part of the strongest direction below which another counts as dependent.
    matrix, constant, usable
        Written: (n_support, n_unknown, n_equation), (n_support, n_unknown), (n_support,). Operators that
        are not usable are left as they are.

    """
    n_unknown, n_equation = A.shape
    P, Q = np.empty((n_unknown, n_unknown)), np.empty((n_unknown, n_equation))
    start, at_start = np.empty((1, n_unknown)), np.empty((1, n_equation))
    for support in range(inside.shape[0]):
        taking, row = inside[support], matrix[support]
        rank = _span(taking, n_summed, P, start)
        usable[support] = 0 <= rank <= n_equation and _orthogonalise(A, rank, tolerance, P, Q)
        if not usable[support]:
            continue
        at_start[:] = 0.0
        for i in range(n_summed):
            _add(at_start, 0, start[0, i], A, i)
        for i in range(n_unknown):
            if taking[i]:
                row[i] = 0.0
                for k in range(rank):
                    _add(row, i, P[k, i], Q, k)
            else:
                # At the optimum the gradients of all shares that take part are equal: their mean is the
                # multiplier. Gradients act on the part of the data that is not explained.
                row[i] = A[i]
                if i < n_summed:
                    _add(row, i, -1.0, at_start, 0)
                for k in range(rank):
                    _add(row, i, -_dot(row, i, Q, k), Q, k)
                row[i] /= -sizes[i]
            constant[support, i] = start[0, i] - _dot(row, i, at_start, 0)
