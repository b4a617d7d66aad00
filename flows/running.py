"""The command ``seawhence run``."""

from __future__ import annotations

import json
import sys
from typing import TYPE_CHECKING

from flows.direct import run_directly
from flows.embedded import prepare_environment, server_is_configured
from flows.work import RunConfig
from pipeline.mixing import read_catalogue
from pipeline.problems import UsageProblem
from pipeline.settings import read_settings

if TYPE_CHECKING:
    import argparse
    from collections.abc import Iterable, Iterator
    from pathlib import Path

    from flows.plan import Job
    from flows.records import RunSummary
    from pipeline.settings import Settings


def run(chosen: argparse.Namespace) -> int:
    """Run once and print the summary."""
    config = RunConfig(
        archive=str(chosen.archive),
        settings=read_settings(chosen.settings),
        catalogue=read_catalogue(chosen.sources) if chosen.sources else None,
    )
    if chosen.flow or server_is_configured():
        summary = _run_as_flow(chosen.inbox, config)
    else:
        summary = run_directly(chosen.inbox, config, progress=_with_bar)
    for line in summary.lines():
        print(line)
    for sentence in _corrections_not_made(config.settings, summary):
        print(f"seawhence: {sentence}", file=sys.stderr)
    if chosen.summary:
        _write_summary(chosen.summary, summary)
    return summary.exit_status


def _corrections_not_made(settings: Settings, summary: RunSummary) -> Iterator[str]:
    """Yield a sentence for every cruise that the settings correct and this run had no file of."""
    here = {cruise.expocode for cruise in summary.cruises}
    for expocode in sorted(set(settings.corrections) - here):
        yield (
            f"the settings correct cruise {expocode}, of which the inbox holds no file; its tables, if there are any, "
            "stay as they are; correct the expocode, or put the cruise's files into the inbox to make it anew."
        )


def _run_as_flow(inbox: Path, config: RunConfig) -> RunSummary:
    prepare_environment()
    from flows.nightly import run_as_flow  # noqa: PLC0415 - Prefect takes two seconds to load

    return run_as_flow(inbox, config)


def _with_bar(jobs: Iterable[Job]) -> Iterator[Job]:
    """Show how far a run is, on a terminal; be quiet otherwise."""
    jobs = list(jobs)
    if not jobs or not sys.stderr.isatty():
        yield from jobs
        return
    from rich.console import Console  # noqa: PLC0415 - for a terminal only
    from rich.progress import track  # noqa: PLC0415

    yield from track(jobs, description="cruises", console=Console(stderr=True), transient=True)


def _write_summary(path: Path, summary: RunSummary) -> None:
    text = json.dumps(summary.to_json(), indent=2, ensure_ascii=False) + "\n"
    try:
        path.write_text(text, encoding="utf-8")
    except OSError as error:
        raise UsageProblem(
            f"{path}: the summary cannot be written ({error.strerror}); give another file. The archive is done."
        ) from error
