"""NetCDF files with bytes flipped and ends cut: ``python -m tests.reading.spoiled FORMAT COUNT`` reads many of them."""

from __future__ import annotations

import random
import sys
import time
from collections import Counter
from dataclasses import dataclass
from typing import TYPE_CHECKING

from pipeline.problems import DeliveryProblem
from pipeline.reading import read_delivery
from pipeline.settings import ReadingSettings
from tests.reading.netcdf_files import Plan, netcdf_bytes, rows

if TYPE_CHECKING:
    from collections.abc import Iterator

LIMITS = ReadingSettings(netcdf_values=1_000_000, netcdf_seconds=2)


@dataclass(frozen=True)
class Judged:
    """What became of a file: the reason why it was refused, or how it was read."""

    outcome: str
    seconds: float


def spoiled(stored: str, count: int, seed: int = 20_260) -> Iterator[bytes]:
    """Return files of one storage format, spoiled mostly where something is written."""
    whole = netcdf_bytes(rows(), Plan(format=stored))
    chance = random.Random(seed)  # noqa: S311 - no secret
    written = [place for place, byte in enumerate(whole) if byte]
    for _ in range(count):
        data = bytearray(whole)
        for _ in range(chance.choice([1, 1, 1, 2, 4, 16, 64])):
            place = chance.choice(written) if chance.random() < 0.8 else chance.randrange(len(data))
            data[place] = chance.choice([0, 255, 128, chance.randrange(256)])
        yield bytes(data[: chance.randrange(len(data))] if chance.random() < 0.1 else data)


def judged(data: bytes) -> Judged:
    """Read one file; whatever is raised but a refusal is a fault."""
    start = time.perf_counter()
    try:
        delivery = read_delivery("x.nc", data, LIMITS)
    except DeliveryProblem as problem:
        outcome = problem.reason if "\n" not in str(problem) else "more than one line"
        return Judged(outcome, time.perf_counter() - start)
    assert delivery.rows == delivery.table.num_rows + len(delivery.rejects)
    return Judged("read", time.perf_counter() - start)


if __name__ == "__main__":
    results = [judged(data) for data in spoiled(sys.argv[1], int(sys.argv[2]))]
    print(Counter(result.outcome for result in results), max(result.seconds for result in results))  # noqa: T201
