from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pytest

from pipeline.mixing import ensemble, resolve
from pipeline.mixing.ensemble import run_ensemble
from pipeline.mixing.entries import Catalogue, Covariance
from pipeline.mixing.members import Noise, keys_of, measurement_noise, perturbed_sources
from pipeline.mixing.problem import MixingProblem
from pipeline.mixing.solver import solve
from pipeline.mixing.status import MixingStatus
from pipeline.problems import SettingsProblem
from pipeline.settings import MixingSettings, Settings, read_settings
from tests.coverage import cases_of, within

from .catalogues import catalogue
from .invented import random_problem, random_samples
from .test_analysis import mixed, samples
from .test_members import drawn, mixed_slowly

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.ensemble import Ensemble
    from pipeline.mixing.problem import Sign

    FloatArray = NDArray[np.float64]

NAMES = ("share_uncertainty", "process_uncertainty", "share_percentiles", "leading_probability",
         "carried_uncertainty")  # fmt: skip


def settings(**mixing: Any) -> Settings:
    return Settings(mixing=MixingSettings(**mixing))


def _twin(
    problem: MixingProblem, observed: FloatArray, noise: Noise, sources: FloatArray, carried: FloatArray,
    leading: NDArray[np.int64],
) -> dict[str, FloatArray]:  # fmt: skip
    """Solve one member after the other with the solver of unperturbed samples."""
    n_member = len(sources)
    uncertainty = np.hypot(noise.absolute, noise.relative * observed)
    unknowns, brought = [], []
    perturbation = np.stack(
        [drawn(noise.keys ^ _mixed_keys(key), n_member) for key in noise.property_keys], axis=1
    )  # (n_sample, n_property, n_member)
    for m in range(n_member):
        member = MixingProblem(
            sources=sources[m],
            uncertainty=problem.uncertainty,
            weight=problem.weight,
            processes=problem.processes,
            signs=problem.signs,
            mass_weight=problem.mass_weight,
        )
        solution = solve(member, observed + uncertainty * perturbation[:, :, m], condition_limit=1e12)
        unknowns.append(np.hstack([solution.shares, solution.processes]))
        brought.append(solution.shares @ carried[m])
    found = np.array(unknowns)  # (n_member, n_sample, n_unknown)
    n_source = sources.shape[1]
    shares = found[:, :, :n_source]
    spread = found.std(axis=0, ddof=1)
    own = np.take_along_axis(shares, leading[None, :, None], axis=2)[:, :, 0]
    return {
        "share_uncertainty": spread[:, :n_source],
        "process_uncertainty": spread[:, n_source:],
        "share_percentiles": np.percentile(shares, [16, 50, 84], axis=0).transpose(1, 0, 2),
        "leading_probability": (own >= shares.max(axis=2)).mean(axis=0),
        "carried_uncertainty": np.array(brought).std(axis=0, ddof=1),
    }


def _mixed_keys(key: np.uint64) -> np.uint64:
    return np.uint64(mixed_slowly(int(key)))


@pytest.mark.parametrize(
    ("n_source", "n_property", "signs", "mass_weight"),
    [
        (3, 4, (), None),
        (3, 5, ("non_negative",), None),
        (5, 6, ("non_negative",), None),
        (4, 6, ("free",), None),
        (3, 6, ("non_negative", "free"), None),
        (4, 5, (), 20.0),
        (4, 6, ("non_negative",), 20.0),
        (1, 3, (), None),
        (8, 10, ("non_negative",), None),
    ],
)
def test_members_are_those_of_solving_one_after_the_other(
    n_source: int, n_property: int, signs: tuple[Sign, ...], mass_weight: float | None
) -> None:
    random = np.random.default_rng(n_source + 10 * n_property)
    problem = random_problem(
        random, n_source=n_source, n_property=n_property, signs=signs, mass_weight=mass_weight
    )
    observed = random_samples(random, problem, 40)
    if n_property > n_source + len(signs):
        observed[::7, 1] = np.nan
    solution = solve(problem, observed)
    assert (solution.status == MixingStatus.SOLVED).all()
    noise = Noise(
        keys_of(f"{i}" for i in range(40)),
        keys_of(f"property {j}" for j in range(n_property)),
        absolute=0.5 * problem.uncertainty,
        relative=np.full(n_property, 0.001),
    )
    n_member = 30
    sources = problem.sources + random.normal(size=(n_member, *problem.sources.shape)) * problem.uncertainty
    carried = random.normal(size=(n_member, n_source, 2))
    leading = solution.shares.argmax(axis=1)
    found = run_ensemble(problem, observed, solution.support, leading, noise, sources, carried)
    expected = _twin(problem, observed, noise, sources, carried, leading)
    for name, values in expected.items():
        np.testing.assert_allclose(getattr(found, name), values, rtol=1e-7, atol=1e-8, err_msg=name)


