"""What a run that nobody watched did, for those who look later: a few lines, a Markdown page, rows of a table, JSON."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any

from flows.markdown import escaped, table
from flows.records import State
from pipeline.problems import UsageProblem

if TYPE_CHECKING:
    from collections.abc import Iterable
    from pathlib import Path

    from flows.records import CruiseRecord, RunSummary

_MOST_ROWS = 1000  # of a table that a Prefect server keeps
_MOST_LINES = 200  # of a list in a page
_MOST_CHARACTERS = 300
_ORDER = (State.FAILED, State.REFUSED, State.NEW, State.REVISED, State.REMADE, State.UNCHANGED)


def brief_lines(summary: RunSummary) -> list[str]:
    """Return the summary less the cruises that are as they were."""
    unchanged = {cruise.line() for cruise in summary.cruises if cruise.state is State.UNCHANGED}
    lines = [line for line in summary.lines() if line not in unchanged]
    if unchanged:
        lines.insert(-1, f"unchanged  {len(unchanged)} {'cruise' if len(unchanged) == 1 else 'cruises'}")
    return lines


def rows(summary: RunSummary) -> list[dict[str, Any]]:
    """Return a row for each cruise, those that went wrong first, as many as a server should keep."""
    ordered = sorted(summary.cruises, key=lambda cruise: _ORDER.index(cruise.state))
    return [
        {
            "cruise": cruise.expocode,
            "state": cruise.state.value,
            "revision": cruise.revision,
            "rows in": cruise.rows,
            "kept": cruise.kept,
            "set aside": cruise.set_aside,
            "rejected": cruise.rejected,
            "findings": cruise.findings,
            "samples": cruise.samples,
            "tagged": cruise.tagged,
            "seconds": cruise.seconds,
            "line": cruise.line()[:_MOST_CHARACTERS],
        }
        for cruise in ordered[:_MOST_ROWS]
    ]


def page(summary: RunSummary) -> str:
    """Return the summary as a Markdown page."""
    counts = summary.counts
    by_state = {state: [c for c in summary.cruises if c.state is state] for state in _ORDER}
    lines = [
        f"# {escaped(summary.closing())}",
        "",
        *table([list(counts), [str(number) for number in counts.values()]]),
        "",
    ]
    lines += _section("Failed", (c.line() for c in by_state[State.FAILED]))
    lines += _section("Refused", dict.fromkeys(refusal.message for refusal in summary.all_refusals))
    lines += _section("Notes", summary.notes)
    lines += _section("New", map(_with_seconds, by_state[State.NEW]))
    lines += _section("Revised", map(_with_seconds, by_state[State.REVISED]))
    lines += _section("Made anew", map(_with_seconds, by_state[State.REMADE]))
    lines += _section("Slow", summary.slow_lines())
    return "\n".join(lines)


def write_summary(path: Path, summary: RunSummary) -> None:
    """Write the summary as JSON.

    Raises
    ------
    UsageProblem
        If the file cannot be written.

    """
    text = json.dumps(summary.to_json(), indent=2, ensure_ascii=False) + "\n"
    try:
        path.write_text(text, encoding="utf-8")
    except OSError as error:
        raise UsageProblem(
            f"{path}: the summary cannot be written ({error.strerror}); give another file. The archive is done."
        ) from error


def _with_seconds(cruise: CruiseRecord) -> str:
    return f"{cruise.line()} ({cruise.seconds:.1f} s)"


def _section(title: str, sentences: Iterable[str]) -> list[str]:
    told = list(sentences)
    if not told:
        return []
    lines = [f"## {title}", "", *(f"- {escaped(one)}" for one in told[:_MOST_LINES])]
    if len(told) > _MOST_LINES:
        lines.append(f"- and {len(told) - _MOST_LINES} more")
    return [*lines, ""]
