"""How the shares of sources changed between two visits to one section: layer by layer, at the places of both."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from pipeline.reporting.line import EARTH_RADIUS, great_circle, unit_vectors
from pipeline.reporting.wording import signed
from pipeline.tables import floats

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from numpy.typing import NDArray

    from pipeline.reporting.colours import SourceLook
    from pipeline.reporting.gathered import Gathered
    from pipeline.reporting.visits import Section, Visits

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# Our choice, no source.
LAYERS = (0.0, 200.0, 500.0, 1000.0, 1500.0, 2000.0, 3000.0, 4000.0, 5000.0, 12000.0)  # dbar
SAME_PLACE = 20.0  # km within which casts of two visits count as one place
BETWEEN = 150.0  # km between casts of the later visit that may be interpolated over
FEWEST_PLACES = 3
NOTABLE = 2.0  # standard errors from which on a change is told in words


@dataclass(frozen=True, slots=True)
class Occupation:
    """One visit to a section, resolved into sources."""

    expocode: str
    section: str
    time: float  # seconds since 1970, NaN where unknown
    day: str
    catalogue: str  # hash of the catalogue: only shares of one catalogue can be compared
    sources: tuple[SourceLook, ...]
    places: FloatArray  # unit vectors, (n_cast, 3)
    shares: (
        FloatArray  # mean of the samples of a layer, (n_cast, n_layer, n_source), NaN where there are none
    )


@dataclass(frozen=True, slots=True)
class Change:
    """A source in a layer, at two visits: means over the casts of the earlier that the later visit has data around."""

    code: str
    top: float
    bottom: float
    earlier: float
    later: float
    difference: float
    standard_error: float  # from the scatter between places
    places: int

    @property
    def is_notable(self) -> bool:
        """Whether the difference stands out from its scatter between places."""
        return self.places >= FEWEST_PLACES and abs(self.difference) > NOTABLE * self.standard_error


@dataclass(frozen=True, slots=True)
class Comparison:
    """Two visits to one section."""

    earlier: Occupation
    later: Occupation
    places: int
    changes: tuple[Change, ...]

    @property
    def name(self) -> str:
        """Section, and the two visits."""
        visits = " and ".join(
            f"{one.expocode} ({one.day[:4] or 'no date'})" for one in (self.earlier, self.later)
        )
        return f"{self.earlier.section}: {visits}"

    def sentence(self) -> str:
        """Return in words what changed most."""
        opening = f"{self.name}, at {self.places} places"
        notable = sorted((c for c in self.changes if c.is_notable), key=lambda c: -abs(c.difference))[:3]
        if not notable:
            return f"{opening}: no share changed by more than {NOTABLE:g} times its scatter between places."
        told = [
            f"{c.code} by {signed(c.difference)} ± {c.standard_error:.2f} between {c.top:.0f} and {c.bottom:.0f} dbar"
            f" (from {c.earlier:.2f} to {c.later:.2f})"
            for c in notable
        ]
        return f"{opening}: the largest changes are those of {', '.join(told)}."


def occupations(cruise: Gathered, found: Visits, sections: Iterable[Section]) -> list[Occupation]:
    """Return the visits of a cruise to its sections, of those that were resolved into sources."""
    catalogue = cruise.provenance.catalogue_sha256
    if catalogue is None or np.isnan(cruise.shares.share).all():
        return []
    layer = np.digitize(floats(cruise.samples, "pressure"), LAYERS[1:-1])
    means = layer_means(cruise.shares.share, found.of_row, layer, len(found.station))
    made = []
    for section in sections:
        casts = list(section.casts)
        times = found.time[casts][np.isfinite(found.time[casts])]
        time = float(np.median(times)) if len(times) else np.nan
        day = "" if np.isnan(time) else str(np.datetime64(int(time), "s"))[:10]
        places = unit_vectors(found.latitude[casts], found.longitude[casts])
        made.append(
            Occupation(
                cruise.expocode, section.name, time, day, catalogue, cruise.sources, places, means[casts]
            )
        )
    return made


def layer_means(share: FloatArray, cast: IntArray, layer: IntArray, n_cast: int) -> FloatArray:
    """Return the mean share of the samples of every cast and layer, (n_cast, n_layer, n_source), NaN where none.

    Parameters
    ----------
    share
        (n_sample, n_source), NaN where not resolved.
    cast, layer
        Of every sample, (n_sample,).
    n_cast
        How many casts there are.

    """
    n_layer = len(LAYERS) - 1
    sums = np.zeros((n_cast, n_layer, share.shape[1]))
    counts = np.zeros_like(sums)
    known = np.isfinite(share)
    np.add.at(sums, (cast, layer), np.where(known, share, 0.0))
    np.add.at(counts, (cast, layer), known)
    return np.divide(sums, counts, out=np.full_like(sums, np.nan), where=counts > 0)


def compare(found: Sequence[Occupation]) -> list[Comparison]:
    """Return successive visits to the sections of one name and catalogue, those that have places in common."""
    groups: dict[tuple[str, str], list[Occupation]] = {}
    for one in found:
        groups.setdefault((one.section, one.catalogue), []).append(one)
    made = []
    for visits in groups.values():
        in_time = sorted(visits, key=lambda one: (np.nan_to_num(one.time, nan=np.inf), one.expocode))
        made += [_compared(earlier, later) for earlier, later in pairwise(in_time)]
    return [one for one in made if one.places >= FEWEST_PLACES]


def _compared(earlier: Occupation, later: Occupation) -> Comparison:
    n_layer, n_source = earlier.shares.shape[1:]
    along, other_along = _coordinates(earlier.places, later.places)
    changes = []
    places: set[int] = set()
    for number in range(n_source):
        for layer in range(n_layer):
            before = earlier.shares[:, layer, number]
            after = interpolated(along, other_along, later.shares[:, layer, number])
            both = np.flatnonzero(np.isfinite(before) & np.isfinite(after))
            if len(both) < FEWEST_PLACES:
                continue
            places.update(both.tolist())
            difference = after[both] - before[both]
            changes.append(
                Change(
                    earlier.sources[number].code, LAYERS[layer], LAYERS[layer + 1], float(before[both].mean()),
                    float(after[both].mean()), float(difference.mean()),
                    float(difference.std(ddof=1) / np.sqrt(len(both))), len(both),
                )
            )  # fmt: skip
    return Comparison(earlier, later, len(places), tuple(changes))


def interpolated(at: FloatArray, along: FloatArray, values: FloatArray) -> FloatArray:
    """Return values at other places along the same line, (n_at,), straight between neighbours that are near.

    NaN where the neighbours are farther apart than ``BETWEEN``, or on one side there is none, unless a place is
    within ``SAME_PLACE`` of one.

    Parameters
    ----------
    at, along
        Kilometres along the line, (n_at,) and (n,), NaN for places off it.
    values
        (n,), NaN where missing.

    """
    known = np.isfinite(along) & np.isfinite(values)
    order = np.argsort(along[known], kind="stable")
    x, y = along[known][order], values[known][order]
    if not len(x):
        return np.full(len(at), np.nan)
    between = np.interp(at, x, y)
    after = np.clip(np.searchsorted(x, at), 0, len(x) - 1)
    before = np.clip(after - 1, 0, len(x) - 1)
    nearest = np.minimum(np.abs(at - x[before]), np.abs(at - x[after]))
    inside = (at >= x[0]) & (at <= x[-1]) & (x[after] - x[before] <= BETWEEN)
    return np.where(np.isfinite(at) & (inside | (nearest <= SAME_PLACE)), between, np.nan)


def _coordinates(one: FloatArray, other: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return kilometres along the main direction of both, (n_one,) and (n_other,).

    NaN for casts far from the other line. Along a line that bends, distances come out too short, in both alike.
    """
    both = np.concatenate([one, other])
    centred = both - np.median(both, axis=0)
    along = EARTH_RADIUS * centred @ np.linalg.svd(centred, full_matrices=False)[2][0]
    far = great_circle(one[:, None, :], other[None, :, :])
    near = np.concatenate([far.min(axis=1), far.min(axis=0)]) <= BETWEEN / 2
    along = np.where(near, along, np.nan)
    return along[: len(one)], along[len(one) :]
