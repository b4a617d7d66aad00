"""The mean offset of two cruises from their pairs of stations, and how well it is known: arrays in, arrays out."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

LEAST_VARIANCE = 1e-30  # keeps weights finite where nothing scatters and nothing is presumed
PRESUMED = 2.0  # observations that what is presumed of a standard deviation counts as (our choice, no source)


@dataclass(frozen=True, slots=True)
class Mean:
    """A weighted mean and its standard uncertainty in the two forms of the literature."""

    value: float
    independent: float  # errors of the values have nothing to do with each other
    common: float  # errors of the values are one and the same


def weighted_mean(values: FloatArray, uncertainties: FloatArray) -> Mean:
    """Return the mean of values that weigh by their inverse variance.

    The forms are the two ends of what correlation can do: sqrt(1 / sum(1/s^2)) holds for errors that are
    independent, and sum(1/s) / sum(1/s^2) is what the same weights give for errors that are wholly
    correlated; it does not fall with the number of values.

    Parameters
    ----------
    values, uncertainties
        (n,) each, uncertainties above zero.

    References
    ----------
    Becker et al. 2016, ESSD 8:559, eq. 2 (the mean; both uncertainties from memory).

    """
    weights = 1 / uncertainties**2
    total = weights.sum()
    return Mean(
        float((values * weights).sum() / total),
        float(np.sqrt(1 / total)),
        float((1 / uncertainties).sum() / total),
    )


@dataclass(frozen=True, slots=True)
class StationPairs:
    """What pairs of stations say of two cruises; arrays are (n_pair,)."""

    offset: FloatArray  # mean over the levels of the pair
    variance: FloatArray  # of the offset over the levels; zero where there is one
    levels: IntArray
    independent: IntArray  # levels that are independent, at most
    station: IntArray  # numbers from 0
    other: IntArray
    place: IntArray

    def __post_init__(self) -> None:
        """Hold columns of one length."""
        assert len({len(getattr(self, name)) for name in self.__slots__}) == 1  # noqa: S101 - a shape


@dataclass(frozen=True, slots=True)
class Offset:
    """The offset of two cruises and the standard deviations that its uncertainty was made from."""

    value: float
    uncertainty: float
    weights: FloatArray  # of the pairs, (n_pair,), sum one
    between_stations: float
    between_places: float


def mean_offset(pairs: StationPairs, station_sd: float, place_sd: float) -> Offset:
    """Return the weighted mean offset of two cruises with an uncertainty that knows what errors pairs share.

    An offset of stations a and b in place g is taken as

        d_ab = D + w_g + (u_a + e_a) - (u_b + e_b)

    with independent deviations of the place, w (what the ocean itself has changed by), and of both stations:
    u, what a cast has in common (calibration, eddies), and e, what the mean over its levels keeps of the errors
    of single samples. Neither form of ``weighted_mean`` fits: with the first, 49 pairs of seven stations and
    seven would count as 49 observations, and with the second as one. With weights p_ab of sum one the
    variance is

        sw^2 sum_g (sum_(ab in g) p_ab)^2 + sum_a (su^2 + se_a^2) (sum_b p_ab)^2 + sum_b (su^2 + se_b^2) (sum_a p_ab)^2

    Pairs of more scatter weigh less, and so do places that are known less well. se^2 comes from the scatter
    over levels, of which as many count as the sparser profile has of its own. su^2 is found by equating the
    scatter of offsets within places with its expectation, joined with what is presumed of it as if two
    observations had said so, since a few stations cannot tell; sw^2 likewise between places, never below
    what is presumed.

    Parameters
    ----------
    pairs
        At least one.
    station_sd, place_sd
        What is presumed of the deviations of stations, which is taken for those of single levels too, and of
        places; in the unit of the offsets.

    References
    ----------
    DerSimonian and Laird 1986, Control. Clin. Trials 7:177, for sw^2 (from memory).

    """
    freedom = pairs.levels - 1.0
    of_level = (PRESUMED * station_sd**2 + freedom * pairs.variance) / (PRESUMED + freedom)
    of_pair = of_level / pairs.independent  # se_a^2 + se_b^2, (n_pair,)
    ends = [_Ends.of(column, pairs.place, of_pair) for column in (pairs.station, pairs.other)]
    station = _station_variance(pairs, ends, station_sd)
    weights = 1 / (of_pair + 2 * station + LEAST_VARIANCE)
    within = weights / np.bincount(pairs.place, weights)[pairs.place]  # sum one in every place
    means = np.asarray(np.bincount(pairs.place, within * pairs.offset), dtype=np.float64)
    known = np.full(len(means), LEAST_VARIANCE)
    for end in ends:
        known += np.bincount(end.place, end.squares(within) * (station + end.variance))
    place = _place_variance(means, known, place_sd)
    of_place = 1 / (known + place)
    weights = within * (of_place / of_place.sum())[pairs.place]
    variance = place * float((np.bincount(pairs.place, weights) ** 2).sum())
    for column in (pairs.station, pairs.other):  # a station counts once, in whatever places its pairs lie
        share = np.bincount(column, weights)
        variance += float((share**2 * (station + _of_station(column, of_pair))).sum())
    return Offset(
        weighted_mean(means, np.sqrt(known + place)).value,
        float(np.sqrt(variance)),
        weights,
        float(np.sqrt(station)),
        float(np.sqrt(place)),
    )


@dataclass(frozen=True, slots=True)
class _Ends:
    """The stations of one cruise, once for every place that they have pairs in: (n_end,)."""

    of_pair: IntArray  # (n_pair,)
    place: IntArray
    variance: FloatArray  # se^2

    @classmethod
    def of(cls, station: IntArray, place: IntArray, of_pair: FloatArray) -> _Ends:
        """Return the ends of pairs, from station and place of every pair and its variance, (n_pair,) each."""
        many = int(station.max()) + 1
        ends, end_of_pair = np.unique(place * many + station, return_inverse=True)
        return cls(end_of_pair.astype(np.int64), ends // many, _of_station(station, of_pair)[ends % many])

    def squares(self, weights: FloatArray) -> FloatArray:
        """Return the squared sum of the weights of every end's pairs, (n_end,)."""
        return np.asarray(np.bincount(self.of_pair, weights) ** 2)


