"""Samples and problems that have no answer: each says why, and none harms its neighbours."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pytest

from pipeline.mixing.making import UNUSABLE
from pipeline.mixing.operators import no_operators
from pipeline.mixing.problem import MixingProblem
from pipeline.mixing.solver import solve
from pipeline.mixing.status import STATUS_WORDS, MixingStatus

from .invented import problem, random_problem, random_samples

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.blocks import Equations, Operators

RANDOM = np.random.default_rng(21)
OF = random_problem(RANDOM, n_source=4, n_property=6, signs=("non_negative",))
SAMPLES = random_samples(RANDOM, OF, 9)


def test_no_infinite_value_of_any_property_is_solved() -> None:
    for first in range(6):
        for second in range(6):
            for one, other in ((np.inf, np.inf), (np.inf, -np.inf), (-np.inf, -np.inf)):
                samples = SAMPLES.copy()
                samples[4, first], samples[4, second] = one, other
                assert solve(OF, samples).status[4] == MixingStatus.ABSURD, (first, second, one, other)


@pytest.mark.parametrize(
    ("value", "status"),
    [
        (np.inf, MixingStatus.ABSURD),
        (-np.inf, MixingStatus.ABSURD),
        (1e30, MixingStatus.ABSURD),
        (-1e300, MixingStatus.ABSURD),
        (np.nan, MixingStatus.SOLVED),  # five properties and the sum for five unknowns
    ],
)
def test_one_bad_value_concerns_one_sample(value: float, status: MixingStatus) -> None:
    samples = SAMPLES.copy()
    samples[4, 2] = value
    solution = solve(OF, samples)
    assert solution.status[4] == status
    others = np.arange(9) != 4
    clean = solve(OF, SAMPLES)
    np.testing.assert_array_equal(solution.shares[others], clean.shares[others])
    assert (solution.status[others] == MixingStatus.SOLVED).all()
    if status != MixingStatus.SOLVED:
        for name in (
            "shares",
            "processes",
            "share_uncertainty",
            "residuals",
            "reduced_chi_square",
            "optimality",
        ):
            assert np.isnan(getattr(solution, name)[4]).all(), name
        assert solution.support[4] == 0


def test_a_value_far_off_but_not_absurd_is_solved_and_unexplained() -> None:
    samples = SAMPLES.copy()
    samples[0] += 1e4 * OF.uncertainty
    solution = solve(OF, samples)
    assert solution.status[0] == MixingStatus.SOLVED
    assert solution.reduced_chi_square[0] > 1e4
    assert abs(solution.shares[0].sum() - 1) < 1e-15


@pytest.mark.parametrize("missing", [3, 4, 6])
def test_fewer_equations_than_unknowns(missing: int) -> None:
    samples = SAMPLES.copy()
    samples[3, :missing] = np.nan
    solution = solve(OF, samples)
    assert solution.status[3] == MixingStatus.INCOMPLETE
    assert np.isnan(solution.shares[3]).all()
    assert np.isnan(solution.condition_number[3])


def test_a_single_source_is_not_taken_for_granted_without_any_value() -> None:
    one = problem(np.array([[1.0, 2.0]]))
    solution = solve(one, np.array([[np.nan, np.nan], [1.5, 2.5]]))
    assert list(solution.status) == [MixingStatus.INCOMPLETE, MixingStatus.SOLVED]
    assert solution.shares[1, 0] == 1.0


@pytest.mark.parametrize("mass_weight", [None, 10.0])
@pytest.mark.parametrize("kind", ["duplicate", "collinear"])
def test_sources_that_cannot_be_told_apart_are_not_split_silently(
    kind: str, mass_weight: float | None
) -> None:
    sources = np.random.default_rng(5).normal(size=(4, 6))
    sources[3] = sources[0] if kind == "duplicate" else 0.3 * sources[0] + 0.7 * sources[1]
    solution = solve(problem(sources, 0.1, mass_weight=mass_weight), sources[:2])
    assert (solution.status == MixingStatus.UNDETERMINED).all()
    assert (solution.condition_number > 1e12).all()
    assert np.isnan(solution.shares).all()


def test_sources_that_only_a_missing_property_tells_apart() -> None:
    sources = np.random.default_rng(6).normal(size=(3, 5))
    sources[2, :4] = sources[1, :4]
    samples = np.repeat(sources.mean(axis=0)[None], 2, axis=0)
    samples[1, 4] = np.nan
    solution = solve(problem(sources, 0.1), samples)
    assert list(solution.status) == [MixingStatus.SOLVED, MixingStatus.UNDETERMINED]


def test_the_limit_of_the_condition_number_is_the_callers() -> None:
    condition = solve(OF, SAMPLES).condition_number[0]
    for limit, status in ((condition * 0.99, MixingStatus.UNDETERMINED), (condition, MixingStatus.SOLVED)):
        assert (solve(OF, SAMPLES, condition_limit=limit).status == status).all()


def test_dependent_sources_are_never_used_together_where_no_limit_is_set() -> None:
    sources = np.random.default_rng(8).normal(size=(3, 6))
    doubled = np.vstack([sources, sources[:1]])
    shares = np.random.default_rng(9).dirichlet(np.ones(3), 50)
    solution = solve(problem(doubled, 0.1), shares @ sources, condition_limit=np.inf)
    assert (solution.status == MixingStatus.SOLVED).all()
    assert ((solution.shares[:, 0] == 0) | (solution.shares[:, 3] == 0)).all()
    together = np.column_stack([solution.shares[:, 0] + solution.shares[:, 3], solution.shares[:, 1:3]])
    np.testing.assert_allclose(together, shares, rtol=0, atol=1e-12)


def test_a_process_that_does_nothing_leaves_no_support() -> None:
    of = problem(OF.sources, OF.uncertainty, processes=np.zeros((1, 6)), signs=("free",))
    assert (solve(of, SAMPLES).status == MixingStatus.UNDETERMINED).all()
    assert (solve(of, SAMPLES, condition_limit=np.inf).status == MixingStatus.NOT_OPTIMAL).all()


def test_an_answer_that_is_no_optimum_is_not_given(monkeypatch: pytest.MonkeyPatch) -> None:
    def first_source_only(equations: Equations, first_choice: int) -> Operators:
        operators = no_operators(equations, first_choice)
        operators.slot[np.arange(operators.slot.size) != 1] = UNUSABLE
        return operators

    monkeypatch.setattr("pipeline.mixing.solver.no_operators", first_source_only)
    solution = solve(problem(OF.sources, OF.uncertainty), OF.sources)
    assert list(solution.status) == [MixingStatus.SOLVED] + [MixingStatus.NOT_OPTIMAL] * 3
    assert np.isnan(solution.shares[1:]).all()


def test_no_samples_give_no_answers() -> None:
    solution = solve(OF, np.empty((0, 6)))
    assert solution.shares.shape == (0, 4)
    assert solution.residuals.shape == (0, 6)


def test_every_status_has_its_words() -> None:
    assert set(STATUS_WORDS) == set(MixingStatus)
    assert len(set(STATUS_WORDS.values())) == len(MixingStatus)


@pytest.mark.parametrize(
    ("changed", "words"),
    [
        ({"uncertainty": np.array([1.0, 0.0])}, "uncertainty has a value that is not positive"),
        ({"weight": np.array([1.0, np.inf])}, "weight has a value that is not finite"),
        ({"weight": np.ones(3)}, r"weight has shape \(3,\); expected \(2,\)"),
        ({"sources": np.ones(2)}, "sources has shape"),
        ({"sources": np.array([[1.0, np.nan]])}, "sources has a value that is not finite"),
        ({"signs": ("free",)}, r"processes has shape \(0, 2\); expected \(1, 2\)"),
        ({"mass_weight": -1.0}, "mass_weight is -1.0; expected a positive number"),
    ],
)
def test_what_is_no_problem_is_refused(changed: dict[str, Any], words: str) -> None:
    sound: dict[str, Any] = {
        "sources": np.array([[1.0, 2.0], [3.0, 1.0]]),
        "uncertainty": np.ones(2),
        "weight": np.ones(2),
        "processes": np.zeros((0, 2)),
    }
    with pytest.raises(ValueError, match=words):
        MixingProblem(**(sound | changed))


def test_samples_of_another_shape_are_refused() -> None:
    with pytest.raises(ValueError, match=r"observed has shape \(9, 5\); expected \(n_sample, 6\)"):
        solve(OF, SAMPLES[:, :5])


def test_a_problem_cannot_be_changed_from_outside() -> None:
    sources: NDArray[np.float64] = np.array([[1.0, 2.0], [3.0, 1.0]])
    of = problem(sources)
    sources[0, 0] = 99.0
    assert of.sources[0, 0] == 1.0
    with pytest.raises(ValueError, match="read-only"):
        of.sources[0, 0] = 99.0
