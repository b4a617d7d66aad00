from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
from scipy import stats
from scipy.special import ndtri

from pipeline.mixing.ensemble_kernel import normals
from pipeline.mixing.members import keys_of, perturbed_sources, sample_keys

from .catalogues import catalogue
from .test_analysis import mixed, samples

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]

BITS_64 = (1 << 64) - 1


def drawn(keys: NDArray[np.uint64], n_member: int) -> FloatArray:
    numbers = np.empty((len(keys), n_member))
    normals(keys, numbers)
    return numbers


def mixed_slowly(bits: int) -> int:
    bits = (bits ^ (bits >> 30)) * 0xBF58476D1CE4E5B9 & BITS_64
    bits = (bits ^ (bits >> 27)) * 0x94D049BB133111EB & BITS_64
    return bits ^ (bits >> 31)


def test_numbers_are_those_of_the_published_steps_in_whole_numbers_of_any_size() -> None:
    """Python's integers know neither word size nor byte order."""
    keys = keys_of(["one", "two", "zw\u00f6lf"])
    for name, key in zip(["one", "two", "zw\u00f6lf"], keys, strict=True):
        digest = hashlib.blake2b(name.encode(), digest_size=8).digest()
        assert int(key) == int.from_bytes(digest, "little")
    found = drawn(keys, 2000)
    for key, row in zip(keys, found, strict=True):
        start = mixed_slowly(int(key))
        bits = [mixed_slowly((start + m * 0x9E3779B97F4A7C15) & BITS_64) for m in range(1, 2001)]
        probability = (np.array([one >> 12 for one in bits], dtype=float) + 0.5) / 2.0**52
        np.testing.assert_allclose(row, ndtri(probability), rtol=1e-6, atol=1e-7)


def test_splitmix_gives_its_reference_numbers() -> None:
    """First numbers for the seed 1234567 (from memory)."""
    state, found = 1234567, []
    for _ in range(3):
        state = (state + 0x9E3779B97F4A7C15) & BITS_64
        found.append(mixed_slowly(state))
    assert found == [6457827717110365317, 3203168211198807973, 9817491932198370423]


def test_numbers_are_normal_and_independent() -> None:
    keys = keys_of(f"sample {i}" for i in range(2000))
    numbers = drawn(keys, 100)
    assert stats.kstest(numbers.ravel(), "norm").pvalue > 0.01
    assert stats.kstest(numbers[:, 0], "norm").pvalue > 0.01, "the same member over samples"
    assert abs(numbers.mean()) < 4 / np.sqrt(numbers.size)
    assert abs(numbers.std() - 1) < 4 / np.sqrt(2 * numbers.size)
    assert abs(stats.skew(numbers.ravel())) < 4 * np.sqrt(6 / numbers.size)
    assert abs(stats.kurtosis(numbers.ravel())) < 4 * np.sqrt(24 / numbers.size)
    between_members = np.asarray(np.corrcoef(numbers.T))[np.triu_indices(100, 1)]
    assert abs(between_members).max() < 5 / np.sqrt(2000)
    between_samples = np.asarray(np.corrcoef(numbers[:200]))[np.triu_indices(200, 1)]
    assert abs(between_samples.std() * np.sqrt(100) - 1) < 0.05


def test_a_sample_without_number_goes_by_its_line() -> None:
    table = samples(*[mixed(0.6)] * 4)
    numbers = pa.array(["1", None, None, "line 12"])
    keys = sample_keys(table.set_column(3, "sample", numbers), 1)
    assert table.column_names[3] == "sample"
    assert len(set(keys.tolist())) == 4
    moved = table.set_column(3, "sample", numbers).set_column(4, "line", pa.array([77, 11, 13, 77]))
    np.testing.assert_array_equal(keys == sample_keys(moved, 1), [True, True, False, True])
    assert not (keys == sample_keys(table.set_column(3, "sample", numbers), 2)).any()


def test_perturbations_go_by_name() -> None:
    of = catalogue()
    chosen = of.set[0]
    whole = perturbed_sources(of, chosen, chosen.properties, seed=1, members=20)
    turned = chosen.model_copy(update={"sources": chosen.sources[::-1]})
    some = perturbed_sources(of, turned, chosen.properties[::-2], seed=1, members=30)
    np.testing.assert_array_equal(some[:20], whole[:, ::-1, ::-2])
    other = perturbed_sources(
        of, chosen.model_copy(update={"name": "x"}), chosen.properties, seed=1, members=20
    )
    assert not (other == whole).any()