def _many(n: int = 60, seed: int = 3) -> tuple[MixingProblem, FloatArray, NDArray[np.uint64], Catalogue]:
    random = np.random.default_rng(seed)
    problem = random_problem(random, n_source=4, n_property=6, signs=("non_negative",))
    observed = random_samples(random, problem, n)
    observed[::5, 2] = np.nan
    return problem, observed, keys_of(f"{i}" for i in range(n)), catalogue()


def _run(
    problem: MixingProblem, observed: FloatArray, keys: NDArray[np.uint64], members: int = 50
) -> Ensemble:
    random = np.random.default_rng(8)
    solution = solve(problem, observed)
    sources = problem.sources + random.normal(size=(members, *problem.sources.shape)) * problem.uncertainty
    noise = Noise(keys, keys_of("abcdef"), problem.uncertainty, np.zeros(6))
    leading = solution.shares.argmax(axis=1)
    return run_ensemble(problem, observed, solution.support, leading, noise, sources, sources[:, :, :1])


def _assert_same_bits(one: Ensemble, other: Ensemble, rows: Any = slice(None)) -> None:
    for name in NAMES:
        np.testing.assert_array_equal(getattr(one, name)[rows], getattr(other, name), err_msg=name)


def test_order_and_batches_change_no_bit() -> None:
    problem, observed, keys, _ = _many()
    whole = _run(problem, observed, keys)
    order = np.random.default_rng(1).permutation(len(keys))
    _assert_same_bits(whole, _run(problem, observed[order], keys[order]), order)
    for part in (slice(0, 1), slice(1, 20), slice(20, None)):
        ensemble.forget_operators()
        _assert_same_bits(whole, _run(problem, observed[part], keys[part]), part)


def test_threads_change_no_bit() -> None:
    problem, observed, keys, _ = _many(400)
    whole = _run(problem, observed, keys)
    ensemble.forget_operators()
    parts = [slice(i, i + 50) for i in range(0, 400, 50)]
    with ThreadPoolExecutor(2) as pool:
        for part, found in zip(
            parts, pool.map(lambda part: _run(problem, observed[part], keys[part]), parts), strict=True
        ):
            _assert_same_bits(whole, found, part)


def test_little_room_for_operators_changes_no_bit(monkeypatch: pytest.MonkeyPatch) -> None:
    problem, observed, keys, _ = _many()
    whole = _run(problem, observed, keys)
    ensemble.forget_operators()
    monkeypatch.setattr(ensemble, "_ROOM", 60 * 7 * 8 * 8)
    _assert_same_bits(whole, _run(problem, observed, keys))
    ensemble.forget_operators()


def test_operators_kept_for_the_next_cruise_are_bounded(monkeypatch: pytest.MonkeyPatch) -> None:
    ensemble.forget_operators()
    problem, observed, keys, _ = _many()
    _run(problem, observed, keys)
    assert ensemble.operators_kept() > 0
    monkeypatch.setattr(ensemble, "_KEPT", 0)
    _run(problem, observed, keys)
    assert ensemble.operators_kept() == 0


def test_rows_of_a_table_in_any_order_give_the_same() -> None:
    rows = [mixed(share, 0.1, oxygen=oxygen) for share in (0.2, 0.5, 0.9) for oxygen in (None, 240.0, 270.0)]
    table = samples(*rows)
    whole = resolve(table, catalogue(), settings())
    order = np.array([4, 8, 0, 3, 1, 7, 2, 6, 5])
    other = resolve(table.take(pa.array(order)), catalogue(), settings())
    for name, values in whole.columns.items():
        np.testing.assert_array_equal(values[order], other.columns[name], err_msg=name)
    key = [("sample", "ascending"), ("source", "ascending")]
    assert whole.mixtures.sort_by(key).equals(other.mixtures.sort_by(key))


