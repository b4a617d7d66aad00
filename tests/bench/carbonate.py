"""The carbonate system of many samples: samples a second, memory, and its part of what a cruise costs in all."""

from __future__ import annotations

import argparse
import resource
import subprocess
import sys
import time
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from pipeline import seawater, tracers
from pipeline.checking import check
from pipeline.settings import Settings
from pipeline.tables import SAMPLES_CORE, as_arrow, registry_field, with_columns
from pipeline.tracers.carbonate import system
from pipeline.usable import Rows
from pipeline.working import working_columns

if TYPE_CHECKING:
    from collections.abc import Callable

SAMPLES_OF_A_CAST = 25
CRUISE = 1_400  # samples
ROUNDS = 5  # of the cruise, of which the best counts
EXPOCODE = "ZZV120090214"


def main(arguments: list[str]) -> None:
    """Measure and print."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench carbonate", description=__doc__)
    parser.add_argument("--samples", type=int, default=1_000_000, help="samples in all")
    options = parser.parse_args(arguments)
    settings = Settings()
    with_constants = settings.carbonate.model_copy(update={"constants_uncertainty": "orr_2018"})
    print(f"loading PyCO2SYS: {1e3 * _loading():.0f} ms, once a process, where a cruise has carbon")

    cruise = _samples(CRUISE)
    described = _described(cruise, settings)
    rest = min(_seconds(lambda: _described(cruise, settings)) for _ in range(ROUNDS))
    for name, act in (
        ("carbonate system", lambda: system(described, settings.carbonate)),
        ("the same, uncertainty of constants too", lambda: system(described, with_constants)),
        (
            "the same, horizons, extremes and findings too",
            lambda: tracers.sample_tracers(described, settings),
        ),
    ):
        act()
        own = min(_seconds(act) for _ in range(ROUNDS))
        print(
            f"a cruise of {CRUISE} samples, {name}: {1e3 * own:.1f} ms of CPU;"
            f" checks, TEOS-10 and other tracers {1e3 * rest:.1f} ms; ratio {own / rest:.2f}"
        )

    many = Rows(_samples(options.samples), settings.use)
    before = _peak()
    seconds = _seconds(lambda: system(many, settings.carbonate))
    print(f"{options.samples} samples, one thread: {seconds:.2f} s of CPU")
    print(f"samples a second: {options.samples / seconds:.3g}")
    print(f"seconds per 1e6 samples: {1e6 * seconds / options.samples:.1f}")
    print(f"peak memory MB: {_peak():.0f}, of which {before:.0f} were there before")


def _samples(n: int) -> pa.Table:
    """Return n samples with DIC, alkalinity, and pH of every second one."""
    random = np.random.default_rng(7)
    cast, level = np.divmod(np.arange(n), SAMPLES_OF_A_CAST)
    pressure = 10.0 + 180.0 * level + random.uniform(0.0, 20.0, n)
    cold = np.exp(-pressure / 900.0)
    salinity = 34.7 + 1.2 * cold
    columns = {
        **{name: [None] * n for name in SAMPLES_CORE},
        "expocode": [EXPOCODE] * n, "station": cast.astype(str), "cast": np.ones(n, dtype=np.int64),
        "sample": (level + 1).astype(str), "file": ["a_hy1.csv"] * n, "line": np.arange(n) + 4,
        "latitude": -20.0 + cast % 60 / 2.0, "longitude": np.full(n, -20.0), "pressure": pressure,
        "temperature": 1.5 + 20.0 * cold, "bottle_salinity": salinity, "practical_salinity": salinity,
        "silicate": 120.0 * (1.0 - cold), "phosphate": 2.2 * (1.0 - cold), "nitrate": 33.0 * (1.0 - cold),
        "bottle_oxygen": 200.0 + 20.0 * cold, "dic": 2250.0 - 180.0 * cold + random.normal(0.0, 3.0, n),
        "alkalinity": 2360.0 - 30.0 * cold, "ph_total": np.where(level % 2, 7.6 + 0.3 * cold, np.nan),
        "ph_temperature": np.full(n, 25.0),
    }  # fmt: skip
    fields = [registry_field(name) for name in columns]
    return pa.table([as_arrow(columns[f.name], f.type) for f in fields], schema=pa.schema(fields))


def _described(table: pa.Table, settings: Settings) -> Rows:
    """Return samples with all that the pipeline computes of them before the carbonate system."""
    table = with_columns(table, check(table, settings, []).flags)
    table = with_columns(table, working_columns(Rows(table, settings.use)))
    table = with_columns(table, seawater.columns(table, Rows(table, settings.use).usable))
    table = with_columns(table, tracers.columns(Rows(table, settings.use).usable, settings.tracers))
    return Rows(table, settings.use)


def _loading() -> float:
    code = "import numpy, pyarrow, time\nt = time.perf_counter()\nimport PyCO2SYS\nprint(time.perf_counter() - t)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    return float(done.stdout)


def _seconds(act: Callable[[], object]) -> float:
    began = time.process_time()
    act()
    return time.process_time() - began


def _peak() -> float:
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
