"""What is wrong with the domain of a set: ends that are no places, and domains that nothing can lie in."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pipeline.mixing.domains import RANGES
from pipeline.mixing.polygons import polygon_fault, unrolled

if TYPE_CHECKING:
    from collections.abc import Iterator

    from pipeline.mixing.entries import Domain

_BOUNDS = {"latitude": (-90.0, 90.0), "longitude": (-180.0, 360.0)}
# What sea water can have, wide: a density given in full, or a depth in other units, is told.
_POSSIBLE = {
    "pressure": (-10.0, 12_000.0),
    "depth": (-10.0, 12_000.0),
    "sigma0": (-10.0, 60.0),
    "sigma2": (-10.0, 70.0),
    "sigma4": (-10.0, 80.0),
}


def domain_faults(valid: Domain) -> Iterator[tuple[str, str]]:
    """Yield the key and the words of every fault of a domain of sound form."""
    beyond = set()
    for name, (low, high) in _BOUNDS.items():
        if far := [f"{end:g}" for end in getattr(valid, name) or () if not low <= end <= high]:
            beyond.add(name)
            yield (
                name,
                (
                    f"found {' and '.join(far)} as an end of the {name}s it is valid in; expected {low:g} to "
                    f"{high:g}; correct it."
                ),
            )
    for name in RANGES:
        ends = getattr(valid, name)
        if ends is None or name in beyond:
            continue
        if ends[0] > ends[1]:
            yield (
                name,
                f"found the empty range [{ends[0]:g}, {ends[1]:g}] of {name}; expected [low, high]; swap the ends.",
            )
        elif name in _POSSIBLE and (ends[0] > _POSSIBLE[name][1] or ends[1] < _POSSIBLE[name][0]):
            low, high = _POSSIBLE[name]
            yield (
                name,
                (
                    f"found the range [{ends[0]:g}, {ends[1]:g}] of {name}, in which no sea water is; expected a part "
                    f"of {low:g} to {high:g}; correct it."
                ),
            )
    for month in sorted({month for month in valid.months or () if (valid.months or ()).count(month) > 1}):
        yield "months", f"found the month {month} twice; expected it once; remove one."
    if valid.region is not None:
        if words := polygon_fault(valid.region):
            yield "region", words
        else:
            yield from (("region", words) for words in _apart(valid))


def _apart(valid: Domain) -> Iterator[str]:
    """Find a region that lies beside the ranges that are to hold as well."""
    ring = unrolled(valid.region or ())
    (west, south), (east, north) = ring.min(axis=0), ring.max(axis=0)
    apart = []
    if valid.latitude is not None and (north < valid.latitude[0] or south > valid.latitude[1]):
        apart.append("latitude")
    if valid.longitude is not None:
        one, other = valid.longitude
        width = 360.0 if other - one >= 360.0 else (other - one) % 360.0
        # Two arcs meet where one begins within the other.
        if (west - one) % 360.0 > width and (one - west) % 360.0 > east - west:
            apart.append("longitude")
    for name in apart:
        yield (
            f"found a region that lies outside the range of {name}, which leaves an empty domain; expected both to "
            f"overlap; correct one or remove it."
        )
