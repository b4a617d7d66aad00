"""The compiled walk over samples: find each one's support, evaluate its operator, write the answer.

Importing this module loads numba; ``solver`` does so at its first solution, not before. All functions stay in
one file: numba's store of machine code does not notice when one in another file has changed.

Samples are taken in blocks, their numbers beside one another, because one operation on many samples is
what a processor does fastest. Those that need another support than their block's wait until enough wait for
the same one. No operation mixes samples or depends on the size of a block.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.mixing.blocks import Block, Room, Waiting
from pipeline.mixing.compiled import compiled as _compiled
from pipeline.mixing.status import MixingStatus

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.blocks import Operators, Results, System

    Floats = NDArray[np.float64]
    Ints = NDArray[np.integer[Any]]

_SOLVED = int(MixingStatus.SOLVED)
_ABSURD = int(MixingStatus.ABSURD)
_NOT_OPTIMAL = int(MixingStatus.NOT_OPTIMAL)

# Parts of the sample's own scale, which bounds the size of any of its unknowns.
_MARGIN = 1e-9  # an optimum clearer than this is the only one, wherever the walk came from
_ROUNDING = 1e-13  # how far below zero an entry may come out that is zero but for rounding
_FAILED = 1e-6  # no support is optimal to this: never seen, but a sample would say so

_BLOCK = 512  # samples; what a block needs stays in the fast memory of the processor
_ENOUGH = 256  # samples that wait for the same support from which they are taken together
_FEW = 32  # the same where there are very many supports
_WAITING = 1 << 17  # samples there is room for among those that wait
_SKEW = 8  # added to rows of a block: rows a power of two apart would evict one another
_QUICK = 12  # whole exchanges tried from the first guess before looking carefully
_PATIENCE = 3  # whole exchanges allowed without progress before pivoting one at a time
_PIVOTS_PER_UNKNOWN = 8  # then all supports are compared


@_compiled
def _evaluate(operators: Operators, support: int, deviation: Floats, value: Floats) -> None:
    """Evaluate the operator of ``support`` for one sample, (n_used,), into ``value``, (n_unknown,)."""
    for i in range(value.size):
        k = support * value.size + i
        value[i] = operators.constant[k]
        for j in range(deviation.size):
            value[i] += operators.matrix[k, j] * deviation[j]


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
def _walk(system: System, operators: Operators, deviation: Floats, rounding: float, value: Floats) -> int:
    """Pivot from everything until no constrained entry is negative; -1 where that leads nowhere.

    Whole exchanges, with single pivots when they stall (Portugal, Judice and Vicente 1994).
    """
    bit, usable = system.bit, operators.usable
    support = usable.size - 1
    fewest = bit.size + 1
    patience = _PATIENCE
    for _ in range(_PIVOTS_PER_UNKNOWN * bit.size):
        if not usable[support]:
            return -1
        _evaluate(operators, support, deviation, value)
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
def _compare_all(system: System, operators: Operators, deviation: Floats, value: Floats) -> int:
    """Return the usable support whose lowest constrained entry is highest, the first of equals; -1 for none."""
    best = -1
    best_lowest = -np.inf
    for support in range(operators.usable.size):
        if operators.usable[support]:
            _evaluate(operators, support, deviation, value)
            _violated, lowest = _judge(system.bit, 0.0, value)
            if lowest > best_lowest:
                best = support
                best_lowest = lowest
    return best


@_compiled
def _find_carefully(
    system: System, operators: Operators, deviation: Floats, rounding: float, value: Floats
) -> int:
    """Return the support of the optimum from the sample alone, with its operator's entries in ``value``.

    Where several supports share the optimum it is the smallest: the one without the zero shares. Minus
    one where no support is usable.
    """
    bit = system.bit
    support: int = _walk(system, operators, deviation, rounding, value)
    if support < 0:
        support = _compare_all(system, operators, deviation, value)
    if support < 0:
        return support
    _evaluate(operators, support, deviation, value)
    smaller = support
    for i in range(bit.size):
        if bit[i] & support and value[i] <= rounding:
            smaller ^= bit[i]
    if smaller == support or not operators.usable[smaller]:
        return support
    _evaluate(operators, smaller, deviation, value)
    _violated, lowest = _judge(bit, 0.0, value)
    if lowest >= -4 * rounding:
        return smaller
    _evaluate(operators, support, deviation, value)
    return support


@_compiled
def _add(total: Floats, i: int, factors: Floats, k: int, rows: Floats, n_row: int, n: int) -> None:
    """Add ``factors[k] @ rows`` to the first ``n`` of ``total[i]``, one row after another."""
    alone = n_row % 3
    for j in range(alone):
        factor = factors[k, j]
        for t in range(n):
            total[i, t] += factor * rows[j, t]
    for group in range(n_row // 3):
        j = alone + 3 * group
        one, two, three = factors[k, j], factors[k, j + 1], factors[k, j + 2]
        for t in range(n):
            total[i, t] = total[i, t] + one * rows[j, t] + two * rows[j + 1, t] + three * rows[j + 2, t]


@_compiled
def _answer(system: System, operators: Operators, support: int, block: Block, n: int, room: Room) -> None:
    """Do what ``_evaluate`` and ``_judge`` do, with the same bits, for the first ``n`` of a block.

    Then turn the entries into unknowns: zero outside the support, never negative, the sum one.
    """
    # Names, because numba counts references at every look into a tuple.
    bit, design, uncertainty, n_summed = system.bit, system.design, system.uncertainty, system.n_summed
    matrix, constant, deviation = operators.matrix, operators.constant, block.deviation
    value, lowest, violated, misfit = room.value, room.lowest, room.violated, room.misfit
    n_unknown, n_used = bit.size, uncertainty.size
    spare = n_unknown  # a row of values to work in
    for t in range(n):
        lowest[t] = np.inf
        violated[t] = 0
        misfit[t] = 0.0
    for i in range(n_unknown):
        own, k = bit[i], support * n_unknown + i
        start = constant[k]
        for t in range(n):
            value[i, t] = start
        _add(value, i, matrix, k, deviation, n_used, n)
        if own:
            for t in range(n):
                lowest[t] = min(lowest[t], value[i, t])
                violated[t] |= own if value[i, t] < 0.0 else 0
            inside = own & support != 0
            for t in range(n):
                value[i, t] = value[i, t] if inside and value[i, t] > 0.0 else 0.0
    if n_summed:
        for t in range(n):
            value[spare, t] = 0.0
        for i in range(n_summed):
            for t in range(n):
                value[spare, t] += value[i, t]
        for i in range(n_summed):
            for t in range(n):
                value[i, t] /= value[spare, t]
    for j in range(n_used):
        precision = 1.0 / uncertainty[j]
        for t in range(n):
            value[spare, t] = -deviation[j, t]
        _add(value, spare, design, j, value, n_unknown, n)
        for t in range(n):
            misfit[t] += (value[spare, t] * precision) ** 2


@_compiled
def _settle_alone(
    system: System, operators: Operators, block: Block, t: int, single: Block, room: Room, results: Results
) -> None:
    """Answer one sample of a block from that sample alone."""
    row, scale = block.row[t], block.scale[t]
    deviation, value = np.empty(system.columns.size), np.empty(system.bit.size)
    for j in range(deviation.size):
        deviation[j] = single.deviation[j, 0] = block.deviation[j, t]
    support = _find_carefully(system, operators, deviation, _ROUNDING * scale, value)
    if support < 0 or _judge(system.bit, 0.0, value)[1] < -_FAILED * scale:
        results.status[row], results.choice[row] = _NOT_OPTIMAL, operators.first_choice - 1
        return
    _answer(system, operators, support, single, 1, room)
    for i in range(value.size):
        results.unknowns[row, i] = room.value[i, 0]
    results.chi_square[row] = room.misfit[0] * operators.per_freedom[support]
    results.optimality[row] = room.lowest[0]
    results.choice[row] = operators.first_choice + support
    results.status[row] = _SOLVED


@_compiled
def _settle(
    system: System, operators: Operators, support: int, block: Block, n: int, waiting: Waiting,
    room: Room, single: Block, alone: Room, results: Results,
) -> None:  # fmt: skip
    """Answer the first ``n`` of a block for which ``support`` is clearly optimal; put the others to wait.

    An optimum with a clear margin is unique, so it may be looked for from anywhere; any other is found
    from the sample alone. So the answer depends neither on the guess nor on the rest of the batch.
    """
    if not operators.usable[support]:
        for t in range(n):
            _settle_alone(system, operators, block, t, single, alone, results)
        return
    _answer(system, operators, support, block, n, room)
    value, lowest, violated, misfit = room.value, room.lowest, room.violated, room.misfit
    settled, other = room.settled, room.other
    deviation, rows, scale, tried = block.deviation, block.row, block.scale, block.tried
    n_settled = n_other = 0
    for t in range(n):
        clear = lowest[t] >= _MARGIN * scale[t]
        settled[n_settled] = t
        n_settled += clear
        other[n_other] = t
        n_other += not clear

    unknowns, chi_square, optimality = results.unknowns, results.chi_square, results.optimality
    choice, status = results.choice, results.status
    per_freedom, own_choice = operators.per_freedom[support], operators.first_choice + support
    for index in range(n_settled):
        t = settled[index]
        row = rows[t]
        for i in range(unknowns.shape[1]):
            unknowns[row, i] = value[i, t]
        chi_square[row] = misfit[t] * per_freedom
        optimality[row] = lowest[t]
        choice[row] = own_choice
        status[row] = _SOLVED

    next_deviation, next_row, next_scale = waiting.deviation, waiting.row, waiting.scale
    next_tried, here = waiting.tried, waiting.here
    n_room = next_row.shape[1]
    for index in range(n_other):
        t = other[index]
        target = support ^ violated[t]
        place = here[target]
        if target == support or tried[t] == _QUICK or place == n_room:
            _settle_alone(system, operators, block, t, single, alone, results)
            continue
        for j in range(deviation.shape[0]):
            next_deviation[target, j, place] = deviation[j, t]
        next_row[target, place] = rows[t]
        next_scale[target, place] = scale[t]
        next_tried[target, place] = tried[t] + 1
        here[target] = place + 1
        if 2 * (place + 1) == n_room - n_room % 2:
            waiting.enough[waiting.n_enough[0]] = target
            waiting.n_enough[0] += 1


@_compiled
def _settle_waiting(
    system: System, operators: Operators, support: int, waiting: Waiting, room: Room, single: Block,
    alone: Room, results: Results,
) -> None:  # fmt: skip
    """Settle those that wait for ``support``; no support follows itself, so they make room for no other."""
    n = waiting.here[support]
    waiting.here[support] = 0
    block = Block(
        waiting.deviation[support], waiting.row[support], waiting.scale[support], waiting.tried[support]
    )
    _settle(system, operators, support, block, n, waiting, room, single, alone, results)


@_compiled
def _load(
    observed: Floats, rows: Ints, position: int, system: System, no_choice: int, block: Block,
    largest: Floats, results: Results,
) -> tuple[int, int]:  # fmt: skip
    """Take the next samples that have all used properties into a block; return how many, and where to go on.

    ``largest`` is written: the largest weighted deviation. Absurd samples are told so and left out.
    """
    columns, reference, weight, reach, limit = (
        system.columns, system.reference, system.weight, system.reach, system.limit
    )  # fmt: skip
    deviation, row, scale, tried = block.deviation, block.row, block.scale, block.tried
    n_row = rows.size or observed.shape[0]
    n = 0
    while n < largest.size and position < n_row:
        own = rows[position] if rows.size else position
        position += 1
        row[n] = own
        there = True
        for j in range(columns.size):
            step = observed[own, columns[j]] - reference[j]
            deviation[j, n] = step
            there &= step == step  # noqa: PLR0124 - NaN is not
        n += there
    largest[:n] = 0.0
    for j in range(columns.size):
        for t in range(n):
            size = abs(deviation[j, t] * weight[j])
            largest[t] = max(largest[t], size)
    n_sound = 0
    for t in range(n):
        scale[t] = 1.0 + reach * largest[t]
        tried[t] = 0
        n_sound += largest[t] <= limit
    if n_sound < n:
        n_sound = 0
        for t in range(n):
            if largest[t] > limit:
                results.status[row[t]], results.choice[row[t]] = _ABSURD, no_choice
                continue
            for j in range(columns.size):
                deviation[j, n_sound] = deviation[j, t]
            row[n_sound] = row[t]
            scale[n_sound] = scale[t]
            n_sound += 1
    return n_sound, position


@_compiled
def solve_rows(observed: Floats, rows: Ints, system: System, operators: Operators, results: Results) -> None:
    """Solve samples ``rows`` (n_row,) of ``observed`` (n_sample, n_property), C order; all where none is named.

    Those that lack a property of ``system`` are passed over.
    """
    n_used, n_unknown, n_support = system.columns.size, system.bit.size, operators.usable.size
    n_row = rows.size or observed.shape[0]
    n_block = min(_BLOCK, n_row)
    n_wait = max(_FEW, min(2 * _ENOUGH, _WAITING // n_support, 2 * n_row)) + _SKEW
    n_room = max(n_block + _SKEW, n_wait)
    block = Block(
        np.empty((n_used, n_room)), np.empty(n_room, np.int64), np.empty(n_room), np.empty(n_room, np.int64)
    )
    single = Block(np.empty((n_used, 1)), np.empty(1, np.int64), np.empty(1), np.empty(1, np.int64))
    waiting = Waiting(
        np.empty((n_support, n_used, n_wait)), np.empty((n_support, n_wait), np.int64),
        np.empty((n_support, n_wait)), np.empty((n_support, n_wait), np.int64),
        np.zeros(n_support, np.int64), np.empty(n_support, np.int64), np.zeros(1, np.int64),
    )  # fmt: skip
    room = Room(
        np.empty((n_unknown + 1, n_room)), np.empty(n_room), np.empty(n_room, np.int64), np.empty(n_room),
        np.empty(n_room, np.int64), np.empty(n_room, np.int64),
    )  # fmt: skip
    alone = Room(
        np.empty((n_unknown + 1, 1)), np.empty(1), np.empty(1, np.int64), np.empty(1), np.empty(1, np.int64),
        np.empty(1, np.int64),
    )  # fmt: skip
    largest = np.empty(n_block)
    position = 0
    while position < n_row:
        n, position = _load(
            observed, rows, position, system, operators.first_choice - 1, block, largest, results
        )
        _settle(system, operators, n_support - 1, block, n, waiting, room, single, alone, results)
        while waiting.n_enough[0]:
            waiting.n_enough[0] -= 1
            support = waiting.enough[waiting.n_enough[0]]
            _settle_waiting(system, operators, support, waiting, room, single, alone, results)
    left = True
    while left:
        left = False
        for support in range(n_support):
            if waiting.here[support]:
                left = True
                _settle_waiting(system, operators, support, waiting, room, single, alone, results)
