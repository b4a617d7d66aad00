"""The compiled walk over samples: find each one's support, evaluate its operator, write the answer.

Importing this module loads numba; ``solver`` does so at its first solution, not before. All of it stays in
one file: numba's store of machine code does not notice when a function in another file has changed.

Samples are taken in blocks, their numbers beside one another, because one operation on many samples is
what a processor does fastest. No operation mixes samples or depends on the size of a block.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numba import njit

from pipeline.mixing.status import MixingStatus

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Ints = NDArray[np.integer[Any]]
    Bools = NDArray[np.bool_]

_SOLVED = int(MixingStatus.SOLVED)
_ABSURD = int(MixingStatus.ABSURD)
_NOT_OPTIMAL = int(MixingStatus.NOT_OPTIMAL)

# Parts of the sample's own scale, which bounds the size of any of its unknowns.
_MARGIN = 1e-9  # an optimum clearer than this is the only one, wherever the walk came from
_ROUNDING = 1e-13  # how far below zero an entry may come out that is zero but for rounding
_FAILED = 1e-6  # no support is optimal to this: never seen, but a sample would say so

_BLOCK = 512  # samples; what a block needs stays in the fast memory of the processor
_SKEW = 8  # added to rows of a block: rows a power of two apart would evict one another
_WORTH_PACKING = 4  # samples that wait for the same support from which they are evaluated together
_QUICK = 8  # whole exchanges tried from the first guess before looking carefully
_PATIENCE = 3  # whole exchanges allowed without progress before pivoting one at a time
_PIVOTS_PER_UNKNOWN = 8  # then all supports are compared


def _compiled(function: Callable[..., Any]) -> Any:
    """Compile for one thread; the machine code is kept on disk where there is a place that can be written."""
    try:
        return njit(cache=True, nogil=True, error_model="numpy")(function)
    except RuntimeError:
        return njit(nogil=True, error_model="numpy")(function)


@_compiled
def _evaluate(matrix: Floats, constant: Floats, support: int, deviation: Floats, value: Floats) -> None:
    """Evaluate the operator of ``support`` for one sample, (n_used,), into ``value``, (n_lane,)."""
    for i in range(value.size):
        value[i] = constant[support, i]
    for j in range(deviation.size):
        step = deviation[j]
        for i in range(value.size):
            value[i] += matrix[support, j, i] * step


@_compiled
def _judge(bit: Ints, negative: float, value: Floats) -> tuple[int, float]:
    """Return the bits of the constrained entries below ``negative``, and the lowest constrained entry."""
    violated = 0
    lowest = np.inf
    for i in range(bit.size):
        if bit[i]:
            lowest = min(lowest, value[i])
            if value[i] < negative:
                violated |= bit[i]
    return violated, lowest


@_compiled
def _walk(
    matrix: Floats, constant: Floats, usable: Bools, bit: Ints, deviation: Floats, rounding: float,
    value: Floats,
) -> int:  # fmt: skip
    """Pivot from everything until no constrained entry is negative; -1 where that leads nowhere.

    Whole exchanges, with single pivots when they stall (Portugal, Judice and Vicente 1994).
    """
    support = usable.size - 1
    fewest = bit.size + 1
    patience = _PATIENCE
    for _ in range(_PIVOTS_PER_UNKNOWN * bit.size):
        if not usable[support]:
            return -1
        _evaluate(matrix, constant, support, deviation, value)
        violated, _lowest = _judge(bit, -rounding, value)
        if violated == 0:
            return support
        count = last = 0
        for i in range(bit.size):
            if bit[i] & violated:
                count += 1
                last = bit[i]
        if count < fewest:
            fewest = count
            patience = _PATIENCE
        else:
            patience -= 1
        support ^= violated if patience >= 0 else last
    return -1


@_compiled
def _compare_all(
    matrix: Floats, constant: Floats, usable: Bools, bit: Ints, deviation: Floats, value: Floats
) -> int:
    """Return the usable support whose lowest constrained entry is highest, the first of equals; -1 for none."""
    best = -1
    best_lowest = -np.inf
    for support in range(usable.size):
        if usable[support]:
            _evaluate(matrix, constant, support, deviation, value)
            _violated, lowest = _judge(bit, 0.0, value)
            if lowest > best_lowest:
                best = support
                best_lowest = lowest
    return best


@_compiled
def _find_carefully(
    matrix: Floats, constant: Floats, usable: Bools, bit: Ints, deviation: Floats, rounding: float,
    value: Floats,
) -> int:  # fmt: skip
    """Return the support of the optimum from the sample alone, with its operator's entries in ``value``.

    Where several supports share the optimum it is the smallest: the one without the zero shares. Minus
    one where no support is usable.
    """
    support: int = _walk(matrix, constant, usable, bit, deviation, rounding, value)
    if support < 0:
        support = _compare_all(matrix, constant, usable, bit, deviation, value)
    if support < 0:
        return support
    _evaluate(matrix, constant, support, deviation, value)
    smaller = support
    for i in range(bit.size):
        if bit[i] & support and value[i] <= rounding:
            smaller ^= bit[i]
    if smaller == support or not usable[smaller]:
        return support
    _evaluate(matrix, constant, smaller, deviation, value)
    _violated, lowest = _judge(bit, 0.0, value)
    if lowest >= -4 * rounding:
        return smaller
    _evaluate(matrix, constant, support, deviation, value)
    return support


@_compiled
def _find(
    matrix: Floats, constant: Floats, usable: Bools, bit: Ints, deviation: Floats, guess: int, scale: float,
    value: Floats,
) -> int:  # fmt: skip
    """Return the support of the optimum of one sample, with its operator's entries in ``value``.

    An optimum with a clear margin is unique, so it may be looked for from anywhere; any other is found
    from the sample alone. So the answer depends neither on the guess nor on the rest of the batch.
    """
    support = guess
    for _ in range(_QUICK):
        _evaluate(matrix, constant, support, deviation, value)
        violated, lowest = _judge(bit, 0.0, value)
        if violated == 0:
            if lowest >= _MARGIN * scale and usable[support]:
                return support
            break
        support ^= violated
    found: int = _find_carefully(matrix, constant, usable, bit, deviation, _ROUNDING * scale, value)
    return found


@_compiled
def _load(
    observed: Floats, rows: Ints, columns: Ints, reference: Floats, weight: Floats, reach: float,
    deviations: Floats, largest: Floats, scales: Floats,
) -> None:  # fmt: skip
    """Take the deviations of a block, (n_used, n_block), their largest weighted, and the samples' scales."""
    largest[:] = 0.0
    for j in range(columns.size):
        column, middle, deviation = columns[j], reference[j], deviations[j]
        for t in range(rows.size):
            deviation[t] = observed[rows[t], column] - middle
        for t in range(rows.size):
            largest[t] = max(largest[t], abs(deviation[t] * weight[j]))
    for t in range(rows.size):
        scales[t] = 1.0 + reach * largest[t]


