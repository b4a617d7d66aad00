"""The compiled part of the ensemble: repeatable normal numbers, and all members of one sample after another.

``ensemble`` imports it at its first use.
"""

from __future__ import annotations

from math import log, sqrt
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.mixing.blocks import Equations, Work
from pipeline.mixing.compiled import compiled as _compiled
from pipeline.mixing.compiled import inlined as _inlined
from pipeline.mixing.making import UNKNOWN, UNUSABLE, make_operator
from pipeline.mixing.pivoting import PATIENCE, PIVOTS_PER_UNKNOWN, exchanged

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Ints = NDArray[np.integer[Any]]
    Keys = NDArray[np.uint64]
    Bools = NDArray[np.bool_]

# Of what is compiled into this module from others, as in ``kernel``.
BUILT_FROM = "da2bf5328bdd2ce2"

# SplitMix64 (Steele, Lea and Flood 2014; constants from memory): a counter times the golden ratio, mixed.
_GOLDEN = np.uint64(0x9E3779B97F4A7C15)
_FIRST = np.uint64(0xBF58476D1CE4E5B9)
_SECOND = np.uint64(0x94D049BB133111EB)
_30, _27, _31, _12 = np.uint64(30), np.uint64(27), np.uint64(31), np.uint64(12)

_ROUNDING = 1e-10  # of the sample's largest weighted deviation: how far below zero is still zero
_ALIKE = 1e-14  # shares no further apart are equal
_RANKS = (0.16, 0.50, 0.84)


@_compiled
def _mixed(bits: np.uint64) -> np.uint64:
    """Return 64 bits, each of which depends on all of ``bits``."""
    bits = (bits ^ (bits >> _30)) * _FIRST
    bits = (bits ^ (bits >> _27)) * _SECOND
    return bits ^ (bits >> _31)


@_compiled
def _tail(q: float) -> float:
    """Return the normal deviate of probability 0.5 + ``q``, of which the absolute value is over 0.425."""
    r = sqrt(-log(0.5 - abs(q)))
    if r <= 5.0:
        r -= 1.6
        top = ((1.7023821103e-1 * r + 1.3067284816) * r + 2.7568153900) * r + 1.4234372777
        bottom = (1.2021132975e-1 * r + 7.3700164250e-1) * r + 1.0
    else:
        r -= 5.0
        top = ((1.7337203997e-2 * r + 4.2868294337e-1) * r + 3.0812263860) * r + 6.6579051150
        bottom = (1.2258202635e-2 * r + 2.4197894225e-1) * r + 1.0
    return top / bottom if q > 0.0 else -top / bottom


@_compiled
def _normals(key: np.uint64, numbers: Floats) -> None:
    """Fill ``numbers`` with independent standard normal numbers: the m-th depends on ``key`` and m alone.

    A uniform number of 52 bits, never 0 or 1, through the inverse of the normal distribution (Wichura
    1988, Applied Statistics 37:477-484, AS 241, the form of seven digits; coefficients from memory).
    """
    for m in range(numbers.size):
        bits = _mixed(key + np.uint64(m + 1) * _GOLDEN)
        numbers[m] = (np.float64(np.int64(bits >> _12)) + 0.5) * 2.0**-52 - 0.5
    for m in range(numbers.size):
        q = numbers[m]
        if abs(q) <= 0.425:
            r = 0.180625 - q * q
            top = ((5.9109374720e1 * r + 1.5929113202e2) * r + 5.0434271938e1) * r + 3.3871327179
            bottom = ((6.7187563600e1 * r + 7.8757757664e1) * r + 1.7895169469e1) * r + 1.0
            numbers[m] = q * top / bottom
        else:
            numbers[m] = _tail(q)


@_compiled
def normals(keys: Keys, numbers: Floats) -> None:
    """Fill row k of ``numbers``, (n_key, n_member), with the standard normal numbers of ``keys[k]``."""
    for k in range(keys.size):
        _normals(_mixed(keys[k]), numbers[k])


