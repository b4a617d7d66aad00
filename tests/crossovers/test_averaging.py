from __future__ import annotations

import numpy as np
import pytest

from pipeline.crossovers.averaging import StationPairs, mean_offset, weighted_mean

RANDOM = 20_261


def test_the_worked_weighted_mean() -> None:
    # Worked by hand from the formulas: D = 2, 1, 3 with s = 1, 0.5, 2.
    mean = weighted_mean(np.array([2.0, 1.0, 3.0]), np.array([1.0, 0.5, 2.0]))
    assert mean.value == pytest.approx(1.28571429, abs=5e-9)
    assert mean.independent == pytest.approx(0.43643578, abs=5e-9)
    assert mean.common == pytest.approx(0.66666667, abs=5e-9)


def crossed(
    random: np.random.Generator, n_one: int, n_other: int, *, place: int = 1, levels: int = 8,
    station_sd: float = 1.0, place_sd: float = 0.0, level_sd: float = 1.0, truth: float = 5.0,
) -> StationPairs:  # fmt: skip
    """Every station of a place of one cruise with every one of the other; levels share their stations' errors."""
    rows = []
    for g in range(place):
        of_place = place_sd * random.standard_normal()
        mine, theirs = (station_sd * random.standard_normal(n) for n in (n_one, n_other))
        ours, yours = (level_sd * random.standard_normal((n, levels)) for n in (n_one, n_other))
        for a in range(n_one):
            for b in range(n_other):
                d = truth + of_place + mine[a] - theirs[b] + ours[a] - yours[b]
                rows.append((d.mean(), d.var(ddof=1), levels, levels, g * n_one + a, g * n_other + b, g))
    columns = np.array(rows).T
    return StationPairs(columns[0], columns[1], *columns[2:].astype(np.int64))


def covered(n: int, presumed: float = 1.0, place_presumed: float = 0.0, **how: float) -> tuple[float, float]:
    """Return how often the truth lies within one and two stated uncertainties."""
    random = np.random.default_rng(RANDOM)
    ratios = []
    for _ in range(n):
        mean = mean_offset(crossed(random, **how), presumed, place_presumed)  # type: ignore[arg-type]
        ratios.append(abs(mean.value - 5.0) / mean.uncertainty)
    return float(np.mean(np.array(ratios) <= 1)), float(np.mean(np.array(ratios) <= 2))


@pytest.mark.parametrize(
    "how",
    [
        {"n_one": 1, "n_other": 1},
        {"n_one": 2, "n_other": 5},
        {"n_one": 7, "n_other": 7},
        {"n_one": 3, "n_other": 3, "place": 6},
        {"n_one": 3, "n_other": 3, "place": 8, "place_sd": 1.5},
        {"n_one": 4, "n_other": 4, "levels": 30, "level_sd": 0.3},
    ],
    ids=str,
)
def test_the_truth_lies_within_the_uncertainty_as_often_as_it_should(how: dict[str, float]) -> None:
    one, two = covered(600, **how)
    assert 0.62 < one < 0.76  # 68.3 % of a normal error; binomial standard error 1.9 %
    assert 0.91 < two < 0.985


def test_levels_and_pairs_counted_as_independent_would_claim_far_too_much() -> None:
    random = np.random.default_rng(RANDOM)
    naive, honest = 0, 0
    for _ in range(300):
        pairs = crossed(random, 5, 5)
        mean = weighted_mean(pairs.offset, np.sqrt(pairs.variance / pairs.levels))
        naive += abs(mean.value - 5.0) <= mean.independent
        found = mean_offset(pairs, 1.0, 0.0)
        honest += abs(found.value - 5.0) <= found.uncertainty
    assert naive < 100  # of 300: under a third, where two thirds are claimed
    assert 180 < honest < 230


def test_what_is_presumed_wrongly_is_overruled_by_many_stations() -> None:
    random = np.random.default_rng(RANDOM)
    pairs = crossed(random, 20, 20, station_sd=1.0)
    assert mean_offset(pairs, 0.01, 0.0).between_stations == pytest.approx(1.0, rel=0.35)
    assert mean_offset(pairs, 10.0, 0.0).between_stations < 3.0


def test_places_that_disagree_widen_the_uncertainty_and_agreement_never_narrows_what_is_presumed() -> None:
    random = np.random.default_rng(RANDOM)
    apart = mean_offset(crossed(random, 3, 3, place=8, place_sd=6.0), 1.0, 0.5)
    assert apart.between_places > 3.0
    assert apart.uncertainty > 0.8 * apart.between_places / np.sqrt(8)
    alike = mean_offset(crossed(random, 3, 3, place=1), 1.0, 0.5)
    assert alike.between_places == 0.5
    assert alike.uncertainty > 0.5


def test_swapping_the_cruises_changes_the_sign_alone() -> None:
    pairs = crossed(np.random.default_rng(RANDOM), 3, 4, place=2)
    back = StationPairs(
        -pairs.offset,
        pairs.variance,
        pairs.levels,
        pairs.independent,
        pairs.other,
        pairs.station,
        pairs.place,
    )
    one, other = mean_offset(pairs, 1.0, 0.5), mean_offset(back, 1.0, 0.5)
    assert one.value == pytest.approx(-other.value)
    assert one.uncertainty == pytest.approx(other.uncertainty)


def test_the_order_of_pairs_does_not_matter() -> None:
    pairs = crossed(np.random.default_rng(RANDOM), 3, 4, place=3)
    order = np.random.default_rng(1).permutation(len(pairs.offset))
    mixed = StationPairs(*(getattr(pairs, name)[order] for name in StationPairs.__slots__))
    one, other = mean_offset(pairs, 1.0, 0.5), mean_offset(mixed, 1.0, 0.5)
    assert (one.value, one.uncertainty) == pytest.approx((other.value, other.uncertainty), rel=1e-12)


def test_the_uncertainty_is_that_of_the_whole_covariance_matrix() -> None:
    pairs = crossed(np.random.default_rng(RANDOM), 3, 2, place=2)
    mean = mean_offset(pairs, 1.0, 0.5)
    of_level = (2.0 + (pairs.levels - 1) * pairs.variance) / (2.0 + pairs.levels - 1)
    covariance = mean.between_places**2 * np.equal.outer(pairs.place, pairs.place)
    for column in (pairs.station, pairs.other):
        of_station = np.array([(of_level / pairs.independent)[column == c].mean() / 2 for c in column])
        covariance = covariance + np.equal.outer(column, column) * (mean.between_stations**2 + of_station)
    assert mean.weights.sum() == pytest.approx(1.0)
    assert mean.value == pytest.approx(mean.weights @ pairs.offset)
    assert mean.uncertainty**2 == pytest.approx(mean.weights @ covariance @ mean.weights)


def test_one_pair_of_one_level_is_no_division_by_zero() -> None:
    one = np.array([0], dtype=np.int64)
    mean = mean_offset(StationPairs(np.array([3.0]), np.zeros(1), one + 1, one + 1, one, one, one), 1.0, 0.5)
    assert mean.value == 3.0
    assert mean.uncertainty == pytest.approx(np.sqrt(0.25 + 2.0 + 1.0))


def test_offsets_without_any_scatter_and_nothing_presumed() -> None:
    pairs = crossed(np.random.default_rng(RANDOM), 3, 3, station_sd=0.0, level_sd=0.0)
    mean = mean_offset(pairs, 0.0, 0.0)
    assert mean.value == pytest.approx(5.0)
    assert mean.uncertainty == pytest.approx(0.0, abs=1e-9)
