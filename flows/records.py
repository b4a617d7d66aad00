"""What a run says of itself: one small record per cruise, and the summary of all."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from enum import IntEnum, StrEnum
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Sequence


class State(StrEnum):
    """What became of a cruise in a run."""

    NEW = "new"
    REVISED = "revised"
    UNCHANGED = "unchanged"
    REFUSED = "refused"  # none of its deliveries could be used
    FAILED = "failed"  # a fault of ours, or of the storage


class ExitStatus(IntEnum):
    """What the command line returns to the shell."""

    GOOD = 0  # every delivery was used
    REFUSED = 1  # some delivery, or a part of one, was refused
    USAGE = 2  # the command was called wrongly
    FAULT = 3  # a fault of ours


@dataclass(frozen=True, slots=True)
class Refusal:
    """A delivered file, or a member of a zip, that was refused, and the sentence that says why."""

    file: str
    reason: str
    message: str


@dataclass(frozen=True, slots=True)
class CruiseRecord:
    """What became of one cruise. Small, so that it can travel between processes."""

    expocode: str
    state: State
    revision: int = 0
    files: tuple[str, ...] = ()
    rows: int = 0
    kept: int = 0
    rejected: int = 0
    findings: int = 0
    samples: int = 0
    tagged: int = 0
    resolved: bool = False  # whether a source catalogue was there to resolve with
    refusals: tuple[Refusal, ...] = ()
    message: str = ""
    storage_fault: bool = False  # worth trying again

    def line(self) -> str:
        """Return the cruise's one line of the summary."""
        match self.state:
            case State.UNCHANGED:
                return f"{self.expocode}  unchanged, revision {self.revision}: {self._rows()}"
            case State.REFUSED | State.FAILED:
                return f"{self.expocode}  {self.state}: {self.message}"
            case _:
                doubt = f"; {self.message}" if self.message else ""
                return f"{self.expocode}  {self.state}, revision {self.revision}: {self._counts()}{doubt}"

    def _rows(self) -> str:
        return f"{_count(self.rows, 'row')} in, {self.kept} kept, {self.rejected} rejected"

    def _counts(self) -> str:
        words = f"{self._rows()}; {_count(self.findings, 'finding')}"
        if not self.samples:
            return f"{words}; no bottle samples"
        if not self.resolved:
            return f"{words}; no sources given, so no sample is tagged"
        return f"{words}; {self.tagged} of {self.samples} samples tagged"


@dataclass(frozen=True, slots=True)
class RunSummary:
    """The whole run."""

    archive: str
    cruises: tuple[CruiseRecord, ...]
    refusals: tuple[Refusal, ...]  # of files that belong to no cruise
    same_bytes: tuple[tuple[str, str], ...] = ()  # a file that is the same as another, and that other

    @property
    def all_refusals(self) -> tuple[Refusal, ...]:
        """Every refused file or member, those of cruises first."""
        told = (*(r for cruise in self.cruises for r in cruise.refusals), *self.refusals)
        return tuple(dict.fromkeys(told))  # a file of two cruises is told of once

    @property
    def exit_status(self) -> ExitStatus:
        """What the command line returns."""
        if any(cruise.state is State.FAILED for cruise in self.cruises):
            return ExitStatus.FAULT
        if self.all_refusals or any(cruise.state is State.REFUSED for cruise in self.cruises):
            return ExitStatus.REFUSED
        return ExitStatus.GOOD

    def lines(self) -> list[str]:
        """Return the summary as lines for a reader."""
        lines = [cruise.line() for cruise in self.cruises]
        lines += [f"refused  {refusal.message}" for refusal in self.all_refusals]
        lines += [f"note  {file}: the same bytes as {other}; read once." for file, other in self.same_bytes]
        lines.append(self._closing())
        return lines

    def _closing(self) -> str:
        changed = [c for c in self.cruises if c.state in {State.NEW, State.REVISED}]
        failed = [c for c in self.cruises if c.state is State.FAILED]
        words = []
        if changed:
            words.append(f"{_count(len(changed), 'cruise')} written")
        elif not failed:
            words.append("Nothing was new")
        if self.all_refusals:
            words.append(f"{_count(len(self.all_refusals), 'delivery', 'deliveries')} refused")
        if failed:
            words.append(f"{_count(len(failed), 'cruise')} failed")
        return f"{', '.join(words)}. The tables are in {self.archive}."

    def to_json(self) -> dict[str, Any]:
        """Return the summary as plain data."""
        return {
            "archive": self.archive,
            "exit_status": int(self.exit_status),
            "cruises": [asdict(cruise) for cruise in self.cruises],
            "refused": [asdict(refusal) for refusal in self.all_refusals],
            "same_bytes": [{"file": file, "same_as": other} for file, other in self.same_bytes],
        }


def _count(number: int, one: str, more: str | None = None) -> str:
    return f"{number} {one if number == 1 else more or one + 's'}"


def merged(records: Sequence[CruiseRecord]) -> tuple[CruiseRecord, ...]:
    """Return records in the order of their cruises, whatever order they were finished in."""
    return tuple(sorted(records, key=lambda record: record.expocode))
