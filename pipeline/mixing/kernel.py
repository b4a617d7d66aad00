"""The compiled walk over samples: find each one's support, evaluate its operator, write the answer.

Importing this module loads numba; ``solver`` does so at its first solution, not before.

Samples are taken in blocks, their numbers beside one another, because one operation on many samples is
what a processor does fastest. Those that need another support than their block's wait until enough wait for
the same one. No operation mixes samples or depends on the size of a block.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.mixing.blocks import Block, Room, Waiting
from pipeline.mixing.compiled import compiled as _compiled
from pipeline.mixing.compiled import compiled_step as _step
from pipeline.mixing.making import slot_of
from pipeline.mixing.pivoting import PATIENCE, PIVOTS_PER_UNKNOWN, exchanged
from pipeline.mixing.status import MixingStatus

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.blocks import Operators, Results, System

    Floats = NDArray[np.float64]
    Ints = NDArray[np.integer[Any]]

# Of what is compiled into this module from others. Numba's store of machine code notices only when this file
# has changed: tests/mixing/test_compiled.py tells what to write here when one of those has.
BUILT_FROM = "da2bf5328bdd2ce2"

_SOLVED = int(MixingStatus.SOLVED)
_ABSURD = int(MixingStatus.ABSURD)
_NOT_OPTIMAL = int(MixingStatus.NOT_OPTIMAL)

# Parts of the sample's own scale, which bounds the size of any of its unknowns.
_MARGIN = 1e-9  # an optimum clearer than this is the only one, wherever the walk came from
_ROUNDING = 1e-13  # how far below zero an entry may come out that is zero but for rounding
_FAILED = 1e-6  # no support is optimal to this: never seen, but a sample would say so

_BLOCK = 512  # samples; what a block needs stays in the fast memory of the processor
_ENOUGH = 256  # samples that wait for the same support from which they are taken together
_FEW, _WAITING = 32, 1 << 19  # room for those that wait: of one support at least, of all at most
_SKEW = 8  # added to rows of a block: rows a power of two apart would evict one another
_QUICK = 12  # whole exchanges tried from the first guess before looking carefully


@_step
def _evaluate(operators: Operators, slot: int, deviation: Floats, value: Floats) -> None:
    """Evaluate the operator in ``slot`` for one sample, (n_used,), into ``value``, (n_unknown,)."""
    for i in range(value.size):
        k = slot * value.size + i
        value[i] = operators.constant[k]
        for j in range(deviation.size):
            value[i] += operators.matrix[k, j] * deviation[j]


@_step
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


@_step
def _walk(system: System, operators: Operators, deviation: Floats, rounding: float, value: Floats) -> int:
    """Pivot from everything until no constrained entry is negative; -1 where that leads nowhere."""
    support = operators.slot.size - 1
    fewest, patience = system.bit.size + 1, PATIENCE
    for _ in range(PIVOTS_PER_UNKNOWN * system.bit.size):
        slot = slot_of(operators, support)
        if slot < 0:
            return -1
        _evaluate(operators, slot, deviation, value)
        violated, _lowest = _judge(system.bit, -rounding, value)
        if violated == 0:
            return support
        support, fewest, patience = exchanged(support, violated, fewest, patience)
    return -1


@_step
def _compare_all(system: System, operators: Operators, deviation: Floats, value: Floats) -> int:
    """Return the usable support whose lowest constrained entry is highest, the first of equals; -1 for none."""
    best = -1
    best_lowest = -np.inf
    for support in range(operators.slot.size):
        slot = slot_of(operators, support)
        if slot >= 0:
            _evaluate(operators, slot, deviation, value)
            _violated, lowest = _judge(system.bit, 0.0, value)
            if lowest > best_lowest:
                best = support
                best_lowest = lowest
    return best


@_step
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
    slot = slot_of(operators, support)
    _evaluate(operators, slot, deviation, value)
    smaller = support
    for i in range(bit.size):
        if bit[i] & support and value[i] <= rounding:
            smaller ^= bit[i]
    if smaller == support or slot_of(operators, smaller) < 0:
        return support
    _evaluate(operators, slot_of(operators, smaller), deviation, value)
    _violated, lowest = _judge(bit, 0.0, value)
    if lowest >= -4 * rounding:
        return smaller
    _evaluate(operators, slot, deviation, value)
    return support


@_step
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


@_step
def _judge_block(system: System, operators: Operators, slot: int, block: Block, n: int, room: Room) -> None:
    """Do what ``_evaluate`` and ``_judge`` do, with the same bits, for the first ``n`` of a block."""
    bit, matrix, constant, deviation = system.bit, operators.matrix, operators.constant, block.deviation
    value, lowest, violated = room.value, room.lowest, room.violated
    for t in range(n):
        lowest[t] = np.inf
        violated[t] = 0
    for i in range(bit.size):
        own, k = bit[i], slot * bit.size + i
        start = constant[k]
        for t in range(n):
            value[i, t] = start
        _add(value, i, matrix, k, deviation, deviation.shape[0], n)
        if own:
            for t in range(n):
                lowest[t] = min(lowest[t], value[i, t])
                violated[t] |= own if value[i, t] < 0.0 else 0


@_step
def _answer_block(
    system: System, operators: Operators, slot: int, block: Block, n: int, room: Room, results: Results
) -> None:
    """Turn entries of the operator into unknowns: zero outside the support, never negative, the sum one.

    Then sum their squared misfits in standard uncertainties, and write the answers.
    """
    bit, design, uncertainty, n_summed = system.bit, system.design, system.uncertainty, system.n_summed
    deviation, value, misfit = block.deviation, room.value, room.misfit
    support, spare = operators.support[slot], bit.size  # spare is a row to work in
    for i in range(bit.size):
        if bit[i]:
            inside = bit[i] & support != 0
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
    for t in range(n):
        misfit[t] = 0.0
    for j in range(uncertainty.size):
        precision = 1.0 / uncertainty[j]
        for t in range(n):
            value[spare, t] = -deviation[j, t]
        _add(value, spare, design, j, value, bit.size, n)
        for t in range(n):
            misfit[t] += (value[spare, t] * precision) ** 2
    lowest, rows = room.lowest, block.row
    unknowns, chi_square, optimality, choice, status = results
    per_freedom, own_choice = operators.per_freedom[slot], operators.first_choice + slot
    for t in range(n):
        row = rows[t]
        for i in range(unknowns.shape[1]):
            unknowns[row, i] = value[i, t]
        chi_square[row] = misfit[t] * per_freedom
        optimality[row] = lowest[t]
        choice[row] = own_choice
        status[row] = _SOLVED


@_step
def _settle_alone(
    system: System, operators: Operators, block: Block, t: int, single: Block, room: Room, results: Results
) -> None:
    """Answer one sample of a block from that sample alone."""
    row, scale = block.row[t], block.scale[t]
    if scale == np.inf:
        results.status[row], results.choice[row] = _ABSURD, operators.first_choice - 1
        return
    single.row[0] = row
    deviation, value = room.deviation, room.entry
    for j in range(deviation.size):
        deviation[j] = single.deviation[j, 0] = block.deviation[j, t]
    support = _find_carefully(system, operators, deviation, _ROUNDING * scale, value)
    if support < 0 or _judge(system.bit, 0.0, value)[1] < -_FAILED * scale:
        results.status[row], results.choice[row] = _NOT_OPTIMAL, operators.first_choice - 1
        return
    slot = slot_of(operators, support)
    _judge_block(system, operators, slot, single, 1, room)
    _answer_block(system, operators, slot, single, 1, room, results)


@_step
def _settle(
    system: System, operators: Operators, support: int, block: Block, n: int, waiting: Waiting,
    room: Room, single: Block, alone: Room, results: Results,
) -> None:  # fmt: skip
    """Answer the first ``n`` of a block for which ``support`` is clearly optimal; put the others to wait.

    An optimum with a clear margin is unique, so it may be looked for from anywhere; any other is found
    from the sample alone. So the answer depends neither on the guess nor on the rest of the batch.
    """
    slot = slot_of(operators, support)
    if slot < 0:
        for t in range(n):
            _settle_alone(system, operators, block, t, single, alone, results)
        return
    _judge_block(system, operators, slot, block, n, room)
    value, lowest, violated = room.value, room.lowest, room.violated
    settled, other = room.settled, room.other
    deviation, rows, scale, tried = block
    n_settled = n_other = 0
    for t in range(n):
        clear = scale[t] < np.inf and lowest[t] >= _MARGIN * scale[t]
        settled[n_settled] = t
        n_settled += clear
        other[n_other] = t
        n_other += not clear

    next_row, next_tried, here, enough, n_enough = waiting
    n_wait = next_row.shape[1]
    for index in range(n_other):
        t = other[index]
        target = support ^ violated[t]
        place = here[target]
        if target == support or tried[t] == _QUICK or place == n_wait or scale[t] == np.inf:
            _settle_alone(system, operators, block, t, single, alone, results)
            continue
        next_row[target, place] = rows[t]
        next_tried[target, place] = tried[t] + 1
        here[target] = place + 1
        if 2 * (place + 1) == n_wait:
            enough[n_enough[0]] = target
            n_enough[0] += 1
    if n_settled < n:  # the settled move up
        for index in range(n_settled):
            rows[index], lowest[index] = rows[settled[index]], lowest[settled[index]]
        for j in range(deviation.shape[0]):
            for index in range(n_settled):
                deviation[j, index] = deviation[j, settled[index]]
        for i in range(value.shape[0] - 1):
            for index in range(n_settled):
                value[i, index] = value[i, settled[index]]
    _answer_block(system, operators, slot, block, n_settled, room, results)


@_step
def _load(
    observed: Floats, rows: Ints, position: int, n_taken: int, system: System, block: Block, largest: Floats
) -> int:
    """Take those of the next samples that have all used properties into a block; return how many.

    ``largest`` is room for the largest weighted deviations. An absurd sample has an infinite scale.
    """
    columns, reference, weight = system.columns, system.reference, system.weight
    reach, limit = system.reach, system.limit
    deviation, row, scale, tried = block
    n = n_taken
    for t in range(n):
        row[t] = rows[position + t] if rows.size else position + t
        tried[t] = 0
    for j in range(columns.size):
        column, middle = np.uint64(columns[j]), reference[j]
        for t in range(n):
            deviation[j, t] = observed[np.uint64(row[t]), column] - middle
        for t in range(n):
            tried[t] |= np.isnan(deviation[j, t])
    if tried[:n].any():
        n = 0
        for t in range(n_taken):
            for j in range(columns.size):
                deviation[j, n] = deviation[j, t]
            row[n] = row[t]
            n += not tried[t]
    largest[:n] = 0.0
    for j in range(columns.size):
        for t in range(n):
            largest[t] = max(largest[t], abs(deviation[j, t] * weight[j]))
    for t in range(n):
        scale[t] = 1.0 + reach * largest[t] if largest[t] <= limit else np.inf
        tried[t] = 0
    return n


@_step
def _settle_waiting(
    observed: Floats, system: System, operators: Operators, support: int, block: Block, waiting: Waiting,
    room: Room, single: Block, alone: Room, results: Results,
) -> None:  # fmt: skip
    """Settle those that wait for ``support``."""
    n = waiting.here[support]
    waiting.here[support] = 0
    _load(observed, waiting.row[support], 0, n, system, block, room.lowest)
    for t in range(n):
        block.tried[t] = waiting.tried[support, t]
    _settle(system, operators, support, block, n, waiting, room, single, alone, results)


@_compiled
def solve_rows(observed: Floats, rows: Ints, system: System, operators: Operators, results: Results) -> None:
    """Solve samples ``rows`` (n_row,) of ``observed`` (n_sample, n_property), C order; all where none is named.

    Those that lack a property of ``system`` are passed over.
    """
    n_used, n_unknown, n_support = system.columns.size, system.bit.size, operators.slot.size
    n_row = rows.size or observed.shape[0]
    n_block = min(_BLOCK, n_row)
    n_wait = max(_FEW, min(2 * _ENOUGH, _WAITING // n_support))
    n_room = max(n_block, n_wait) + _SKEW
    block = Block(
        np.empty((n_used, n_room)), np.empty(n_room, np.int64), np.empty(n_room), np.empty(n_room, np.int64)
    )
    single = Block(np.empty((n_used, 1)), np.empty(1, np.int64), np.empty(1), np.empty(1, np.int64))
    waiting = Waiting(
        np.empty((n_support, n_wait), np.int64), np.empty((n_support, n_wait), np.int64),
        np.zeros(n_support, np.int64), np.empty(n_support, np.int64), np.zeros(1, np.int64),
    )  # fmt: skip
    room = Room(
        np.empty((n_unknown + 1, n_room)), np.empty(n_room), np.empty(n_room, np.int64), np.empty(n_room),
        np.empty(n_room, np.int64), np.empty(n_room, np.int64), np.empty(n_used), np.empty(n_unknown),
    )  # fmt: skip
    alone = Room(
        np.empty((n_unknown + 1, 1)), np.empty(1), np.empty(1, np.int64), np.empty(1), np.empty(1, np.int64),
        np.empty(1, np.int64), np.empty(n_used), np.empty(n_unknown),
    )  # fmt: skip
    for position in range(0, n_row, n_block):
        n = _load(observed, rows, position, min(n_block, n_row - position), system, block, room.lowest)
        _settle(system, operators, n_support - 1, block, n, waiting, room, single, alone, results)
        while waiting.n_enough[0]:
            waiting.n_enough[0] -= 1
            support = waiting.enough[waiting.n_enough[0]]
            _settle_waiting(
                observed, system, operators, support, block, waiting, room, single, alone, results
            )
    while waiting.here.any():
        for support in range(n_support):
            if waiting.here[support]:
                waiting.n_enough[0] = 0  # all are visited
                _settle_waiting(
                    observed, system, operators, support, block, waiting, room, single, alone, results
                )