@_compiled
def _evaluate_block(
    matrix: Floats, constant: Floats, support: int, bit: Ints, deviations: Floats, values: Floats,
    lowest: Floats, violated: Ints,
) -> None:  # fmt: skip
    """Do what ``_evaluate`` and ``_judge`` do, with the same bits, for the first samples of a block."""
    n_block = lowest.size
    lowest[:] = np.inf
    violated[:] = 0
    for i in range(bit.size):
        value = values[i]
        value[:n_block] = constant[support, i]
        for j in range(deviations.shape[0]):
            factor = matrix[support, j, i]
            for t in range(n_block):
                value[t] += factor * deviations[j, t]
        if bit[i]:
            for t in range(n_block):
                lowest[t] = min(lowest[t], value[t])
                violated[t] |= bit[i] if value[t] < 0.0 else 0


@_compiled
def _settle(
    matrix: Floats, constant: Floats, usable: Bools, bit: Ints, deviations: Floats, scales: Floats,
    members: Ints, guess: int, packed: Floats, packed_values: Floats, packed_lowest: Floats,
    packed_violated: Ints, deviation: Floats, value: Floats, values: Floats, lowest: Floats, supports: Ints,
) -> None:  # fmt: skip
    """Find the supports of those samples of a block, ``members``, whose next guess is ``guess``.

    The last three arguments are written for these samples; those from ``packed`` on are room to work in.
    """
    together = members.size >= _WORTH_PACKING
    if together:
        for j in range(deviations.shape[0]):
            for m in range(members.size):
                packed[j, m] = deviations[j, members[m]]
        _evaluate_block(matrix, constant, guess, bit, packed, packed_values, packed_lowest, packed_violated)
    for m in range(members.size):
        t = members[m]
        if together and packed_violated[m] == 0 and packed_lowest[m] >= _MARGIN * scales[t] and usable[guess]:
            supports[t] = guess
            lowest[t] = packed_lowest[m]
            for i in range(bit.size):
                values[i, t] = packed_values[i, m]
            continue
        for j in range(deviation.size):
            deviation[j] = deviations[j, t]
        next_guess = guess ^ packed_violated[m] if together else guess
        supports[t] = _find(matrix, constant, usable, bit, deviation, next_guess, scales[t], value)
        _violated, lowest[t] = _judge(bit, 0.0, value)
        for i in range(bit.size):
            values[i, t] = value[i]


