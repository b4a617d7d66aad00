"""How far samples lie outside what their sources can mix to, and when that is more than noise.

Mixtures of the sources, with respiration, are the points that shares and amounts of allowed signs can make:
the mixing hull. A sample off it is fitted by the nearest point of it, where some bounds are active. Take the
bounds away, keep the sum of the shares, and the same equations have another optimum, in which some shares are
negative. The distance of a sample from the hull is that of the two fits,

    distance**2 = sum_j ((fitted with bounds - fitted without)_j / uncertainty_j)**2,

in standard uncertainties. With the default weights and the exact sum it is the chi-square that the bounds add:

    chi-square of the fit = chi-square without bounds (n_equation - n_unknown degrees of freedom)
                            + distance**2 (a degree of freedom for every active bound).

The first part is what no amounts of these sources explain, negative ones included: noise, or a property
that is off. The second has a direction in the space of the sources: a source that is missing there, or whose
value is off. The distance is therefore known even where no degrees of freedom are left for the first part.

**When a sample is outside.** Where its distance is beyond the ``mixing.hull_probability`` quantile of a chi
distribution with as many degrees of freedom as there are active bounds. If the true mixture is in the hull, and errors
are independent and normal with the stated uncertainties, then of all samples whose fit lies on the same face of
the hull no more than one less that probability are called outside, wherever in the hull the truth is: given the
direction from the face to the unbounded fit, the density of the distance r is proportional to
r**(k - 1) exp(-r**2 / 2 + r c) with k active bounds and c the part of the truth along that direction, and c is
never positive because the hull is convex; c = 0, the truth on the face itself, gives the chi distribution, and any
other truth smaller distances. This is the conditional test of inequality constraints (Wollan and Dykstra 1986,
from memory); without the condition the distribution would be a mixture of chi-squares whose weights are known
for few shapes (Kudo 1963, Biometrika 50:403; Silvapulle and Sen 2005, both from memory).

**Limits.** An error of a source is the same in all samples of all cruises, and here counts as if each sample had
its own: where a source is off by its uncertainty, a whole cruise may lie outside together, and that is worth being
told. Nothing is seen in directions that no combination of sources changes, nor of a missing water that lies within
the hull of the others. With weights other than one over the uncertainty, the distance has its meaning and the
quantile is a convention; with a weighted sum the sum takes up part of what is missing, and distances are smaller.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.operators import bits_of, everything, inside, operator_of
from pipeline.mixing.problem import equations_for, weighted_system
from pipeline.mixing.solver import groups
from pipeline.mixing.status import MixingStatus

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.solution import MixingSolution

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Hull:
    """Where samples lie against the mixing hull."""

    distance: FloatArray  # (n_sample,) in standard uncertainties, zero within; NaN where not solved
    active: IntArray  # (n_sample,) bounds that are active, 0 where not solved
    # The unknown that without bounds would be negative by the most of its standard uncertainties.
    side: IntArray  # (n_sample,) -1 where no bound is active

    def outside(self, probability: float) -> BoolArray:
        """Return which samples are outside by more than noise, (n_sample,).

        Parameters
        ----------
        probability
            With which noise alone leaves a sample closer to the hull.

        """
        from scipy.special import chdtri  # noqa: PLC0415 - it takes long to import

        limits = chdtri(np.arange(1, self.active.max(initial=1) + 1), 1 - probability)  # by bounds, few
        limit = limits[np.maximum(self.active, 1) - 1]
        return np.asarray((self.active > 0) & (self.distance**2 > limit))


def hull_of(solution: MixingSolution) -> Hull:
    """Return where the samples of a solution lie against the hull of its sources.

    As everything about a sample it depends on that sample alone, to the last bit.
    """
    from pipeline.mixing.hull_kernel import write_distances  # noqa: PLC0415 - numba takes long to import

    problem, status = solution.problem, solution.status
    solved = status == MixingStatus.SOLVED
    distance = np.where(solved, 0.0, np.nan)
    side = np.full(len(status), -1)
    bit = bits_of(problem.constrained)
    choices = solution.choices
    held = problem.n_unknown - inside(bit, choices.support).sum(axis=1)  # (n_choice,)
    active = np.where(solved, held[solution.choice], 0)
    beyond = np.flatnonzero(active > 0)
    for columns, rows in groups(solution.observed[beyond]):
        equations = equations_for(problem, weighted_system(problem, columns), columns)
        unbounded = operator_of(equations, everything(equations))
        if unbounded is None:  # possible only without a limit of the condition number
            distance[beyond[rows]] = np.nan
            continue
        own = problem.uncertainty[columns]
        write_distances(
            solution.observed,
            beyond[rows],
            columns,
            problem.reference,
            unbounded.matrix,
            unbounded.constant,
            bit,
            np.sqrt(((unbounded.matrix * own) ** 2).sum(axis=1)),
            np.ascontiguousarray(problem.design[:, columns] / own),
            solution.shares,
            solution.processes,
            distance,
            side,
        )
    return Hull(distance, active, side)
