"""The direct driver: a run by hand, in this process, with no Prefect anywhere."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from flows.plan import list_inbox, plan_run
from flows.records import CruiseRecord, Refusal, RunSummary, State, merged
from flows.remembered import with_remembered_sources
from flows.stopping import stoppable
from flows.work import refuse_file, run_job, tagged_samples
from pipeline.archive import clean_staging, locked, open_archive, read_contents, read_table

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

    from flows.plan import Job, Plan
    from flows.work import RunConfig
    from pipeline.archive import CruiseContents, Store

    Progress = Callable[[Iterable[Job]], Iterable[Job]]


def run_directly(inbox: Path, config: RunConfig, progress: Progress = iter) -> RunSummary:
    """Bring the archive up to date with an inbox, one cruise after the other.

    Parameters
    ----------
    inbox
        The directory of delivered files.
    config
        Archive, settings and catalogue.
    progress
        Wraps the jobs, to show how far the run is.

    Raises
    ------
    Problem
        Where the run cannot start: no such inbox, an archive that cannot be used or is busy.

    """
    files = list_inbox(inbox, Path(config.archive))
    store = open_archive(config.archive, create=True)
    with locked(store):
        clean_staging(store)
        contents = read_contents(store)
        config = with_remembered_sources(config, contents, store)
        plan = plan_run(files, contents, config.settings, config.catalogue)
        records = []
        with stoppable() as stop_if_asked:
            for job in progress(plan.jobs):
                records.append(run_job(job, config))
                stop_if_asked()
        return summarise(plan, records, config, store)


def summarise(plan: Plan, records: Iterable[CruiseRecord], config: RunConfig, store: Store) -> RunSummary:
    """Put together what was done, what was current already, and what belongs to no cruise."""
    contents = read_contents(store)
    unchanged = [unchanged_record(contents.cruises[code], store) for code in plan.unchanged]
    return RunSummary(
        archive=config.archive,
        cruises=merged([*records, *unchanged]),
        refusals=tuple(refuse_file(file, config) for file in plan.unknown),
        same_bytes=plan.same_bytes,
    )


def unchanged_record(cruise: CruiseContents, store: Store) -> CruiseRecord:
    """Return the record of a cruise that is in the archive as it is; parts refused before are told again."""
    provenance = cruise.provenance
    deliveries = provenance.deliveries if provenance else ()
    return CruiseRecord(
        cruise.expocode,
        State.UNCHANGED,
        provenance.revision if provenance else 0,
        files=tuple(file.name for file in deliveries),
        rows=sum(file.rows for file in deliveries),
        kept=sum(file.kept for file in deliveries),
        rejected=sum(file.rejected for file in deliveries),
        findings=cruise.rows.get("findings", 0),
        samples=cruise.rows.get("samples", 0),
        tagged=_tagged(cruise, store),
        resolved=provenance is not None and provenance.catalogue_sha256 is not None,
        refusals=_refused_members(cruise, store),
    )


def _tagged(cruise: CruiseContents, store: Store) -> int:
    if (
        cruise.provenance is None
        or cruise.provenance.catalogue_sha256 is None
        or not cruise.rows.get("samples")
    ):
        return 0
    columns = ["tag", "leading_source"]
    return tagged_samples(read_table(store, cruise.expocode, "samples", columns=columns))


def _refused_members(cruise: CruiseContents, store: Store) -> tuple[Refusal, ...]:
    if not cruise.rows.get("rejects"):
        return ()
    rejects = read_table(store, cruise.expocode, "rejects").to_pylist()
    return tuple(
        Refusal(f"{row['file']}:{row['raw']}", row["reason"], row["message"])
        for row in rejects
        if row["line"] is None
    )