def _of_station(station: IntArray, of_pair: FloatArray) -> FloatArray:
    """Return se^2 of every station by number, half the mean of its pairs'; zero for numbers that have none."""
    return np.asarray(np.bincount(station, of_pair) / 2 / np.maximum(np.bincount(station), 1))


def _station_variance(pairs: StationPairs, ends: Sequence[_Ends], presumed: float) -> float:
    """Return su^2, from the scatter of the pairs of a place around its mean and from what is presumed."""
    size = np.bincount(pairs.place)
    mean = np.bincount(pairs.place, pairs.offset) / size
    scatter = float(((pairs.offset - mean[pairs.place]) ** 2).sum())
    # What the scatter is expected to be: ``expected`` times su^2, and ``explained`` by se^2.
    expected, explained, freedom = 0.0, 0.0, -2.0 * len(size)
    for end in ends:
        n = end.squares(np.ones(len(pairs.place)))  # squared number of pairs
        part = np.sqrt(n) - n / size[end.place]
        expected += float(part.sum())
        explained += float((part * end.variance).sum())
        freedom += len(part)
    if expected <= 1e-9:
        return presumed**2
    found = max(scatter - explained, 0.0) / expected
    return (PRESUMED * presumed**2 + freedom * found) / (PRESUMED + freedom)


def _place_variance(means: FloatArray, known: FloatArray, presumed: float) -> float:
    """Return sw^2 by the moments of DerSimonian and Laird 1986, at least what is presumed."""
    weights = 1 / known
    total = weights.sum()
    spare = total - float((weights**2).sum()) / total
    if len(means) < 2 or not spare > 0:
        return presumed**2
    centre = weighted_mean(means, np.sqrt(known)).value
    excess = float((weights * (means - centre) ** 2).sum()) - (len(means) - 1)
    return float(max(presumed**2, excess / spare))
