"""What a batch of samples is to be explained by, and the weighted system that follows from it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from pipeline.mixing.operators import RANK_TOLERANCE, equations_of, singular_values

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.blocks import Equations

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

Sign = Literal["non_negative", "free"]

MOST_PROPERTIES = 62  # a pattern of missing values is one integer


@dataclass(frozen=True, eq=False)
class MixingProblem:
    """What every sample of a batch is to be explained by.

    Parameters
    ----------
    sources
        Value of every property in every source, (n_source, n_property), in property units.
    uncertainty
        Standard uncertainty of a sample's misfit, measurement and sources together, (n_property,), in
        property units. Uncertainties of shares and chi-square are counted in it.
    weight
        What a misfit is multiplied with before it is squared, (n_property,), per property unit. One over
        the uncertainty makes the shares the most likely ones.
    processes
        Change of every property per unit of each further unknown, (n_process, n_property). Respiration
        is the first where there is any: umol/kg of each property per umol/kg of phosphate released. Calcium
        carbonate comes after it, in hundreds of umol/kg dissolved.
    signs
        Whether each process can only add or be of either sign, (n_process,).
    mass_weight
        None to hold the sum of the shares at one exactly; else the weight of one more row, in which
        their sum may miss one (published practice).

    Raises
    ------
    ValueError
        Where shapes do not fit, or a number is not finite, or not positive where it has to be.

    """

    sources: FloatArray
    uncertainty: FloatArray
    weight: FloatArray
    processes: FloatArray
    signs: tuple[Sign, ...] = ()
    mass_weight: float | None = None

    def __post_init__(self) -> None:
        """Take copies that cannot change, and refuse what is no problem."""
        if np.ndim(self.sources) != 2 or not 0 < np.shape(self.sources)[1] <= MOST_PROPERTIES:
            raise ValueError(f"sources has shape {np.shape(self.sources)}; expected (n_source, n_property)")
        n_source, n_property = np.shape(self.sources)
        for name, shape in (
            ("sources", (max(1, n_source), n_property)),
            ("uncertainty", (n_property,)),
            ("weight", (n_property,)),
            ("processes", (len(self.signs), n_property)),
        ):
            values = np.array(getattr(self, name), dtype=np.float64)
            if values.shape != shape:
                raise ValueError(f"{name} has shape {values.shape}; expected {shape}")
            if not np.isfinite(values).all():
                raise ValueError(f"{name} has a value that is not finite")
            if name in {"uncertainty", "weight"} and not (values > 0).all():
                raise ValueError(f"{name} has a value that is not positive")
            values.setflags(write=False)
            object.__setattr__(self, name, values)
        if self.mass_weight is not None and not 0 < self.mass_weight < np.inf:
            raise ValueError(f"mass_weight is {self.mass_weight}; expected a positive number")

    @property
    def n_unknown(self) -> int:
        """Shares and processes together."""
        return len(self.sources) + len(self.processes)

    @property
    def constrained(self) -> BoolArray:
        """Which unknowns can only be positive or zero, (n_unknown,)."""
        return np.array([True] * len(self.sources) + [sign == "non_negative" for sign in self.signs])

    @property
    def reference(self) -> FloatArray:
        """Mean of the sources, (n_property,): values are taken as deviations from it.

        With an exact sum that changes nothing but the rounding. With a weighted sum it is the centring
        of the published practice, by which the shares miss one only where a bound is active.
        """
        return np.asarray(self.sources.mean(axis=0))

    @property
    def design(self) -> FloatArray:
        """What one of each unknown adds to the deviation of each property, (n_unknown, n_property)."""
        return np.concatenate([self.sources - self.reference, self.processes])


@dataclass(frozen=True, eq=False)
class WeightedSystem:
    """The system that samples with the same properties are fitted with."""

    A: FloatArray  # (n_used, n_unknown), one row more where the sum is weighted
    constrained: BoolArray  # (n_unknown,)
    summed: BoolArray  # (n_unknown,)
    singular: FloatArray  # on the plane of the exact sum, from the largest down
    # Those of the properties alone, on the plane where shares change and their sum does not. Rows are centred, so
    # the row of a weighted sum adds one more, of its own direction and by no merit or fault of the sources.
    of_properties: FloatArray

    @property
    def condition_number(self) -> float:
        """Largest over smallest singular value of the properties; infinite where columns are dependent."""
        if self.of_properties.size == 0:  # one source and nothing else: the sum decides
            return 1.0
        smallest = float(self.of_properties[-1])
        # The row of the sum may be so heavy or so light that rounding would decide.
        apart = float(self.singular[-1]) > RANK_TOLERANCE * float(self.singular[0])
        return float(self.of_properties[0]) / smallest if smallest > 0 and apart else np.inf

    @property
    def reach(self) -> float:
        """How far the unknowns can go per unit of the weighted data, rounding aside."""
        if self.singular.size == 0 or self.singular[0] == 0:
            return 1.0
        return float(1 / max(self.singular[-1], RANK_TOLERANCE * self.singular[0]))


def weighted_system(problem: MixingProblem, columns: IntArray) -> WeightedSystem:
    """Return the system of the properties ``columns``, (n_used,).

    Every row is a property: what one of each unknown adds to it, as a deviation from the mean of the
    sources, times the property's weight. So a misfit of one over the weight costs the same in every row,
    and a property that is uncertain, or whose sources hardly differ for their uncertainty, counts little.
    With a weighted sum one more row says that the shares add up to one.
    """
    n_source = len(problem.sources)
    A = (problem.design[:, columns] * problem.weight[columns]).T
    is_share = np.arange(problem.n_unknown) < n_source
    of_properties = singular_values(A, is_share)
    if problem.mass_weight is None:
        return WeightedSystem(A, problem.constrained, is_share, of_properties, of_properties)
    A = np.vstack([A, is_share * problem.mass_weight])
    summed = np.zeros(problem.n_unknown, dtype=bool)
    return WeightedSystem(A, problem.constrained, summed, singular_values(A, summed), of_properties)


def equations_for(problem: MixingProblem, system: WeightedSystem, columns: IntArray) -> Equations:
    """Return the system of the properties ``columns`` as operators are made of it."""
    return equations_of(
        system.A, system.constrained, system.summed, problem.weight[columns], problem.mass_weight
    )