def test_seeds_differ_and_the_same_seed_repeats() -> None:
    table = samples(mixed(0.6, 0.2))
    one, same, other = (resolve(table, catalogue(), settings(seed=seed)) for seed in (1, 1, 2))
    assert one.mixtures.equals(same.mixtures)
    assert one.columns["leading_share_uncertainty"] != other.columns["leading_share_uncertainty"]
    assert one.columns["leading_share"] == other.columns["leading_share"], "shares are the unperturbed ones"


def _interior(**mixing: Any) -> tuple[Any, Any]:
    answer = resolve(samples(mixed(0.6, 0.3)), catalogue(), settings(**mixing))
    return answer.columns, answer.mixtures.to_pydict()


def _first_order(of: Catalogue, north: float) -> float:
    """Return the standard uncertainty of the share of the first of two sources, spelled out."""
    chosen = of.set[0]
    sources = [of.sources[code] for code in chosen.sources]
    values = np.array([[s.properties[n].value for n in chosen.properties] for s in sources])
    spread = np.array([[s.properties[n].uncertainty for n in chosen.properties] for s in sources])
    respired = np.array([0.0, 0.0, -170.0, 1.0, 16.0])
    shares = np.array([north, 1 - north])
    sample = shares @ values + 0.3 * respired
    parts = np.array([[0.002, 0.0], [0.002, 0.0], [0.0, 0.01], [0.0, 0.02], [0.0, 0.02]])
    measured = np.hypot(parts[:, 0], parts[:, 1] * sample)
    middle = np.hypot(parts[:, 0], parts[:, 1] * values.mean(axis=0))
    weight = 1 / np.sqrt(middle**2 + (spread**2).mean(axis=0))
    A = np.column_stack([values[0] - values[1], respired]) * weight[:, None]
    operator = np.linalg.pinv(A)[0] * weight
    covariance = np.diag(measured**2) + sum(
        f**2 * s.covariance_of(chosen.properties) for f, s in zip(shares, sources, strict=True)
    )
    return float(np.sqrt(operator @ covariance @ operator))


def test_the_spread_of_an_interior_sample_is_that_of_first_order() -> None:
    """The standard deviation of 100 members is known to 7 %, of 4000 to 1.1 %."""
    expected = _first_order(catalogue(), 0.6)
    assert _interior()[1]["share_uncertainty"][0] == pytest.approx(expected, rel=0.2)
    assert _interior(members=4000)[1]["share_uncertainty"][0] == pytest.approx(expected, rel=0.035)


def test_a_covariance_counts() -> None:
    of = catalogue()
    plain = _first_order(of, 0.6)
    sources = []
    for source in of.source:
        own = np.array([source.properties[n].uncertainty for n in of.set[0].properties])
        # warm errors are salty errors
        together = np.eye(5)
        together[0, 1] = together[1, 0] = 0.95
        given = together * np.outer(own, own)
        matrix = tuple(tuple(map(float, row)) for row in given)
        covariance = Covariance(properties=of.set[0].properties, matrix=matrix)
        sources.append(source.model_copy(update={"covariance": covariance}))
    correlated = of.model_copy(update={"source": tuple(sources)})
    expected = _first_order(correlated, 0.6)
    assert abs(expected / plain - 1) > 0.15, "else this test says nothing"
    found = resolve(samples(mixed(0.6, 0.3)), correlated, settings(members=4000))
    assert found.mixtures.column("share_uncertainty")[0].as_py() == pytest.approx(expected, rel=0.035)
    chosen = correlated.set[0]
    off = perturbed_sources(correlated, chosen, chosen.properties, seed=1, members=4000)
    for own in off.transpose(1, 2, 0):
        correlation = np.asarray(np.corrcoef(own))
        assert correlation[0, 1] == pytest.approx(0.95, abs=0.01)
        assert abs(correlation[0, 2]) < 0.06


def test_percentiles_are_in_order_and_the_median_is_near_the_share() -> None:
    columns, mixtures = _interior()
    low, middle, high = (np.array(mixtures[f"share_p{p}"]) for p in (16, 50, 84))
    share, spread = np.array(mixtures["share"]), np.array(mixtures["share_uncertainty"])
    assert (low < middle).all()
    assert (middle < high).all()
    assert (abs(middle - share) < 0.5 * spread).all()
    np.testing.assert_allclose((high - low) / 2, spread, rtol=0.35)
    assert columns["leading_probability"][0] == 1.0
    assert columns["respiration_uncertainty"][0] > 0