@_compiled
def _constrain(bit: Ints, n_summed: int, supports: Ints, values: Floats, total: Floats) -> None:
    """Turn the entries of operators into unknowns: zero outside the support, never negative, the sum one."""
    for i in range(bit.size):
        value = values[i]
        if bit[i]:
            for t in range(supports.size):
                value[t] = value[t] if bit[i] & supports[t] and value[t] > 0.0 else 0.0
    if n_summed:
        total[:] = 0.0
        for i in range(n_summed):
            for t in range(supports.size):
                total[t] += values[i, t]
        for i in range(n_summed):
            for t in range(supports.size):
                values[i, t] /= total[t]


@_compiled
def _fit(
    design: Floats, precision: Floats, deviations: Floats, values: Floats, residuals: Floats, misfit: Floats
) -> None:
    """Write the residuals of a block, (n_used, n_block), and their squares summed in uncertainties."""
    misfit[:] = 0.0
    for j in range(precision.size):
        residual = residuals[j]
        residual[:] = 0.0
        for i in range(design.shape[0]):
            for t in range(misfit.size):
                residual[t] += design[i, j] * values[i, t]
        for t in range(misfit.size):
            residual[t] -= deviations[j, t]
            misfit[t] += (residual[t] * precision[j]) ** 2


@_compiled
def solve_rows(  # noqa: PLR0915 - the steps of a block in their order
    observed: Floats, rows: Ints, columns: Ints, reference: Floats, weight: Floats, precision: Floats,
    limit: float, reach: float,
    matrix: Floats, constant: Floats, usable: Bools, bit: Ints, n_summed: int, design: Floats,
    per_freedom: Floats, first_choice: int,
    unknowns: Floats, residuals: Floats, chi_square: Floats, optimality: Floats, choice: Ints, status: Ints,
) -> None:  # fmt: skip
    """Solve samples ``rows`` of ``observed`` and write their rows of the results, the last six arguments.

    The row of a sample that has no answer is left as it is but for its status.

    Parameters
    ----------
    observed
        (n_sample, n_property), C order; only ``columns`` are read, and they are not NaN.
    rows, columns
        Samples to solve (n_row,) and properties to use (n_used,), integers.
    reference, weight, precision
        Per used property, (n_used,): what is subtracted, what a deviation is multiplied with in the
        misfit that is minimised, and one over its standard uncertainty.
    limit, reach
        Largest weighted deviation that is not absurd; how far the unknowns can go per weighted deviation.
    matrix, constant, usable
        Operators per support on deviations: (n_support, n_used, n_lane), (n_support, n_lane),
        (n_support,). Lanes past the unknowns are zeros: full vector registers are faster.
    bit
        Bit of every unknown in a support's number, (n_unknown,), 0 for a free one.
    n_summed
        The first so many unknowns add up to one exactly; 0 where no sum is held.
    design
        What one of each unknown adds to the deviation of every used property, (n_unknown, n_used).
    per_freedom
        One over the degrees of freedom per support, (n_support,), NaN where there are none.
    unknowns, residuals
        Written: (n_sample, n_unknown), (n_sample, n_property).
    chi_square, optimality, choice, status
        Written, (n_sample,): the reduced chi-square, the lowest constrained entry (optimal where it is
        not negative but for rounding), ``first_choice`` plus the support, and a ``MixingStatus``.

    """
    n_used, n_unknown, n_block = columns.size, bit.size, min(_BLOCK, rows.size)
    everything = usable.size - 1
    # Each array on its own: numba takes the parts of one array for strided, at half the speed.
    deviations = np.zeros((n_used, n_block + _SKEW))
    packed, fitted = np.zeros_like(deviations), np.zeros_like(deviations)
    values = np.zeros((n_unknown, n_block + _SKEW))
    packed_values = np.zeros_like(values)
    largest, scales, lowest = np.zeros(n_block), np.zeros(n_block), np.zeros(n_block)
    packed_lowest, misfit, total = np.zeros(n_block), np.zeros(n_block), np.zeros(n_block)
    violated, packed_violated = np.zeros(n_block, np.int64), np.zeros(n_block, np.int64)
    supports, members = np.zeros(n_block, np.int64), np.zeros(n_block, np.int64)
    following, awaited = np.zeros(n_block, np.int64), np.zeros(n_block, np.int64)
    first_waiting = np.full(usable.size, -1)  # per support, of the samples that wait for it
    deviation, value = np.zeros(n_used), np.zeros(matrix.shape[2])

    guess = everything
    for start in range(0, rows.size, n_block):
        own = rows[start : start + n_block]
        n = own.size
        _load(observed, own, columns, reference, weight, reach, deviations, largest, scales)
        _evaluate_block(matrix, constant, guess, bit, deviations, values, lowest[:n], violated[:n])
        n_awaited = 0
        for t in range(n):
            supports[t] = guess
            if largest[t] > limit:
                supports[t] = -1
            elif violated[t] or lowest[t] < _MARGIN * scales[t] or not usable[guess]:
                target = guess ^ violated[t]
                following[t] = first_waiting[target]
                if following[t] < 0:
                    awaited[n_awaited] = target
                    n_awaited += 1
                first_waiting[target] = t
        for target in awaited[:n_awaited]:
            count = 0
            t = first_waiting[target]
            first_waiting[target] = -1
            while t >= 0:
                members[count] = t
                count += 1
                t = following[t]
            _settle(
                matrix, constant, usable, bit, deviations, scales, members[:count], target, packed,
                packed_values, packed_lowest[:count], packed_violated[:count], deviation, value, values,
                lowest, supports,
            )  # fmt: skip

        _constrain(bit, n_summed, supports[:n], values, total)
        _fit(design, precision, deviations, values, fitted, misfit[:n])
        alike = 0
        for t in range(n):
            row, support = own[t], supports[t]
            alike += support == supports[n - 1]
            if largest[t] > limit:
                status[row] = _ABSURD
                continue
            if support < 0 or lowest[t] < -_FAILED * scales[t]:
                status[row] = _NOT_OPTIMAL
                continue
            for i in range(n_unknown):
                unknowns[row, i] = values[i, t]
            if n_used < residuals.shape[1]:
                for j in range(residuals.shape[1]):
                    residuals[row, j] = np.nan
            for j in range(n_used):
                residuals[row, columns[j]] = fitted[j, t]
            chi_square[row] = misfit[t] * per_freedom[support]
            optimality[row] = lowest[t]
            choice[row] = first_choice + support
            status[row] = _SOLVED
        # Where neighbours share a support the next block starts from it, else from everything.
        guess = supports[n - 1] if 2 * alike > n and supports[n - 1] >= 0 else everything
