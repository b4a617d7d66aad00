"""The command ``seawhence run``: one run, what it has to say, and to whom."""

from __future__ import annotations

import os
import sys
from typing import TYPE_CHECKING

from flows.cluster import named_cluster, require_reachable_server, use_cluster
from flows.direct import run_directly
from flows.embedded import Server, prepare_environment, server_is_configured
from flows.notifying import message, notify, whom
from flows.records import ExitStatus
from flows.telling import brief_lines, write_summary
from flows.work import RunConfig
from pipeline.mixing import read_catalogue
from pipeline.problems import Problem
from pipeline.settings import read_settings

if TYPE_CHECKING:
    import argparse
    from collections.abc import Iterable, Iterator

    from flows.notifying import Notify
    from flows.plan import Job
    from flows.records import RunSummary
    from pipeline.settings import Settings


def run(chosen: argparse.Namespace) -> int:
    """Run once, directly or as a flow."""
    to = whom(chosen.notify_command, chosen.notify_url)
    use_cluster(chosen.cluster)
    return run_once(chosen, to, as_flow=chosen.flow or bool(named_cluster()) or server_is_configured())


def run_once(chosen: argparse.Namespace, to: Notify, *, as_flow: bool, brief: bool = False) -> int:
    """Run, print the summary, write it where it is wanted and notify.

    Parameters
    ----------
    chosen
        The arguments: inbox, archive, sources, settings, summary, and workers of a run that Prefect does not drive.
    to
        Whom to notify, of a run that could not be made too.
    as_flow
        Whether Prefect drives it.
    brief
        Whether the cruises that are unchanged are counted and not listed.

    """
    try:
        settings = read_settings(chosen.settings)
        config = RunConfig(
            archive=str(chosen.archive),
            settings=settings,
            catalogue=read_catalogue(chosen.sources) if chosen.sources else None,
        )
        summary = (
            _run_as_flow(chosen) if as_flow else run_directly(chosen.inbox, config, _with_bar, chosen.workers)
        )
    except Problem as problem:
        notify(to, message(str(chosen.archive), None, str(problem), ExitStatus.USAGE))
        raise
    except Exception as error:
        words = f"a fault of seawhence, not of the files: {type(error).__name__}: {error}"
        notify(to, message(str(chosen.archive), None, words, ExitStatus.FAULT))
        raise
    for line in brief_lines(summary) if brief else summary.lines():
        print(line)
    for sentence in _corrections_not_made(settings, summary):
        print(f"seawhence: {sentence}", file=sys.stderr)
    notify(to, message(str(chosen.archive), summary))
    if chosen.summary:
        write_summary(chosen.summary, summary)
    return summary.exit_status


def _corrections_not_made(settings: Settings, summary: RunSummary) -> Iterator[str]:
    """Yield a sentence for every cruise that the settings correct and this run had no file of."""
    here = {cruise.expocode for cruise in summary.cruises}
    for expocode in sorted(set(settings.corrections) - here):
        yield (
            f"the settings correct cruise {expocode}, of which the inbox holds no file; its tables, if there are any, "
            "stay as they are; correct the expocode, or put the cruise's files into the inbox to make it anew."
        )


def _run_as_flow(chosen: argparse.Namespace) -> RunSummary:
    """Run as a flow, against the server that is named or one of the run's own, which loads while Prefect does."""
    # What the user is told, the command tells; the server keeps the rest.
    os.environ.setdefault("PREFECT_LOGGING_HANDLERS_CONSOLE_LEVEL", "WARNING")
    require_reachable_server(server_is_configured())
    places = (chosen.inbox, chosen.archive, chosen.sources, chosen.settings)
    if server_is_configured():
        prepare_environment()
        from flows.nightly import run_as_flow  # noqa: PLC0415 - Prefect takes two seconds to load

        return run_as_flow(*places)
    server = Server(one_run=True)
    from flows.nightly import run_as_flow  # noqa: PLC0415

    server.wait()
    return run_as_flow(*places)


def _with_bar(jobs: Iterable[Job]) -> Iterator[Job]:
    """Show how far a run is, on a terminal; be quiet otherwise."""
    jobs = list(jobs)
    if not jobs or not sys.stderr.isatty():
        yield from jobs
        return
    from rich.console import Console  # noqa: PLC0415 - for a terminal only
    from rich.progress import track  # noqa: PLC0415

    yield from track(jobs, description="cruises", console=Console(stderr=True), transient=True)
