"""Every two cruises that come near each other, compared in every quantity that both have."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.crossovers.averaging import StationPairs, mean_offset
from pipeline.crossovers.neighbours import chord, near_pairs, places
from pipeline.crossovers.profiles import compare
from pipeline.crossovers.quantities import QUANTITIES, CorrectionKind, Surface

if TYPE_CHECKING:
    from collections.abc import Collection, Iterable, Iterator, Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.crossover_settings import CrossoverSettings
    from pipeline.crossovers.profiles import Comparison
    from pipeline.crossovers.quantities import Quantity
    from pipeline.crossovers.stations import CruiseStations

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]


CONTRAST = 2.0  # standard uncertainties from which on an offset differs with depth
NEAR_MOST = 2.0  # standard uncertainties within which cruises are said to agree


@dataclass(frozen=True, slots=True)
class Crossover:
    """What one cruise has more of than another, in one quantity.

    ``offset`` and ``uncertainty`` are in the unit of an additive quantity, and of the natural logarithm of a
    multiplicative one, in which a proportion is a difference. The uncertainty holds, beside that of the mean,
    half of what the offset differs by between the upper and the lower half of the levels, as far as that is
    more than chance.
    """

    expocode: str
    other: str
    quantity: Quantity
    offset: float
    uncertainty: float
    between_places: float
    contrast: float  # offset of the lower half of the levels less that of the upper; NaN with too few levels
    contrast_uncertainty: float
    typical: float  # value of the other cruise, in the unit of the quantity
    surfaces: tuple[Surface, ...]
    stations: int
    other_stations: int
    station_pairs: int
    places: int
    levels: int
    years_apart: float

    @property
    def key(self) -> tuple[str, str, str]:
        """What tells it from others: both cruises and the quantity."""
        return self.expocode, self.other, self.quantity.name

    @property
    def differs_with_depth(self) -> bool:
        """Whether the offset is another above than below, which a calibration's is not."""
        return abs(self.contrast) > CONTRAST * self.contrast_uncertainty

    @property
    def agrees(self) -> bool:
        """Whether the cruises agree within the uncertainty."""
        return abs(self.offset) <= NEAR_MOST * self.uncertainty

    @property
    def relative(self) -> bool:
        """Whether the offset is a part of the value."""
        return self.quantity.kind is CorrectionKind.MULTIPLICATIVE


def compare_cruises(cruises: Sequence[CruiseStations], settings: CrossoverSettings) -> list[Crossover]:
    """Return the crossovers of all cruises, by expocodes and in the order of ``QUANTITIES``."""
    cruises = sorted((c for c in cruises if len(c.names)), key=lambda cruise: cruise.expocode)
    centres = np.array([cruise.points.mean(axis=0) for cruise in cruises]).reshape(len(cruises), 3)
    # Chords from the centre to the farthest station: cruises farther apart than both and the reach never meet.
    radii = np.array(
        [np.linalg.norm(c.points - m, axis=1).max() for c, m in zip(cruises, centres, strict=True)]
    )
    found = []
    for first, one in enumerate(cruises):
        for second in range(first + 1, len(cruises)):
            apart = float(np.linalg.norm(centres[first] - centres[second]))
            if apart - radii[first] - radii[second] <= chord(settings.distance) + 1e-9:
                found += list(_crossovers(one, cruises[second], settings))
    return found


def where_corrected(
    crossovers: Iterable[Crossover], applied: Mapping[str, Collection[str]]
) -> dict[tuple[str, str, str], Crossover]:
    """Return, by their keys, the crossovers of which either cruise has a correction of the quantity in force.

    Parameters
    ----------
    crossovers
        With the corrections made.
    applied
        The corrected quantities by cruise.

    """
    return {
        c.key: c
        for c in crossovers
        if any(c.quantity.name in applied.get(expocode, ()) for expocode in (c.expocode, c.other))
    }


def _crossovers(
    one: CruiseStations, other: CruiseStations, settings: CrossoverSettings
) -> Iterator[Crossover]:
    pairs = near_pairs(one.points, other.points, settings.distance, settings.partners)
    if not len(pairs):
        return
    middle = one.points[pairs[:, 0]] + other.points[pairs[:, 1]]
    place = places(middle, settings.distance)
    for quantity in QUANTITIES:
        if one.has(quantity) and other.has(quantity):
            crossover = _crossover(one, other, quantity, pairs, place, settings)
            if crossover is not None:
                yield crossover


