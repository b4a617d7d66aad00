"""The members of an ensemble: by what each one's sources and measurements are perturbed.

Every perturbation is a function of names alone, never of a position: of the seed, the set, the source, the
property and the member for sources; of the seed, the cruise, station, cast and sample, the property and the
member for measurements. So it is the same however samples are ordered, cut into batches or spread over
workers, and a property or source that is added to a set leaves those of the others as they were. Names
become 64 bits through BLAKE2, read in one stated byte order, and numbers through SplitMix64, which is
integer arithmetic: no machine's word size or byte order enters.
"""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.mixing.weights import measurement_parts
from pipeline.tables import KEY

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.mixing.entries import Catalogue, SourceSet

    FloatArray = NDArray[np.float64]
    KeyArray = NDArray[np.uint64]

_BETWEEN = "\x1f"  # no name of a cruise, station or source holds the unit separator


@dataclass(frozen=True, eq=False)
class Noise:
    """How the measurements of some samples are perturbed."""

    keys: KeyArray  # (n_sample,)
    property_keys: KeyArray  # (n_property,)
    absolute: FloatArray  # parts of the standard uncertainty, (n_property,) each, in property units,
    relative: FloatArray  # and of the sample's own value


def keys_of(names: Iterable[str]) -> KeyArray:
    """Return 64 bits per name, (n_name,): the first eight bytes of its BLAKE2b, the lowest first."""
    digests = (hashlib.blake2b(name.encode(), digest_size=8).digest() for name in names)
    return np.frombuffer(b"".join(digests), dtype="<u8").astype(np.uint64)


def sample_keys(samples: pa.Table, seed: int) -> KeyArray:
    """Return the keys of samples, (n_sample,), from cruise, station, cast and sample number.

    Where a sample has no number, the line of its file stands for it.
    """
    *place, number = (_text(samples, name) for name in KEY)
    line = pc.if_else(pc.equal(number, ""), _text(samples, "line"), "")
    joined = pc.binary_join_element_wise(str(seed), *place, number, line, _BETWEEN)
    return keys_of(joined.to_pylist())


def _text(samples: pa.Table, name: str) -> pa.Array | pa.ChunkedArray:
    """Return a column as text, blank where it is missing."""
    if name not in samples.schema.names:
        return pa.array([""] * samples.num_rows, pa.string())
    return pc.fill_null(samples.column(name).cast(pa.string()), "")


def measurement_noise(keys: KeyArray, properties: Sequence[str], given: Mapping[str, float]) -> Noise:
    """Return how the measurements of samples are perturbed.

    Parameters
    ----------
    keys
        Of the samples, (n_sample,).
    properties
        Registry names.
    given
        Uncertainties in place of the registry's, as ``weights.measurement_parts`` takes them.

    """
    absolute, relative = measurement_parts(properties, given)
    return Noise(keys, keys_of(f"measured{_BETWEEN}{name}" for name in properties), absolute, relative)


def perturbed_sources(
    catalogue: Catalogue, chosen: SourceSet, names: Sequence[str], *, seed: int, members: int
) -> FloatArray:
    """Return the sources of every member, (n_member, n_source, n_name), in property units.

    Normal around the values of the catalogue, with its standard uncertainties and, where a source gives
    one, its covariance (through its Cholesky factor, the properties in the order of their names).

    Parameters
    ----------
    catalogue, chosen
        The catalogue and one of its sets.
    names
        Properties that each of the set's sources gives.
    seed, members
        Of the ensemble.

    """
    from pipeline.mixing.ensemble_kernel import normals  # noqa: PLC0415 - numba takes long to import

    perturbed = np.empty((members, len(chosen.sources), len(names)))
    for position, code in enumerate(chosen.sources):
        source = catalogue.sources[code]
        own = sorted(source.properties)
        keys = keys_of(_BETWEEN.join((str(seed), chosen.name, code, name)) for name in own)
        numbers = np.empty((len(own), members))
        normals(keys, numbers)
        values = np.array([source.properties[name].value for name in own])[:, None]
        values = values + np.linalg.cholesky(source.covariance_of(own)) @ numbers
        perturbed[:, position] = values[[own.index(name) for name in names]].T
    return perturbed
