"""The Prefect flow: the same work as the direct driver, in batches that Prefect starts and records."""

from __future__ import annotations

from contextlib import contextmanager
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Any

from prefect import flow, task
from prefect.artifacts import create_markdown_artifact, create_table_artifact
from prefect.cache_policies import NO_CACHE
from prefect.logging import get_run_logger
from prefect.runtime import deployment
from prefect.states import Completed, Failed
from prefect.task_runners import TaskRunner, ThreadPoolTaskRunner

from flows import telling
from flows.apart import Apart
from flows.cluster import named_cluster, runner_on
from flows.direct import bring_archive_up_to_date
from flows.notifying import message, notify, whom
from flows.places import place
from flows.plan import pack
from flows.records import CruiseRecord, ExitStatus, RunSummary
from flows.retrying import make_with_retries
from flows.work import RunConfig
from pipeline.mixing import read_catalogue
from pipeline.problems import Problem, UsageProblem
from pipeline.settings import read_settings

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from prefect.client.schemas.objects import FlowRun, State
    from prefect.flows import Flow

    from flows.places import Place
    from flows.plan import Job

# A task should be seconds of work, and a server records few of many short ones in good time.
MOST_BATCHES = 40
LEAST_BYTES = 20_000_000
TABLE_KEY, PAGE_KEY = "seawhence-run", "seawhence-summary"
# That a cruise may take where the settings say nothing: nobody is there who would stop it.
CRUISE_SECONDS = 3600.0
RETRY_SECONDS = 5.0


def task_runner() -> TaskRunner[Any]:
    """Return what runs the batches: the one place where that is chosen."""
    if address := named_cluster():
        return runner_on(address)
    return ThreadPoolTaskRunner(max_workers=2)


class _Processes:
    """The processes in which this one has cruises made: those of its batches share them."""

    apart: Apart | None = None


@contextmanager
def _processes() -> Iterator[None]:
    """Keep the processes for as long as a flow runs; an interrupt gives up the cruises under way at once."""
    _Processes.apart = Apart()
    try:
        yield
    finally:
        _Processes.apart.close()
        _Processes.apart = None


@task(name="cruises", cache_policy=NO_CACHE, retries=1, retry_delay_seconds=RETRY_SECONDS)
def cruise_batch(jobs: tuple[Job, ...], config: RunConfig) -> list[CruiseRecord]:
    """Make a batch of cruises. What became of each is in its record; a fault of ours makes the batch try again."""
    if _Processes.apart is None:  # in a process that the task runner started elsewhere: kept until that ends
        _Processes.apart = Apart()
    limit = config.settings.run.cruise_seconds or CRUISE_SECONDS
    make = partial(_Processes.apart.make, config=config, seconds=limit)
    return make_with_retries(jobs, make, config.settings.run.waits, get_run_logger().warning)


def make_in_batches(jobs: Sequence[Job], config: RunConfig) -> list[CruiseRecord]:
    """Make all cruises of a run as tasks."""
    futures = [cruise_batch.submit(batch, config) for batch in pack(jobs, MOST_BATCHES, LEAST_BYTES)]
    return [record for future in futures for record in future.result()]


def tell_of_crash(
    flow: Flow[Any, Any],  # noqa: ARG001 - Prefect gives it
    flow_run: FlowRun,
    state: State[Any],
) -> None:
    """Notify of a run whose process ended: called by who started it."""
    archive = str((flow_run.parameters or {}).get("archive", ""))
    why = state.message or state.name
    words = f"the run's process ended before it was done ({why}); the next run goes on from there."
    notify(whom(), message(archive, None, words, ExitStatus.FAULT))


@flow(name="seawhence", task_runner=task_runner(), validate_parameters=False, on_crashed=[tell_of_crash])
def bring_up_to_date(
    inbox: str,
    archive: str,
    sources: str | None = None,
    settings: str | None = None,
    summary: str | None = None,
) -> State[RunSummary | Problem]:
    """Bring an archive up to date with an inbox.

    Parameters
    ----------
    inbox, archive
        Their places.
    sources, settings
        TOML files, read when the run begins.
    summary
        Where the summary is written as JSON too.

    """
    log = get_run_logger()
    try:
        config = RunConfig(
            archive,
            read_settings(Path(settings) if settings else None),
            read_catalogue(Path(sources)) if sources else None,
        )
        with _processes():
            done = bring_archive_up_to_date(place(inbox), config, make_in_batches)
    except Problem as problem:
        _notify_if_deployed(archive, None, str(problem))
        return Failed(message=str(problem), data=problem)
    for line in telling.brief_lines(done):
        log.info(line)
    _record(done)
    _notify_if_deployed(archive, done)
    if summary:
        try:
            telling.write_summary(Path(summary), done)
        except UsageProblem as problem:
            log.warning(str(problem))
    outcome = Failed if done.exit_status is ExitStatus.FAULT else Completed
    return outcome(message=done.closing(), data=done)


def _record(summary: RunSummary) -> None:
    """Keep the summary with the flow run, where people look at runs."""
    create_markdown_artifact(markdown=telling.page(summary), key=PAGE_KEY, description="What this run did")
    create_table_artifact(
        table=telling.rows(summary), key=TABLE_KEY, description="What this run did, cruise by cruise"
    )


def _notify_if_deployed(archive: str, summary: RunSummary | None, problem: str = "") -> None:
    """Notify of a run that a server started; of one by hand the command does."""
    if deployment.id is not None:
        notify(whom(), message(archive, summary, problem, ExitStatus.USAGE))


def run_as_flow(inbox: Place, archive: Place, sources: Path | None, settings: Path | None) -> RunSummary:
    """Run the flow once in this process, against the server that Prefect is set to.

    Raises
    ------
    Problem
        As the direct driver does.

    """
    paths = [str(path) if path is not None else None for path in (inbox, archive, sources, settings)]
    state = bring_up_to_date(*paths, return_state=True)
    outcome = state.result(raise_on_failure=False)
    if isinstance(outcome, BaseException):
        raise outcome
    if not isinstance(outcome, RunSummary):
        raise TypeError(f"the flow ended in the state {state.name} and gave no summary")
    return outcome