def _crossover(
    one: CruiseStations,
    other: CruiseStations,
    quantity: Quantity,
    pairs: IntArray,
    place: IntArray,
    settings: CrossoverSettings,
) -> Crossover | None:
    """Return the crossover of two cruises in one quantity, None where no pair of stations has enough levels."""
    compared: list[tuple[int, Surface, Comparison]] = []
    for number, (a, b) in enumerate(pairs.tolist()):
        for surface in dict.fromkeys((quantity.surface, Surface.PRESSURE)):
            mine, theirs = one.profile(a, quantity, surface), other.profile(b, quantity, surface)
            if mine is None or theirs is None:
                continue
            comparison = compare(mine, theirs, settings.gap, _least_span(surface, settings))
            if comparison is not None and len(comparison.offset) >= settings.least_levels:
                compared.append((number, surface, comparison))
                break
    if not compared:
        return None
    chosen = [number for number, _, _ in compared]
    taken = pairs[chosen]
    data = StationPairs(
        offset=np.array([c.offset.mean() for _, _, c in compared]),
        variance=np.array([c.offset.var(ddof=1) if len(c.offset) > 1 else 0.0 for _, _, c in compared]),
        levels=np.array([len(c.offset) for _, _, c in compared]),
        independent=np.array([c.independent for _, _, c in compared]),
        station=taken[:, 0],
        other=taken[:, 1],
        place=np.unique(place[chosen], return_inverse=True)[1].astype(np.int64),
    )
    station_sd, place_sd = (
        part * quantity.limit for part in (settings.between_stations, settings.between_places)
    )
    mean = mean_offset(data, station_sd, place_sd)
    contrast, its = _contrast(data, [c for _, _, c in compared], station_sd)
    typical = float(mean.weights @ np.array([c.other.mean() for _, _, c in compared]))
    years = mean.weights @ (one.year[taken[:, 0]] - other.year[taken[:, 1]])
    return Crossover(
        one.expocode,
        other.expocode,
        quantity,
        mean.value,
        float(np.sqrt(mean.uncertainty**2 + max(np.nan_to_num(contrast**2 - its**2), 0.0) / 4)),
        mean.between_places,
        contrast,
        its,
        float(np.exp(typical)) if quantity.kind is CorrectionKind.MULTIPLICATIVE else typical,
        tuple(surface for surface in Surface if surface in {s for _, s, _ in compared}),
        len(np.unique(data.station)),
        len(np.unique(data.other)),
        len(data.offset),
        len(np.unique(data.place)),
        int(data.levels.sum()),
        float(years),
    )


def _contrast(data: StationPairs, compared: Sequence[Comparison], station_sd: float) -> tuple[float, float]:
    """Return the offset of the lower half of the levels less that of the upper, and its standard uncertainty.

    A calibration that is off is off at all depths. NaN where no pair of stations has four levels.
    """
    half = np.array([len(c.offset) // 2 for c in compared])
    kept = half >= 2
    if not kept.any():
        return np.nan, np.nan
    upper = [c.offset[:h] for c, h in zip(compared, half, strict=True)]
    lower = [c.offset[h:] for c, h in zip(compared, half, strict=True)]
    columns = {
        "offset": np.array([b.mean() - a.mean() for a, b in zip(upper, lower, strict=True)]),
        # of single levels around their half; twice, since either half has half of the levels, and twice again,
        # since it is a difference of two means
        "variance": 4 * np.array([(a.var() + b.var()) / 2 for a, b in zip(upper, lower, strict=True)]),
        "levels": data.levels,
        "independent": data.independent,
        "station": data.station,
        "other": data.other,
    }
    chosen = {name: column[kept] for name, column in columns.items()}
    place = np.unique(data.place[kept], return_inverse=True)[1].astype(np.int64)
    mean = mean_offset(StationPairs(**chosen, place=place), station_sd, 0.0)
    return mean.value, mean.uncertainty


def _least_span(surface: Surface, settings: CrossoverSettings) -> float:
    spans = {Surface.DENSITY: settings.density_span, Surface.TEMPERATURE: settings.temperature_span}
    return spans.get(surface, 0.0)
