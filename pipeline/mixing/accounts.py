"""What a derived source was found from, and the words that tell it in the catalogue."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from pipeline.mixing.rules import Header, SourceRule, Where

LONGEST_NOTE = 2_000  # characters that a catalogue takes
_LONGEST_RULE = 800  # of them for the conditions, so that room is left for the cruises


@dataclass(frozen=True, slots=True)
class Account:
    """What a source was found from: counts of samples, copies of one counted once."""

    cruises: Mapping[str, int]  # of the samples that were kept
    looked_at: int  # before the extremum
    copies: int  # further records of samples that were kept
    unjudged: int  # had no value to judge the extremum by
    without: Mapping[str, int]  # had no value of the property that may be used, by property
    measured: tuple[str, ...]  # properties that vary less than they are uncertain

    @property
    def samples(self) -> int:
        """How many samples the source was found from."""
        return sum(self.cruises.values())


def note(rule: SourceRule, header: Header, account: Account) -> str:
    """Return rule, counts and cruises in words, short enough for a catalogue."""
    before = f"{_rule_in_words(rule)} {_kept(account)}"
    after = f"A cruise weighs as much as its samples, at most as {header.most_per_cruise}. {' '.join(_losses(account))}"
    room = LONGEST_NOTE - len(before) - len(after) - len(": . ")
    return f"{before}: {_cruises(account.cruises, room)}. {after}".rstrip()


def _rule_in_words(rule: SourceRule) -> str:
    words = f"Found where {', '.join(conditions(rule.where)) or 'any sample is'}"
    if len(words) > _LONGEST_RULE:
        words = f"{words[:_LONGEST_RULE]}..."
    if rule.extremum:
        highest = "highest" if rule.extremum.kind == "maximum" else "lowest"
        words += (
            f"; of these the {100 * rule.extremum.fraction:g} % with the {highest} {rule.extremum.property}"
        )
    return f"{words}."


def conditions(where: Where) -> Iterator[str]:
    """Yield each condition in words."""
    for name, value in where:
        if value is None or name in where.ranges:
            continue
        match name:
            case "region":
                yield f"in a region of {len(value)} vertices"
            case "months":
                yield f"in the months {', '.join(map(str, value))}"
            case "mixed_layer":
                if value == "exclude":
                    yield "below the mixed layer"
            case _:
                yield _range(name, value)
    for name, ends in where.ranges.items():
        yield _range(name, ends)


def _range(name: str, ends: tuple[float, float]) -> str:
    unit = REGISTRY[name].unit
    return f"{name} is {ends[0]:.10g} to {ends[1]:.10g}{'' if unit in {'', '1'} else ' ' + unit}"


def _kept(account: Account) -> str:
    kept = f"{account.samples} samples"
    if account.looked_at > account.samples:
        kept += f" of {account.looked_at}"
    return f"{kept}, from {len(account.cruises)} cruise{'s' if len(account.cruises) > 1 else ''}"


def _cruises(cruises: Mapping[str, int], room: int) -> str:
    """Return as many cruises with their counts as there is room for, those with most samples first if not all."""
    told = [f"{cruise} {count}" for cruise, count in cruises.items()]
    if len(", ".join(told)) <= room:
        return ", ".join(told)
    order = sorted(cruises, key=lambda cruise: (-cruises[cruise], cruise))
    words = f"{len(order)} too many to name here"
    for most in range(1, len(order)):
        left = sum(cruises[cruise] for cruise in order[most:])
        told = [f"{cruise} {cruises[cruise]}" for cruise in order[:most]]
        longer = f"{', '.join(told)} and {len(order) - most} more with {left}"
        if len(longer) > room:
            break
        words = longer
    return words


def _losses(account: Account) -> Iterator[str]:
    if account.measured:
        yield f"The uncertainty of {', '.join(account.measured)} is that of measurements."
    left_out = []
    if account.copies:
        left_out.append(f"{account.copies} further records of the same samples")
    if account.unjudged:
        left_out.append(f"{account.unjudged} without a good value to judge the extremum by")
    if account.without:
        wanting = ", ".join(f"{name} {count}" for name, count in account.without.items())
        left_out.append(f"without a good value, in that property alone, {wanting}")
    if left_out:
        yield f"Left out: {'; '.join(left_out)}."