@_compiled
def _keep_operator(
    member: int, support: int, equations: Equations, work: Work, matrix: Floats, constant: Floats,
    slots: Ints, filled: Ints, room: Floats,
) -> None:  # fmt: skip
    """Make the operator of a member's support and keep it in ``room``, which is emptied when it is full.

    For deviations d of the properties, ``room[slot, :-1].T @ d + room[slot, -1]`` is what the operator makes
    of them. ``matrix`` (n_unknown, n_used) and ``constant`` (n_unknown,) are room to work in.
    """
    if filled[0] == room.shape[0]:
        slots[:] = UNKNOWN
        filled[0] = 0
    if not make_operator(equations, support, work, matrix, constant, 0):
        slots[member, support] = UNUSABLE
        return
    n_unknown, n_used = matrix.shape
    own = room[filled[0]]
    own[:] = 0.0
    for i in range(n_unknown):
        own[n_used, i] = constant[i]
        for j in range(n_used):
            own[j, i] = matrix[i, j]
    slots[member, support] = filled[0]
    filled[0] += 1


@_inlined
def _walk(
    member: int, support: int, bit: Ints, slots: Ints, room: Floats, deviations: Floats, rounding: float,
    value: Floats,
) -> int:  # fmt: skip
    """Pivot from ``support`` to the optimum of one member, its operator's entries in ``value``.

    Returns the support, or -1 where that leads nowhere, or less the support whose operator has to be made
    first and 2. It makes none itself, and is inlined: numba counts references to arrays that are handed on,
    which would cost as much as all the rest.
    """
    n_used, n_unknown = deviations.shape[0], bit.size
    fewest, patience = n_unknown + 1, PATIENCE
    for _ in range(PIVOTS_PER_UNKNOWN * n_unknown):
        slot = slots[member, support]
        if slot < 0:
            return -1 if slot == UNUSABLE else -2 - support
        for i in range(n_unknown):
            total = room[slot, n_used, i]
            for j in range(n_used):
                total += room[slot, j, i] * deviations[j, member]
            value[i] = total
        violated = 0
        for i in range(n_unknown):
            if bit[i] and value[i] < -rounding:
                violated |= bit[i]
        if violated == 0:
            return support
        support, fewest, patience = exchanged(support, violated, fewest, patience)
    return -1


@_compiled
def _percentiles(numbers: Floats, lots: Ints, ends: Ints, ordered: Floats, ranks: Floats) -> None:
    """Write the percentiles ``_RANKS`` into ``ranks``, linear between order statistics.

    The numbers are dealt into as many lots of equal width as there are numbers, lot after lot, and then
    few have to be moved. ``lots``, ``ends`` and ``ordered`` are room to work in.
    """
    n = numbers.size
    low = high = numbers[0]
    for m in range(1, n):
        low, high = min(low, numbers[m]), max(high, numbers[m])
    if not high - low > _ALIKE:
        ranks[:] = low
        return
    per_lot = (n - 1) / (high - low)
    ends[:] = 0
    for m in range(n):
        lots[m] = int((numbers[m] - low) * per_lot)
        ends[lots[m]] += 1
    for lot in range(1, n):
        ends[lot] += ends[lot - 1]
    for m in range(n):
        ends[lots[m]] -= 1
        ordered[ends[lots[m]]] = numbers[m]
    for m in range(1, n):
        number, k = ordered[m], m
        while k and ordered[k - 1] > number:
            ordered[k] = ordered[k - 1]
            k -= 1
        ordered[k] = number
    for r in range(ranks.size):
        position = _RANKS[r] * (n - 1)
        rank = min(int(position), n - 2)
        ranks[r] = ordered[rank] + (position - rank) * (ordered[rank + 1] - ordered[rank])


@_compiled
def _spread(numbers: Floats) -> float:
    """Return the standard deviation over the members, NaN for fewer than two."""
    if numbers.size < 2:
        return np.nan
    mean = 0.0
    for m in range(numbers.size):
        mean += numbers[m]
    mean /= numbers.size
    squares = 0.0
    for m in range(numbers.size):
        squares += (numbers[m] - mean) ** 2
    return sqrt(squares / (numbers.size - 1))


