"""The Prefect flow: the same work as the direct driver, in batches that Prefect starts, retries and records."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

from prefect import flow, task
from prefect.artifacts import create_table_artifact
from prefect.cache_policies import NO_CACHE
from prefect.runtime import task_run
from prefect.task_runners import TaskRunner, ThreadPoolTaskRunner

from flows.direct import summarise
from flows.plan import list_inbox, pack, plan_run
from flows.remembered import with_remembered_sources
from flows.work import RunConfig, run_batch
from pipeline.archive import clean_staging, locked, open_archive, read_contents
from pipeline.mixing import Catalogue
from pipeline.settings import Settings

if TYPE_CHECKING:
    from flows.plan import Job
    from flows.records import CruiseRecord, RunSummary

# A task should be seconds of work, and the embedded server keeps few of many short ones.
MOST_BATCHES = 40
LEAST_BYTES = 20_000_000
ARTIFACT_KEY = "seawhence-run"

RUNNER: TaskRunner[Any] = ThreadPoolTaskRunner(max_workers=2)

# Waits before a batch that met a fault of storage is tried again, seconds.
WAITS: list[float] = [5, 30]


class StorageFaultError(RuntimeError):
    """A batch met a fault of storage; raised so that Prefect tries it again."""


@task(name="cruises", cache_policy=NO_CACHE, retries=len(WAITS), retry_delay_seconds=WAITS)
def cruise_batch(jobs: tuple[Job, ...], config: RunConfig) -> list[CruiseRecord]:
    """Make a batch of cruises. A refused cruise is a record; a fault of storage makes the batch try again."""
    records = run_batch(jobs, config)
    faults = [record for record in records if record.storage_fault]
    if faults and (task_run.run_count or 1) <= len(WAITS):
        raise StorageFaultError("; ".join(f"{record.expocode}: {record.message}" for record in faults))
    return records


@flow(name="seawhence", task_runner=RUNNER, validate_parameters=False)
def bring_up_to_date(
    inbox: str, archive: str, settings: dict[str, Any], catalogue: dict[str, Any] | None
) -> RunSummary:
    """Bring an archive up to date with an inbox.

    Parameters
    ----------
    inbox, archive
        Directories.
    settings, catalogue
        As plain data, so that Prefect can show them.

    """
    config = RunConfig(
        archive,
        Settings.model_validate(settings),
        Catalogue.model_validate(catalogue) if catalogue is not None else None,
    )
    files = list_inbox(Path(inbox), Path(archive))
    store = open_archive(archive, create=True)
    with locked(store):
        clean_staging(store)
        contents = read_contents(store)
        config = with_remembered_sources(config, contents, store)
        plan = plan_run(files, contents, config.settings, config.catalogue)
        futures = [cruise_batch.submit(batch, config) for batch in pack(plan.jobs, MOST_BATCHES, LEAST_BYTES)]
        records = [record for future in futures for record in future.result()]
        summary = summarise(plan, records, config, store)
    _record(summary)
    return summary


def _record(summary: RunSummary) -> None:
    """Keep the summary with the flow run, where people look at runs."""
    rows = [
        {"cruise": cruise.expocode, "state": cruise.state, "line": cruise.line()}
        for cruise in summary.cruises
    ]
    create_table_artifact(table=rows, key=ARTIFACT_KEY, description="What this run did, cruise by cruise")


def run_as_flow(inbox: Path, config: RunConfig) -> RunSummary:
    """Run the flow once in this process, against the configured server or the embedded one."""
    return bring_up_to_date(
        str(inbox),
        config.archive,
        config.settings.model_dump(mode="json"),
        config.catalogue.model_dump(mode="json") if config.catalogue else None,
    )
