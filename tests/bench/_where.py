"""Where the time of a run goes: ms of CPU a cruise by stage, each without what is counted elsewhere.

``python -m tests.bench._where INBOX`` with an inbox of ``_cruises``. The run is made twice in one process, and the
second one counts: the first loads and compiles.
"""

from __future__ import annotations

import functools
import importlib
import sys
import tempfile
import time
from pathlib import Path
from typing import TYPE_CHECKING, Any

from flows.direct import run_directly
from flows.work import RunConfig
from pipeline.mixing import read_catalogue
from pipeline.settings import Settings

if TYPE_CHECKING:
    from collections.abc import Callable

SOURCES = Path(__file__).parents[2] / "fixtures" / "sources.toml"
REST = "the rest: columns put together; provenance, accounts, revisions, the vault, locks, moves"
# Stage, module and the name by which the stage is called there.
STAGES = (
    ("planning: hashing and surveying the inbox", "flows.direct", "list_inbox"),
    ("planning: hashing and surveying the inbox", "flows.direct", "plan_run"),
    ("reading: cells, columns, rows", "pipeline.reading.files", "_read"),
    ("checking: all checks, their findings", "pipeline.process", "check"),
    ("TEOS-10", "pipeline.seawater", "columns"),
    ("tracers, extremes, carbon of every tenth cruise", "pipeline.tracers", "columns"),
    ("tracers, extremes, carbon of every tenth cruise", "pipeline.tracers", "sample_tracers"),
    ("mixing: domains, solution, split, tags", "pipeline.process", "absent_properties"),
    ("mixing: domains, solution, split, tags", "pipeline.process", "resolve"),
    ("ensembles: 100 members", "pipeline.mixing.answers", "_by_members"),
    ("writing five Parquet tables", "pipeline.archive.publishing", "write_table"),
)


class Clock:
    """CPU seconds by stage; a stage within another stops the outer one."""

    def __init__(self) -> None:
        self.spent: dict[str, float] = {}
        self._open = [REST]
        self._last = time.process_time()

    def tick(self) -> None:
        """Book what has passed to the stage that is open."""
        now = time.process_time()
        self.spent[self._open[-1]] = self.spent.get(self._open[-1], 0.0) + now - self._last
        self._last = now

    def around(self, stage: str, function: Callable[..., Any]) -> Callable[..., Any]:
        """Return the function with its time booked to a stage."""

        @functools.wraps(function)
        def timed(*given: Any, **named: Any) -> Any:
            self.tick()
            self._open.append(stage)
            try:
                return function(*given, **named)
            finally:
                self.tick()
                self._open.pop()

        return timed


def main(arguments: list[str]) -> None:
    """Measure and print the table as Markdown."""
    inbox = Path(arguments[0])
    config = RunConfig("", Settings(), read_catalogue(SOURCES))
    clock = Clock()
    for stage, module, name in STAGES:
        place = importlib.import_module(module)
        setattr(place, name, clock.around(stage, getattr(place, name)))
    for _ in range(2):
        clock.spent.clear()
        with tempfile.TemporaryDirectory(prefix="seawhence-bench-") as archive:
            clock.tick()
            clock.spent.clear()
            summary = run_directly(inbox, RunConfig(archive, config.settings, config.catalogue), workers=1)
            clock.tick()
    cruises = len(summary.cruises)
    print(f"| a cruise of 1,400 rows and 60 columns, of {cruises} | ms of CPU |\n|---|---|")
    for stage in dict.fromkeys([stage for stage, _, _ in STAGES] + [REST]):
        print(f"| {stage} | {1e3 * clock.spent.get(stage, 0.0) / cruises:.1f} |")
    print(f"| together | {1e3 * sum(clock.spent.values()) / cruises:.1f} |")


if __name__ == "__main__":
    main(sys.argv[1:])
