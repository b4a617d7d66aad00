"""One cruise, or a batch of them, from the inbox into the archive: what every driver calls.

Safe to run again: a cruise that is published already is published as it is.
"""

from __future__ import annotations

import logging
import time
from contextlib import suppress
from dataclasses import dataclass, replace
from pathlib import PurePosixPath
from typing import TYPE_CHECKING, Any

import pyarrow.compute as pc

from flows.large import way_of
from flows.places import place
from flows.records import CruiseRecord, Refusal, State
from flows.retrying import may_pass
from pipeline.archive import DeliveredFile, Provenance, open_archive, publish, read_cruise, vault
from pipeline.mixing import prepare
from pipeline.problems import ArchiveProblem, DeliveryProblem
from pipeline.process import settle_editions, shared_rows
from pipeline.reading import read_cruise_file, read_delivery

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    import pyarrow as pa

    from flows.large import Way
    from flows.plan import InboxFile, Job
    from pipeline.archive import Account, CruiseContents, Store
    from pipeline.mixing import Catalogue
    from pipeline.reading import Delivery, Description
    from pipeline.settings import Settings

_log = logging.getLogger(__name__)


@dataclass(frozen=True, slots=True)
class RunConfig:
    """What every job of a run shares."""

    archive: str
    settings: Settings
    catalogue: Catalogue | None = None


_PREPARED: set[str] = set()  # catalogues whose kernels this process has ready


class _InboxFault(Exception):  # noqa: N818 - it names what it is
    """A file that was there when the run was planned cannot be read now; its cruise is left as it is."""


def run_job(job: Job, config: RunConfig) -> CruiseRecord:
    """Make one cruise and publish it. Never raises: what went wrong is in the record."""
    with suppress(Exception):  # a fault here comes again in the cruise, and is told with it
        _prepare(config)
    began = time.monotonic()
    return replace(_attempt(job, config), seconds=round(time.monotonic() - began, 3))


def _prepare(config: RunConfig) -> None:
    """Have the mixing kernels ready before a cruise's clock runs, once in a process for each catalogue."""
    if config.catalogue is not None and config.catalogue.sha256 not in _PREPARED:
        _PREPARED.add(config.catalogue.sha256)
        prepare(config.catalogue, config.settings)


def _attempt(job: Job, config: RunConfig) -> CruiseRecord:
    refusals: list[Refusal] = []
    try:
        return _make(job, config, refusals)
    except DeliveryProblem as problem:
        refusals += [Refusal(file.name, problem.reason, str(problem)) for file in job.files]
        return CruiseRecord(job.expocode, State.REFUSED, refusals=tuple(refusals), message=_first(refusals))
    except _InboxFault as fault:
        passing = may_pass(fault)
        return CruiseRecord(
            job.expocode,
            State.FAILED if passing else State.REFUSED,
            refusals=tuple(refusals),
            message=str(fault),
            storage_fault=passing,
        )
    except ArchiveProblem as problem:
        return CruiseRecord(
            job.expocode,
            State.FAILED,
            refusals=tuple(refusals),
            message=str(problem),
            storage_fault=may_pass(problem),
        )
    except Exception as error:  # noqa: BLE001 - the run goes on; the record and the log tell
        _log.exception("cruise %s", job.expocode)
        message = f"a fault of seawhence, not of the files: {type(error).__name__}: {error}"
        return CruiseRecord(job.expocode, State.FAILED, refusals=tuple(refusals), message=message)


def refuse_file(file: InboxFile, config: RunConfig) -> Refusal:
    """Keep a file in which no cruise was found, and say why it is refused."""
    try:
        vault.keep(open_archive(config.archive), place(file.path))
        if file.beside.fault:
            return Refusal(file.name, "broken-description", _not_described(file))
        data = place(file.path).read_bytes()
        read_delivery(file.name, data, config.settings.reading, file.beside.description)
    except DeliveryProblem as problem:
        return Refusal(file.name, problem.reason, file.beside.explained(problem))
    except ArchiveProblem as problem:
        return Refusal(file.name, "not-kept", f"{file.name}: it was not looked at, because of {problem}")
    except OSError as error:
        return Refusal(file.name, "unreadable", _unreadable(file.name, error))
    return Refusal(file.name, "no-cruise", f"{file.name}: no cruise was found in it; nothing was used.")


