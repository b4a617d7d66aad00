"""What the compiled walk over samples works on: named arrays, nothing that computes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Ints = NDArray[np.integer[Any]]
    Bools = NDArray[np.bool_]


class System(NamedTuple):
    """What samples with the same properties are fitted with."""

    columns: Ints  # (n_used,) properties
    reference: Floats  # (n_used,) what is subtracted
    weight: Floats  # (n_used,) what a deviation is multiplied with in the misfit that is minimised
    uncertainty: Floats  # (n_used,) standard
    design: Floats  # (n_used, n_unknown) what one of each unknown adds to a deviation
    bit: Ints  # (n_unknown,) bit in a support's number, 0 for a free unknown
    n_summed: int  # the first so many unknowns add up to one exactly; 0 where no sum is held
    reach: float  # how far the unknowns can go per weighted deviation
    limit: float  # largest weighted deviation that is not absurd


class Equations(NamedTuple):
    """The weighted system of which operators are made."""

    columns: Floats  # (n_unknown, n_equation) of the unknowns; past the properties, the row of a weighted sum
    sizes: Floats  # (n_unknown,) what the gradient of an unknown is divided by
    bit: Ints  # (n_unknown,) bit in a support's number, 0 for a free unknown
    n_summed: int  # the first so many unknowns add up to one exactly; 0 where no sum is held
    weight: Floats  # (n_used,) of the properties
    mass: float  # what the row of a weighted sum adds up to; 0 without one
    tolerance: float  # part of the strongest direction below which another counts as dependent


class Work(NamedTuple):
    """Room for the making of an operator."""

    P: Floats  # (n_unknown, n_unknown)
    Q: Floats  # (n_unknown, n_equation)
    start: Floats  # (1, n_unknown)
    at_start: Floats  # (1, n_equation)
    row: Floats  # (1, n_equation)


class Operators(NamedTuple):
    """The maps from deviations of the supports visited so far: row ``slot * n_unknown + i`` is of unknown i."""

    matrix: Floats  # (n_support * n_unknown, n_used) memory is taken as they are made
    constant: Floats  # (n_support * n_unknown,)
    per_freedom: Floats  # (n_support,) by slot: one over the degrees of freedom, NaN where there are none
    support: Ints  # (n_support,) by slot
    slot: Ints  # (n_support,) by support; negative where there is none
    n_made: Ints  # (1,)
    first_choice: int  # the choice of slot 0; the one before is of samples without an answer
    equations: Equations
    work: Work


class Results(NamedTuple):
    """What is written, a row per sample; the row of a sample without an answer is left but for its status."""

    unknowns: Floats  # (n_sample, n_unknown)
    chi_square: Floats  # (n_sample,) reduced
    optimality: Floats  # (n_sample,) lowest constrained entry: optimal where not negative but for rounding
    choice: NDArray[np.int32]  # (n_sample,)
    status: NDArray[np.int8]  # (n_sample,) a ``MixingStatus``


class Block(NamedTuple):
    """Samples beside one another."""

    deviation: Floats  # (n_used, n_room)
    row: Ints  # (n_room,)
    scale: Floats  # (n_room,)
    tried: Ints  # (n_room,) supports tried


class Waiting(NamedTuple):
    """Samples that wait for a support, per support."""

    row: Ints  # (n_support, n_wait)
    tried: Ints  # (n_support, n_wait)
    here: Ints  # (n_support,) how many wait
    enough: Ints  # (n_support,) supports for which enough wait,
    n_enough: Ints  # (1,) and how many these are


class Room(NamedTuple):
    """Room for what an operator says of a block."""

    value: Floats  # (n_unknown + 1, n_room) the last row is to work in
    lowest: Floats  # (n_room,) constrained entry
    violated: Ints  # (n_room,) bits of negative entries
    misfit: Floats  # (n_room,)
    settled: Ints  # (n_room,) places of samples for which the support is clearly optimal,
    other: Ints  # (n_room,) and of all others
    deviation: Floats  # (n_used,) of one sample, and
    entry: Floats  # (n_unknown,) what an operator makes of it
