"""Millions of CTD levels in zips of casts, from the inbox into the archive: levels a second and peak memory.

``python -m tests.bench levels`` makes ten cruises of a million levels each, then one cruise of five million; or
``levels --casts 50 --levels 2000 --zips 10 --cruises 10``. The invented casts are all different and unspoiled.
"""

from __future__ import annotations

import argparse
import io
import os
import resource
import subprocess
import sys
import tempfile
import time
import zipfile
import zlib
from pathlib import Path

import numpy as np
import pyarrow as pa
from pyarrow import csv

ROOT = Path(__file__).parent.parent.parent
MEGABYTE = 1 << 20


def cast_text(cruise: str, station: int, levels: int, seed: int) -> bytes:
    """Return a CTD file of one invented cast that goes down in steps of 2 dbar."""
    chance = np.random.default_rng(seed)
    pressure = 2.0 * np.arange(1, levels + 1)
    warm = 15.0 + chance.normal(0.0, 0.5)
    temperature = 1.0 + warm * np.exp(-pressure / 700.0) + 0.002 * chance.standard_normal(levels)
    salinity = 34.7 + 0.8 * np.exp(-pressure / 600.0) + 0.0005 * chance.standard_normal(levels)
    oxygen = 210.0 + 40.0 * np.exp(-pressure / 150.0) - 50.0 * np.exp(-(((pressure - 900.0) / 400.0) ** 2))
    flag = np.full(levels, 2)
    table = pa.table(
        [
            pressure, flag, np.round(temperature, 4), flag, np.round(salinity, 4), flag,
            np.round(oxygen + 0.2 * chance.standard_normal(levels), 1), flag,
        ],
        names=list("abcdefgh"),
    )  # fmt: skip
    body = io.BytesIO()
    csv.write_csv(table, body, csv.WriteOptions(include_header=False))
    header = [
        "CTD,20260101INVENTED", "NUMBER_HEADERS = 10", f"EXPOCODE = {cruise}", "SECT_ID = V01",
        f"STNNBR = {station}", "CASTNO = 1", f"DATE = 2009{1 + station // 672:02d}{1 + station // 24 % 28:02d}",
        f"TIME = {station % 24:02d}00", f"LATITUDE = {-35 + station * 0.005:.4f}", "LONGITUDE = -12.2500",
        f"DEPTH = {2 * levels + 100}",
        "CTDPRS,CTDPRS_FLAG_W,CTDTMP,CTDTMP_FLAG_W,CTDSAL,CTDSAL_FLAG_W,CTDOXY,CTDOXY_FLAG_W",
        "DBAR,,ITS-90,,PSS-78,,UMOL/KG,",
    ]  # fmt: skip
    return ("\n".join(header) + "\n").encode() + body.getvalue() + b"END_DATA\n"


def deliver(inbox: Path, cruise: str, zips: int, casts: int, levels: int) -> int:
    """Write the zips of one cruise and return their bytes."""
    station = size = 0
    for number in range(zips):
        path = inbox / f"{cruise}_{number:03d}_ct1.zip"
        with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED, compresslevel=1) as archive:
            for _ in range(casts):
                station += 1
                text = cast_text(cruise, station, levels, seed=zlib.crc32(f"{cruise} {station}".encode()))
                archive.writestr(f"{cruise}_{station:05d}_ct1.csv", text)
        size += path.stat().st_size
    return size


def measure(cruises: int, zips: int, casts: int, levels: int) -> None:
    """Make one archive in a process of its own and print what it cost."""
    with tempfile.TemporaryDirectory(prefix="levels-") as folder:
        inbox, archive = Path(folder) / "inbox", Path(folder) / "archive"
        inbox.mkdir()
        began = time.monotonic()
        size = sum(deliver(inbox, f"ZZV{c}20090101", zips, casts, levels) for c in range(1, cruises + 1))
        made = time.monotonic() - began
        total = cruises * zips * casts * levels
        before = resource.getrusage(resource.RUSAGE_CHILDREN)
        began = time.monotonic()
        code = "import sys; from flows.cli import main; sys.exit(main(sys.argv[1:]))"
        subprocess.run(
            [sys.executable, "-c", code, "run", str(inbox), "--archive", str(archive)],
            check=True, cwd=ROOT, stdout=sys.stderr, env=dict(os.environ),
        )  # fmt: skip
        seconds = time.monotonic() - began
        usage = resource.getrusage(resource.RUSAGE_CHILDREN)
        kept = sum(path.stat().st_size for path in archive.glob("casts/*"))
        print(
            f"{cruises} cruises x {zips} zips x {casts} casts x {levels} levels = {total / 1e6:g} million levels,"
            f" {size / MEGABYTE:.0f} MB delivered (made in {made:.0f} s): {seconds:.1f} s,"
            f" {total / seconds:,.0f} levels/s,"
            f" {_cpu(usage) - _cpu(before):.1f} s CPU, peak {usage.ru_maxrss / 1024:.0f} MB,"
            f" tables {kept / MEGABYTE:.0f} MB",
            flush=True,
        )


def _cpu(usage: resource.struct_rusage) -> float:
    return usage.ru_utime + usage.ru_stime


def main(arguments: list[str]) -> None:
    """Measure the two cases, or the one that is given."""
    parser = argparse.ArgumentParser("python -m tests.bench levels")
    parser.add_argument("--cruises", type=int)
    parser.add_argument("--zips", type=int, default=10)
    parser.add_argument("--casts", type=int, default=50)
    parser.add_argument("--levels", type=int, default=2000)
    chosen = parser.parse_args(arguments)
    if chosen.cruises:
        measure(chosen.cruises, chosen.zips, chosen.casts, chosen.levels)
        return
    # Peak memory is that of the largest child so far: the larger case comes last.
    measure(10, 10, 50, 2000)
    measure(1, 50, 50, 2000)