@_compiled
def run_rows(
    observed: Floats, rows: Ints, columns: Ints, keys: Keys, property_keys: Keys, absolute: Floats,
    relative: Floats, supports: Ints, leading: Ints,
    reference: Floats, systems: Floats, sizes: Floats, weight: Floats, bit: Ints, n_summed: int, mass: float,
    tolerance: float, carried: Floats, slots: Ints, filled: Ints, room: Floats,
    spread: Floats, percentiles: Floats, probability: Floats, carried_spread: Floats,
) -> None:  # fmt: skip
    """Solve every member of samples ``rows`` and write what their members show, the last four arguments.

    A member that leads nowhere is left out of its sample. Nothing of a sample depends on another.

    Parameters
    ----------
    observed
        (n_sample, n_property), C order; only ``columns`` are read, and they are finite.
    rows, columns
        Samples to treat (n_row,) and properties to use (n_used,), integers.
    keys, property_keys
        Of all samples (n_sample,) and of the used properties (n_used,).
    absolute, relative
        Parts of the measurement's standard uncertainty, (n_used,).
    supports, leading
        Of the unperturbed solution, (n_sample,): the support and the leading source.
    reference
        What is subtracted from each used property, (n_used, n_member).
    systems
        Weighted columns per member, (n_member, n_unknown, n_equation).
    sizes
        Of the columns, (n_member, n_unknown).
    weight, bit, n_summed, mass, tolerance
        As ``Equations`` has them.
    carried
        Value of further quantities in every source, (n_quantity, n_source, n_member).
    slots, filled, room
        The operators made so far: (n_member, n_support), (1,), (n_room, n_used + 1, n_lane).
    spread, percentiles, probability, carried_spread
        Written: (n_sample, n_unknown), (n_sample, 3, n_source), (n_sample,), (n_sample, n_quantity).

    """
    n_used, n_unknown = columns.size, bit.size
    n_quantity, n_source, n_member = carried.shape
    deviations, numbers = np.zeros((n_used, n_member)), np.zeros(n_member)
    unknowns, sums = np.zeros((n_unknown, n_member)), np.zeros((n_quantity, n_member))
    value, ranks, ordered = np.zeros(room.shape[2]), np.zeros(len(_RANKS)), np.zeros(n_member)
    lots, ends = np.zeros(n_member, np.int64), np.zeros(n_member, np.int64)
    n_equation = systems.shape[2]
    work = Work(
        np.empty((n_unknown, n_unknown)), np.empty((n_unknown, n_equation)), np.empty((1, n_unknown)),
        np.empty((1, n_equation)), np.empty((1, n_equation)),
    )  # fmt: skip
    matrix, constant = np.empty((n_unknown, n_used)), np.empty(n_unknown)
    for row in rows:
        largest = 1.0
        for j in range(n_used):
            middle = observed[row, columns[j]]
            size = sqrt(absolute[j] ** 2 + (relative[j] * middle) ** 2)
            _normals(_mixed(keys[row] ^ _mixed(property_keys[j])), numbers)
            for m in range(n_member):
                deviations[j, m] = middle - reference[j, m] + size * numbers[m]
                largest = max(largest, abs(deviations[j, m]) * weight[j])

        n = 0
        for m in range(n_member):
            rounding = _ROUNDING * largest
            support = -2
            while support < -1:
                support = _walk(m, supports[row], bit, slots, room, deviations, rounding, value)
                if support < -1:
                    own = Equations(systems[m], sizes[m], bit, n_summed, weight, mass, tolerance)
                    _keep_operator(m, -2 - support, own, work, matrix, constant, slots, filled, room)
            if support < 0:
                continue
            total = 0.0
            for i in range(n_unknown):
                if bit[i] and not (bit[i] & support and value[i] > 0.0):
                    value[i] = 0.0
                if i < n_summed:
                    total += value[i]
            for i in range(n_unknown):
                unknowns[i, n] = value[i] / total if i < n_summed else value[i]
            for q in range(n_quantity):
                sums[q, n] = 0.0
                for i in range(n_source):
                    sums[q, n] += unknowns[i, n] * carried[q, i, m]
            n += 1

        if n:
            leads = 0
            for m in range(n):
                highest = unknowns[leading[row], m]
                for i in range(n_source):
                    highest = max(highest, unknowns[i, m])
                leads += unknowns[leading[row], m] >= highest
            probability[row] = leads / n
        for q in range(n_quantity):
            carried_spread[row, q] = _spread(sums[q, :n])
        for i in range(n_unknown):
            spread[row, i] = _spread(unknowns[i, :n])
            if i < n_source and n:
                _percentiles(unknowns[i, :n], lots, ends[:n], ordered[:n], ranks)
                for r in range(ranks.size):
                    percentiles[row, r, i] = ranks[r]
