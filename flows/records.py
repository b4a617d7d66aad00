"""What a run says of itself: one small record per cruise, and the summary of all."""

from __future__ import annotations

from collections import Counter
from dataclasses import asdict, dataclass
from enum import IntEnum, StrEnum
from statistics import median
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Sequence


# A cruise is told as slow that took this long, seconds, and so many times the median of the cruises made (our choice).
SLOW_SECONDS = 10.0
SLOW_RATIO = 5.0
FEWEST_TO_COMPARE = 5


class State(StrEnum):
    """What became of a cruise in a run."""

    NEW = "new"
    REVISED = "revised"
    REMADE = "remade"  # what was damaged or lost, as the same revision
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
    set_aside: int = 0  # rows of an edition that gave way to another
    findings: int = 0
    samples: int = 0
    tagged: int = 0
    resolved: bool = False  # whether a source catalogue was there to resolve with
    refusals: tuple[Refusal, ...] = ()
    message: str = ""
    storage_fault: bool = False  # of the storage or the inbox, and may pass: worth trying again
    seconds: float = 0.0  # that making it took; none for one that is unchanged

    def line(self) -> str:
        """Return the cruise's one line of the summary."""
        match self.state:
            case State.UNCHANGED:
                return f"{self.expocode}  unchanged, revision {self.revision}: {self._rows()}"
            case State.REFUSED | State.FAILED:
                return f"{self.expocode}  {self.state}: {self.message}"
            case _:
                doubt = f"; {self.message}" if self.message else ""
                state = "made anew" if self.state is State.REMADE else self.state
                return f"{self.expocode}  {state}, revision {self.revision}: {self._counts()}{doubt}"

    def _rows(self) -> str:
        aside = f", {self.set_aside} set aside" if self.set_aside else ""
        return f"{_count(self.rows, 'row')} in, {self.kept} kept{aside}, {self.rejected} rejected"

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
    delivered: int | None = None  # files in the inbox
    notes: tuple[str, ...] = ()  # on what is said of files that are not there
    trouble: str = ""  # of the archive after the last cruise

    @property
    def counts(self) -> dict[str, int]:
        """Cruises by what became of them, and refused files or members."""
        found = Counter(cruise.state for cruise in self.cruises)
        return {**{state.value: found[state] for state in State}, "refusals": len(self.all_refusals)}

    @property
    def slow(self) -> tuple[CruiseRecord, ...]:
        """Cruises whose seconds stand out among those that this run made, the slowest first."""
        made = sorted((c for c in self.cruises if c.seconds), key=lambda c: -c.seconds)
        if len(made) < FEWEST_TO_COMPARE:
            return ()
        least = max(SLOW_SECONDS, SLOW_RATIO * median(c.seconds for c in made))
        return tuple(c for c in made if c.seconds > least)

    @property
    def all_refusals(self) -> tuple[Refusal, ...]:
        """Every refused file or member, those of cruises first."""
        told = (*(r for cruise in self.cruises for r in cruise.refusals), *self.refusals)
        return tuple(dict.fromkeys(told))  # a file of two cruises is told of once

    @property
    def exit_status(self) -> ExitStatus:
        """What the command line returns."""
        if self.trouble or any(cruise.state is State.FAILED for cruise in self.cruises):
            return ExitStatus.FAULT
        if self.all_refusals or any(cruise.state is State.REFUSED for cruise in self.cruises):
            return ExitStatus.REFUSED
        return ExitStatus.GOOD

    def lines(self) -> list[str]:
        """Return the summary as lines for a reader."""
        lines = [cruise.line() for cruise in self.cruises]
        told = {cruise.message for cruise in self.cruises if cruise.state is State.REFUSED}
        refused = dict.fromkeys(refusal.message for refusal in self.all_refusals)
        lines += [f"refused  {message}" for message in refused if message not in told]
        lines += [f"note  {sentence}" for sentence in self.notes]
        lines += [f"note  {file}: the same bytes as {other}; read once." for file, other in self.same_bytes]
        lines += self.slow_lines()
        lines += [f"failed  {self.trouble}"] if self.trouble else []
        lines.append(self.closing())
        return lines

    def slow_lines(self) -> list[str]:
        """Return a line for each cruise whose seconds stand out."""
        return [f"slow  {c.expocode}: took {c.seconds:.0f} s, far more than the others." for c in self.slow]

    def closing(self) -> str:
        """Return the sentences that end the summary."""
        changed = [c for c in self.cruises if c.state in {State.NEW, State.REVISED, State.REMADE}]
        failed = [c for c in self.cruises if c.state is State.FAILED]
        words = []
        if changed:
            words.append(f"{_count(len(changed), 'cruise')} written")
        elif not failed:
            empty = "The inbox holds no file; see that its disk or network share is there"
            words.append(empty if self.delivered == 0 else "Nothing was new")
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
            "counts": self.counts,
            "slow": [cruise.expocode for cruise in self.slow],
            "trouble": self.trouble,
            "cruises": [asdict(cruise) for cruise in self.cruises],
            "refused": [asdict(refusal) for refusal in self.all_refusals],
            "notes": list(self.notes),
            "same_bytes": [{"file": file, "same_as": other} for file, other in self.same_bytes],
        }


def _count(number: int, one: str, more: str | None = None) -> str:
    return f"{number} {one if number == 1 else more or one + 's'}"


def merged(records: Sequence[CruiseRecord]) -> tuple[CruiseRecord, ...]:
    """Return records in the order of their cruises, whatever order they were finished in."""
    return tuple(sorted(records, key=lambda record: record.expocode))
