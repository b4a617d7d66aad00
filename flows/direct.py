"""A whole run, whoever drives it, and the direct driver: by hand, in this process, with no Prefect anywhere."""

from __future__ import annotations

import sys
from contextlib import closing
from dataclasses import replace
from functools import partial
from typing import TYPE_CHECKING

from flows.apart import Apart
from flows.places import place
from flows.plan import list_inbox, plan_run
from flows.putting_back import put_back
from flows.records import CruiseRecord, Refusal, RunSummary, State, merged
from flows.remembered import with_remembered_sources
from flows.retrying import make_with_retries
from flows.stopping import stoppable
from flows.work import refuse_file, run_job, tagged_samples
from flows.workers import make_at_once, usual_workers
from pipeline.archive import clean_staging, locked, open_archive, read_contents, read_table
from pipeline.problems import ArchiveProblem

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Sequence

    from flows.places import Place
    from flows.plan import Job, Plan
    from flows.work import RunConfig
    from pipeline.archive import Contents, CruiseContents, Store

    Progress = Callable[[Iterable[Job]], Iterable[Job]]
    MakeAll = Callable[[Sequence[Job], RunConfig], Iterable[CruiseRecord]]


def bring_archive_up_to_date(inbox: Place, config: RunConfig, make_all: MakeAll) -> RunSummary:
    """Bring the archive up to date with an inbox.

    Parameters
    ----------
    inbox
        The directory of delivered files.
    config
        Archive, settings and catalogue.
    make_all
        Makes the cruises that are due, in its own way; the order of their records does not matter.

    Raises
    ------
    Problem
        Where the run cannot start: no such inbox, an archive that cannot be used or is busy.

    """
    files = list_inbox(inbox, place(config.archive))
    store = open_archive(config.archive, create=True)
    summary: RunSummary | None = None
    returned: tuple[str, ...] = ()
    try:
        with locked(store, config.settings.run.lock_seconds):
            clean_staging(store)
            contents = read_contents(store)
            returned = put_back(files, contents, config, store)
            config = with_remembered_sources(config, contents, store)
            plan = plan_run(files, contents, config.settings, config.catalogue)
            summary = summarise(plan, make_all(plan.jobs, config), contents, config, store)
    except ArchiveProblem as problem:
        if summary is None:
            raise
        summary = replace(summary, trouble=str(problem))  # what was done is told all the same
    notes = dict.fromkeys([*(note for file in files for note in file.beside.notes), *returned])
    return replace(summary, delivered=len(files), notes=tuple(notes))


def run_directly(
    inbox: Place, config: RunConfig, progress: Progress = iter, workers: int | None = None
) -> RunSummary:
    """Bring the archive up to date with an inbox: one cruise after the other, or several at once.

    One after the other they are made in this process; in one apart where the settings limit a cruise's seconds,
    since nothing else ends a library's call.

    Parameters
    ----------
    inbox, config
        As ``bring_archive_up_to_date`` takes them.
    progress
        Wraps the jobs, to show how far the run is.
    workers
        How many cruises are made at once, in processes of their own; as the machine and the work allow, if None.

    Raises
    ------
    Problem
        Where the run cannot start.

    """
    limit = config.settings.run.cruise_seconds
    with closing(Apart()) as apart:
        make = run_job if limit is None else partial(apart.make, seconds=limit)

        def make_all(jobs: Sequence[Job], config: RunConfig) -> Iterable[CruiseRecord]:
            at_once = min(usual_workers(jobs) if workers is None else workers, len(jobs))
            if at_once > 1:
                return make_at_once(jobs, config, at_once, progress, _tell)
            with stoppable() as stop_if_asked:

                def make_one(job: Job) -> CruiseRecord:
                    record = make(job, config)
                    stop_if_asked()
                    return record

                return make_with_retries(progress(jobs), make_one, config.settings.run.waits, _tell)

        return bring_archive_up_to_date(inbox, config, make_all)


def _tell(sentence: str) -> None:
    print(f"seawhence: {sentence}", file=sys.stderr)


def summarise(
    plan: Plan, records: Iterable[CruiseRecord], contents: Contents, config: RunConfig, store: Store
) -> RunSummary:
    """Put together what was done, what was current already, and what belongs to no cruise."""
    unchanged = [unchanged_record(contents.cruises[code], store) for code in plan.unchanged]
    return RunSummary(
        archive=config.archive,
        cruises=merged([*records, *unchanged]),
        refusals=tuple(refuse_file(file, config) for file in plan.unknown),
        same_bytes=plan.same_bytes,
    )


def unchanged_record(cruise: CruiseContents, store: Store) -> CruiseRecord:
    """Return the record of a cruise that is in the archive as it is; parts refused before are told again."""
    try:
        return _as_it_is(cruise, store)
    except ArchiveProblem as problem:
        return CruiseRecord(cruise.expocode, State.FAILED, message=str(problem))


def _as_it_is(cruise: CruiseContents, store: Store) -> CruiseRecord:
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
        set_aside=sum(file.set_aside for file in deliveries),
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
