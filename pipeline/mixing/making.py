"""The compiled making of operators, one support at a time: a small orthogonal factorisation each.

An operator is a function of the system and the support alone, so that when it is made shows in no bit of it.
Nothing here makes an array: what is needed to work in is handed on, as ``Work``.
"""

from __future__ import annotations

from math import sqrt
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.mixing.compiled import compiled as _compiled
from pipeline.mixing.compiled import compiled_step as _step

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.blocks import Equations, Operators, Work

    Floats = NDArray[np.float64]
    Ints = NDArray[np.integer[Any]]

UNKNOWN, UNUSABLE = -1, -2  # an operator not made yet; one whose columns are dependent


@_step
def _dot(one: Floats, i: int, other: Floats, k: int) -> float:
    """Return the scalar product of two rows."""
    total = 0.0
    for j in range(one.shape[1]):
        total += one[i, j] * other[k, j]
    return total


@_step
def _add(one: Floats, i: int, factor: float, other: Floats, k: int) -> None:
    """Add a multiple of row ``k`` to row ``i``."""
    for j in range(one.shape[1]):
        one[i, j] += factor * other[k, j]


@_step
def _span(bit: Ints, support: int, n_summed: int, P: Floats, start: Floats) -> int:
    """Write unknowns that span what a support allows as rows of ``P``, and one point of it; return how many.

    Summed unknowns keep their sum: they change by rows of Helmert's matrix, one against the mean of those
    before it, from equal shares. Minus one where no share is there to add up to one.
    """
    P[:] = 0.0
    start[:] = 0.0
    n_row = n_before = 0
    for i in range(bit.size):
        if bit[i] and not bit[i] & support:
            continue
        if i >= n_summed:
            P[n_row, i] = 1.0
            n_row += 1
            continue
        if n_before:
            size = sqrt(n_before * (n_before + 1.0))
            for before in range(i):
                if bit[before] & support:
                    P[n_row, before] = 1.0 / size
            P[n_row, i] = -n_before / size
            n_row += 1
        n_before += 1
    if n_summed and n_before == 0:
        return -1
    for i in range(n_summed):
        if bit[i] & support:
            start[0, i] = 1.0 / n_before
    return n_row


@_step
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


@_step
def make_operator(
    equations: Equations, support: int, work: Work, matrix: Floats, constant: Floats, first: int
) -> bool:
    """Write the operator of one support; False where its columns are dependent, and then nothing is written.

    Parameters
    ----------
    equations, support
        The system, and the bits of the constrained unknowns that take part.
    work
        Room to work in.
    matrix, constant
        Written from row ``first`` on, (n_unknown, n_used) and (n_unknown,): for deviations d of the
        properties, ``matrix @ d + constant`` is the value of an unknown that takes part, and for one held
        at zero the reduced gradient over the size of its column.

    """
    A, sizes, bit, n_summed, weight, mass, tolerance = equations
    P, Q, start, at_start, row = work
    n_unknown, n_equation = A.shape
    n_used = weight.size
    rank = _span(bit, support, n_summed, P, start)
    if rank < 0 or rank > n_equation or not _orthogonalise(A, rank, tolerance, P, Q):
        return False
    at_start[:] = 0.0
    for i in range(n_summed):
        _add(at_start, 0, start[0, i], A, i)
    for i in range(n_unknown):
        row[:] = 0.0
        if bit[i] == 0 or bit[i] & support:
            for k in range(rank):
                _add(row, 0, P[k, i], Q, k)
        else:
            # At the optimum the gradients of all shares that take part are equal: their mean is the
            # multiplier. Gradients act on the part of the data that is not explained.
            _add(row, 0, 1.0, A, i)
            if i < n_summed:
                _add(row, 0, -1.0, at_start, 0)
            for k in range(rank):
                _add(row, 0, -_dot(row, 0, Q, k), Q, k)
            for j in range(n_equation):
                row[0, j] /= -sizes[i]
        constant[first + i] = start[0, i] - _dot(row, 0, at_start, 0)
        if n_equation > n_used:
            constant[first + i] += row[0, n_used] * mass
        for j in range(n_used):
            matrix[first + i, j] = row[0, j] * weight[j]
    return True


@_step
def slot_of(operators: Operators, support: int) -> int:
    """Return where the operator of a support lies, which is made if it has not been; ``UNUSABLE`` if it cannot."""
    slot: int = operators.slot[support]
    if slot != UNKNOWN:
        return slot
    equations = operators.equations
    bit = equations.bit
    slot = operators.n_made[0]
    if not make_operator(
        equations, support, operators.work, operators.matrix, operators.constant, slot * bit.size
    ):
        operators.slot[support] = UNUSABLE
        return UNUSABLE
    n_inside = 0
    for i in range(bit.size):
        n_inside += bit[i] == 0 or bit[i] & support != 0
    freedom = equations.weight.size + 1.0 - max(n_inside, 1)
    operators.per_freedom[slot] = 1.0 / freedom if freedom > 0.0 else np.nan
    operators.support[slot] = support
    operators.slot[support] = slot
    operators.n_made[0] = slot + 1
    return slot


@_compiled
def make_one(equations: Equations, support: int, work: Work, matrix: Floats, constant: Floats) -> bool:
    """Do what ``make_operator`` does, called from outside compiled code."""
    made: bool = make_operator(equations, support, work, matrix, constant, 0)
    return made