def test_the_leading_source_of_an_even_mixture_leads_in_half_of_the_members() -> None:
    found = resolve(samples(mixed(0.5001, 0.3)), catalogue(), settings(members=2000))
    assert found.columns["leading_probability"][0] == pytest.approx(0.5, abs=0.05)
    assert found.columns["leading_source"][0] == "NOR"


def test_without_members_the_uncertainty_is_that_of_first_order() -> None:
    columns, mixtures = _interior(members=0)
    assert mixtures["share_uncertainty"][0] > 0
    assert mixtures["share_p16"] == mixtures["share_p50"] == mixtures["share_p84"] == [None, None]
    assert np.isnan(columns["leading_probability"][0])
    assert columns["respiration_uncertainty"][0] > 0
    assert columns["leading_share_uncertainty"][0] == mixtures["share_uncertainty"][0]


def test_without_members_a_share_that_a_bound_holds_has_no_uncertainty() -> None:
    beyond = resolve(samples(mixed(1.4)), catalogue(), settings(members=0))
    assert beyond.mixtures.column("share").to_pylist() == [1.0, 0.0]
    assert beyond.mixtures.column("share_uncertainty").to_pylist() == [None, None]
    for name in ("leading_share_uncertainty", "oxygen_from_sources_uncertainty"):
        assert np.isnan(beyond.columns[name][0]), name
    unrespired = resolve(samples(mixed(0.6, -0.5)), catalogue(), settings(members=0)).columns
    assert unrespired["respiration"][0] == 0.0
    for name in ("respiration_uncertainty", "oxygen_from_respiration_uncertainty"):
        assert np.isnan(unrespired[name][0]), name
    assert unrespired["leading_share_uncertainty"][0] > 0


@pytest.mark.parametrize("members", [-1, 1, 9, 10_001, 20.5])
def test_an_ensemble_too_small_to_have_percentiles_is_refused(members: float) -> None:
    with pytest.raises(SettingsProblem) as refusal:
        read_settings(None, {"SEAWHENCE_MIXING__MEMBERS": str(members)})
    assert str(refusal.value) == (
        f"the environment variable SEAWHENCE_MIXING__MEMBERS: 'mixing.members' is {members}; expected 0 for "
        "first-order uncertainty, or a whole number from 10 to 10000; correct it."
    )
    assert settings(members=10).mixing.members == 10


def test_measurement_uncertainty_of_a_cruise_stands_in_place_of_the_usual() -> None:
    usual = _interior()[1]["share_uncertainty"][0]
    poor = _interior(uncertainty={"conservative_temperature": 1.0, "preformed_salinity": 0.5})
    assert poor[1]["share_uncertainty"][0] > 1.5 * usual
    noise = measurement_noise(keys_of("a"), ["oxygen", "po4_star"], {"oxygen": 2.0})
    np.testing.assert_array_equal(noise.absolute, [2.0, 0.0])
    np.testing.assert_array_equal(noise.relative, [0.0, 0.0])


def test_bad_rows_never_raise_and_harm_no_other() -> None:
    good = mixed(0.6, 0.2)
    bad = [mixed(0.6, oxygen=value) for value in (np.inf, -np.inf, 1e30, np.nan)]
    bad += [mixed(0.6, oxygen=4e6), dict.fromkeys(good), mixed(0.6, sample=None, line=None, station=None)]
    table = samples(good, *bad)
    found = resolve(table, catalogue(), settings())
    alone = resolve(table.slice(0, 1), catalogue(), settings())
    assert found.mixtures.slice(0, 2).equals(alone.mixtures)
    solved = found.columns["mixing_status"] == "solved"
    np.testing.assert_array_equal(np.isfinite(found.columns["leading_probability"]), solved)
    assert solved[0]
    assert not solved[1:4].any()
    nothing = resolve(table.slice(0, 0), catalogue(), settings())
    assert nothing.mixtures.num_rows == 0


def test_the_truth_is_as_far_away_as_the_uncertainty_says() -> None:
    """The large version, over more draws and oceans, is ``python -m tests.coverage``."""
    cases = cases_of("three or four random sources", draws=80, samples=25)
    assert (cases.kind == 0).sum() > 3000
    assert 0.63 < within(cases, 0, 1.0)[0] < 0.73
    assert 0.93 < within(cases, 0, 2.0)[0] < 0.97
