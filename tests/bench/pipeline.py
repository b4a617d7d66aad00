"""A whole run over many invented cruises: CPU beside the floor, peak memory, the night after, two workers.

Each run is ``seawhence run`` in a process of its own. The floor (``_floor.py``) does the bare work of the same files
with the same tables written, before and after the run that it is compared with: how much CPU a process takes depends
on what else the machine does.
"""

from __future__ import annotations

import argparse
import hashlib
import os
import shutil
import subprocess
import sys
import tempfile
import time
from dataclasses import dataclass
from pathlib import Path

from tests.bench._cruises import write_inbox

ROOT = Path(__file__).parents[2]
SOURCES = ROOT / "fixtures" / "sources.toml"
RUN = "import sys; from flows.cli import main; sys.exit(main())"
# The same, and on stderr the most times that one file of the inbox was opened.
COUNTED = """
import collections, sys
opened = collections.Counter()
def hear(event, given):
    if event == "open" and str(given[0]).startswith(sys.argv[2]):
        opened[str(given[0])] += 1
sys.addaudithook(hear)
from flows.cli import main
status = main()
print(max((n for name, n in opened.items() if name.endswith(".csv")), default=0), file=sys.stderr)
sys.exit(status)
"""
OF_WORKERS = 400  # cruises, where two workers are compared with one
ROUNDS = 3  # of it


@dataclass(frozen=True, slots=True)
class Spent:
    """What a process, with those that it waited for, took."""

    cpu: float  # s, user and system
    wall: float  # s
    memory: float  # MB, the most of one process
    told: str  # on stderr


def main(arguments: list[str]) -> None:
    """Measure and print."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench pipeline", description=__doc__)
    parser.add_argument("--cruises", type=int, default=1_000, help="how many; 1,400 rows of 60 columns each")
    parser.add_argument(
        "--carbon-every", type=int, default=10, help="every so manyeth cruise measures carbon"
    )
    parser.add_argument("--keep", type=Path, help="work in this directory, and leave it")
    options = parser.parse_args(arguments)
    if options.keep:
        _measure(options.keep, options.cruises, options.carbon_every)
        return
    with tempfile.TemporaryDirectory(prefix="seawhence-bench-") as place:
        _measure(Path(place), options.cruises, options.carbon_every)


def _measure(place: Path, cruises: int, carbon_every: int) -> None:
    inbox, few = place / "inbox", place / "few"
    made = write_inbox(inbox, cruises, carbon_every)
    print(
        f"{made.cruises} cruises, {made.rows} bottle rows of {made.columns} columns, {made.size / 1e6:.0f} MB as"
        f" exchange files; every {carbon_every}th cruise has carbon. Load average {_load()}"
    )
    settings = place / "settings.toml"
    settings.write_text("[mixing]\nmembers = 0\n", encoding="utf-8")
    write_inbox(few, 2, 2)  # one with carbon, one without: the floor's pattern; and kernels are compiled
    without = ("--settings", str(settings))
    _run(few, place / "pattern of plain", *without)
    _run(few, place / "pattern of whole")

    floors = [_floor(inbox, place / "pattern of plain", place / "floor")]
    plain = _run(inbox, place / "plain", *without)
    floors.append(_floor(inbox, place / "pattern of plain", place / "floor"))
    of_plain = _tell("without ensembles", plain, floors, cruises)
    floors = [_floor(inbox, place / "pattern of whole", place / "floor")]
    whole = _run(inbox, place / "whole")
    floors.append(_floor(inbox, place / "pattern of whole", place / "floor"))
    of_whole = _tell("with 100-member ensembles", whole, floors, cruises)
    print(f"floor ratio: {of_plain:.2f}")
    print(f"floor ratio with ensembles: {of_whole:.2f}")
    print(f"peak memory MB: {max(plain.memory, whole.memory):.0f}")

    again = _run(inbox, place / "whole", code=COUNTED)
    opened = again.told.strip().rpartition("\n")[2]
    print(
        f"the night after, nothing new: {again.wall:.1f} s, {again.cpu:.1f} s of CPU; no delivered file opened more"
        f" often than {opened} times; peak memory {again.memory:.0f} MB"
    )
    shutil.rmtree(place / "plain")
    shutil.rmtree(place / "whole")
    _compare_workers(inbox, place, cruises)


def _compare_workers(inbox: Path, place: Path, cruises: int) -> None:
    """Compare two workers with one, in turns, and the bytes of both."""
    part = place / "part"
    part.mkdir()
    for file in sorted(inbox.iterdir())[: min(cruises, OF_WORKERS)]:
        shutil.copy(file, part)
    ratios = []
    for number in range(ROUNDS):
        load = _load()
        archives = [place / f"of-{workers}-{number}" for workers in (1, 2)]
        one, two = (
            _run(part, archive, workers=workers) for workers, archive in zip((1, 2), archives, strict=True)
        )
        ratios.append(one.wall / two.wall)
        same = _hashes(archives[0]) == _hashes(archives[1])
        print(
            f"{len(list(part.iterdir()))} cruises, one worker {one.wall:.1f} s, two {two.wall:.1f} s"
            f" ({one.cpu:.1f} and {two.cpu:.1f} s of CPU), load average {load}; the same bytes: {same}"
        )
        for archive in archives:
            shutil.rmtree(archive)
    print(f"two workers against one: {max(ratios):.2f}")


def _run(inbox: Path, archive: Path, *more: str, workers: int = 1, code: str = RUN) -> Spent:
    named = ["--archive", str(archive), "--sources", str(SOURCES), "--workers", str(workers)]
    return _spent([sys.executable, "-c", code, "run", str(inbox), *named, *more])


def _floor(inbox: Path, archive: Path, out: Path) -> Spent:
    spent = _spent([sys.executable, "-m", "tests.bench._floor", str(inbox), str(archive), str(out)])
    shutil.rmtree(out)
    return spent


def _spent(command: list[str]) -> Spent:
    """Run a command to its end and return what it took.

    Raises
    ------
    SystemExit
        Where it does not end well.

    """
    with tempfile.TemporaryFile() as told:
        began = time.perf_counter()
        process = subprocess.Popen(command, cwd=ROOT, stdout=subprocess.DEVNULL, stderr=told)
        _, status, used = os.wait4(process.pid, 0)
        process.returncode = os.waitstatus_to_exitcode(status)
        wall = time.perf_counter() - began
        told.seek(0)
        words = told.read().decode()
    if process.returncode:
        raise SystemExit(f"{' '.join(command[:6])} ended with status {process.returncode}: {words}")
    return Spent(used.ru_utime + used.ru_stime, wall, used.ru_maxrss / 1024, words)


def _tell(what: str, run: Spent, floors: list[Spent], cruises: int) -> float:
    """Print what a run and the floors before and after it took, and return the run's CPU over their mean."""
    mean = sum(floor.cpu for floor in floors) / len(floors)
    print(
        f"{what}: {run.cpu:.1f} s of CPU, {1e3 * run.cpu / cruises:.1f} ms a cruise, {run.wall:.0f} s; the floor before"
        f" and after {' and '.join(f'{1e3 * floor.cpu / cruises:.1f}' for floor in floors)} ms a cruise; peak memory"
        f" {run.memory:.0f} MB; load average {_load()}"
    )
    return run.cpu / mean


def _hashes(archive: Path) -> dict[str, str]:
    return {
        str(path.relative_to(archive)): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in archive.rglob("*")
        if path.is_file()
    }


def _load() -> str:
    return f"{os.getloadavg()[0]:.1f}"