def _make(job: Job, config: RunConfig, refusals: list[Refusal]) -> CruiseRecord:
    store = open_archive(config.archive)
    config = replace(config, settings=config.settings.for_cruise(job.expocode))
    with way_of(job, store, config.settings.reading) as way:
        return _make_in(way, job, config, store, refusals)


def _make_in(way: Way, job: Job, config: RunConfig, store: Store, refusals: list[Refusal]) -> CruiseRecord:
    delivered = _read_inbox(way, job, config, store, refusals)
    if not delivered:
        return CruiseRecord(job.expocode, State.REFUSED, refusals=tuple(refusals), message=_first(refusals))
    delivered = settle_editions(
        delivered,
        {file.name for file in job.files if file.beside.stands},
        sorted({name for file in job.files for name in file.beside.absent}),
    )
    deliveries = [*delivered, *_read_archived(way, job, config, store, delivered)]
    deliveries.sort(key=lambda delivery: (delivery.kind, delivery.name))
    processed = way.process(job.expocode, deliveries, config.settings, config.catalogue)
    _keep_choices(config, store)
    before = read_cruise(store, job.expocode)
    files = _delivered_files(way, deliveries, processed.accounts)
    made_from = _provenance(job.expocode, files, config)
    revision = publish(store, made_from, processed.tables)
    samples = processed.tables["samples"]
    return CruiseRecord(
        job.expocode,
        _state(before, revision),
        revision,
        files=tuple(delivery.name for delivery in deliveries),
        rows=sum(file.rows for file in files),
        kept=sum(file.kept for file in files),
        rejected=sum(file.rejected for file in files),
        set_aside=sum(file.set_aside for file in files),
        findings=len(processed.findings),
        samples=samples.num_rows,
        tagged=tagged_samples(samples),
        resolved=config.catalogue is not None,
        refusals=tuple(refusals),
        message="; ".join([*_losses(before, processed.tables), *_other_settings(before, made_from)]),
    )


def _state(before: CruiseContents, revision: int) -> State:
    earlier = before.provenance
    if earlier is not None and earlier.revision == revision and not before.is_whole:
        return State.REMADE
    # A batch that is made again, because a worker was lost, finds its cruises published: they are no less new.
    known = revision > 1 or (earlier is not None and earlier.revision != revision)
    return State.REVISED if known else State.NEW


def _losses(before: CruiseContents, tables: Mapping[str, pa.Table]) -> Iterator[str]:
    """Yield what a reissue has less of than the revision before; a file may have been cut short."""
    if before.provenance is None:
        return
    number = before.provenance.revision
    for name, words in (("samples", "samples"), ("casts", "CTD levels")):
        if before.rows.get(name, 0) > tables[name].num_rows:
            yield f"doubt: revision {number} had {before.rows[name]} {words}, this one has {tables[name].num_rows}"


def _other_settings(before: CruiseContents, made_from: Provenance) -> Iterator[str]:
    """Yield what settings of the revision before no longer hold: an archive does not remember them for a run."""
    earlier = before.provenance
    if earlier is None or earlier.settings_sha256 == made_from.settings_sha256:
        return
    gone = [name for name in earlier.corrections if name not in made_from.corrections]
    for name in gone:
        yield (
            f"doubt: revision {earlier.revision} had {name} corrected {_how(earlier.corrections[name])}, this one has"
            " not; give the settings again to keep it"
        )
    if not gone:
        yield f"note: made with other settings than revision {earlier.revision}: `seawhence changes` tells which"


def _how(correction: Mapping[str, Any]) -> str:
    factor = correction.get("factor")
    return f"by {correction.get('add')}" if factor is None else f"by a factor of {factor}"


def _keep_choices(config: RunConfig, store: Store) -> None:
    """Keep the texts of settings and catalogue beside the delivered bytes, under the hashes that tables name."""
    vault.keep(store, config.settings.text)
    if config.catalogue is not None:
        vault.keep(store, config.catalogue.text)


def tagged_samples(samples: pa.Table) -> int:
    """Return how many samples are tagged with a source, rather than with a reason why there is none."""
    same = pc.equal(samples.column("tag"), samples.column("leading_source"))
    return int(pc.sum(same).as_py() or 0)


def _read_inbox(
    way: Way, job: Job, config: RunConfig, store: Store, refusals: list[Refusal]
) -> list[Delivery]:
    """Keep and read the inbox's files of a cruise; one that is refused is told and left out."""
    delivered = []
    for file in job.files:
        try:
            data = place(file.path).read_bytes()
            vault.keep(store, data)
            if file.beside.fault:
                refusals.append(Refusal(file.name, "broken-description", _not_described(file)))
                continue
            if file.beside.text:
                vault.keep(store, file.beside.text)
            delivery = way.read(file.name, data, config.settings.reading, file.beside.description)
        except DeliveryProblem as problem:
            refusals.append(Refusal(file.name, problem.reason, file.beside.explained(problem)))
            continue
        except OSError as error:
            refusals.append(Refusal(file.name, "unreadable", _gone(file.name, error)))
            raise _InboxFault(_gone(file.name, error)) from error
        part = replace(delivery, described_by=file.beside.sha256).of_cruise(job.expocode)
        refusals += [
            Refusal(f"{file.name}:{r.raw}", r.reason, r.message) for r in part.rejects if r.line is None
        ]
        if part.rows:
            delivered.append(part)
    return delivered


def _read_archived(
    way: Way, job: Job, config: RunConfig, store: Store, delivered: Sequence[Delivery]
) -> list[Delivery]:
    """Read what earlier runs delivered of the cruise and no file of the inbox replaces."""
    standing = []
    for file in job.archived:
        data = vault.read(store, file.sha256)
        description = _kept_description(file, store)
        delivery = way.read(file.name, data, config.settings.reading, description)
        delivery = replace(delivery, described_by=file.described_by).of_cruise(job.expocode)
        if not any(shared_rows(delivery, other) for other in delivered):
            standing.append(delivery)
    return standing


def _kept_description(file: DeliveredFile, store: Store) -> Description | None:
    """Return what the ``cruise.toml`` of an earlier run says of a file, by the name that the file had in its folder."""
    if not file.described_by:
        return None
    text = vault.read(store, file.described_by)
    return read_cruise_file(f"the cruise.toml of {file.name}", text).of(PurePosixPath(file.name).name)


def _not_described(file: InboxFile) -> str:
    return f"{file.name}: not used, because the cruise.toml beside it cannot be: {file.beside.fault}"


def _delivered_files(
    way: Way, deliveries: Sequence[Delivery], accounts: Sequence[Account]
) -> tuple[DeliveredFile, ...]:
    return tuple(
        DeliveredFile(
            name=d.name,
            sha256=d.sha256,
            size=d.size,
            kind=d.kind.value,
            rows=d.rows - d.table.num_rows + way.kept(d),
            kept=way.kept(d),
            rejected=len(d.rejects),
            set_aside=d.set_aside,
            described_by=d.described_by,
            account=account,
        )
        for d, account in zip(deliveries, accounts, strict=True)
    )


def _provenance(expocode: str, files: tuple[DeliveredFile, ...], config: RunConfig) -> Provenance:
    catalogue = config.catalogue
    return Provenance(
        expocode=expocode,
        deliveries=files,
        settings_sha256=config.settings.sha256,
        catalogue_sha256=catalogue.sha256 if catalogue else None,
        catalogue_title=catalogue.title if catalogue else "",
        corrections=config.settings.corrections_of(expocode),
    )


def _unreadable(name: str, error: OSError) -> str:
    return (
        f"{name}: the file cannot be read ({error.strerror}); check that it is still there and may be read."
    )


def _gone(name: str, error: OSError) -> str:
    return (
        f"{name}: it was there when the run began and cannot be read now ({error.strerror}); nothing of its cruise was"
        " changed; see to it that it can be read, and run again."
    )


def _first(refusals: Sequence[Refusal]) -> str:
    return refusals[0].message if refusals else "none of its files holds a row of it."
