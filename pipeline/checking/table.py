"""What a check is listed with, and the table of all checks that is made from it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from pydantic import BaseModel

from pipeline.settings import CheckSettings

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

    from pipeline.checking.marks import Mark
    from pipeline.findings import Severity
    from pipeline.settings import Settings
    from pipeline.usable import Rows

    Check = Callable[[Rows, Settings], list[Mark]]
    Conclusion = Callable[[Rows, Settings, Iterable[Mark]], list[Mark]]

HEADINGS = ("check", "looks for", "severity", "limits")


@dataclass(frozen=True, slots=True)
class CheckEntry:
    """One check: its name in findings, its function, how much its marks may matter, and its limits."""

    name: str
    run: Check
    severities: tuple[Severity, ...]
    limits: tuple[str, ...] = ()  # names of fields of the settings' section ``checks``
    beside: str = ""  # what it is judged by that is no setting
    as_delivered: bool = False  # looks also at columns that another check took out of use as a whole

    @property
    def looks_for(self) -> str:
        """What the check looks for: the first line of its function's docstring."""
        return _first_line(self.run.__doc__)


@dataclass(frozen=True, slots=True)
class ConclusionEntry:
    """One conclusion from what the checks found, listed as they are."""

    name: str
    run: Conclusion
    severities: tuple[Severity, ...]
    limits: tuple[str, ...] = ()
    beside: str = ""

    @property
    def looks_for(self) -> str:
        """What the conclusion is about: the first line of its function's docstring."""
        return _first_line(self.run.__doc__)


def _first_line(text: str | None) -> str:
    return (text or "").strip().partition("\n")[0].rstrip(".")


def markdown(entries: Iterable[CheckEntry | ConclusionEntry]) -> str:
    """Return the table of checks as Markdown, with the default of every limit."""
    rows = [HEADINGS, ("---",) * len(HEADINGS)]
    for entry in sorted(entries, key=lambda entry: entry.name):
        limits = [described_limit(name) for name in entry.limits] + [entry.beside] * bool(entry.beside)
        rows.append((f"`{entry.name}`", entry.looks_for, ", ".join(entry.severities), "; ".join(limits)))
    return "\n".join(f"| {' | '.join(cells)} |" for cells in rows)


def described_limit(name: str) -> str:
    """Return a limit of the settings with its default.

    Raises
    ------
    AttributeError
        Where the settings have no such limit.

    """
    default = getattr(CheckSettings(), name)
    if isinstance(default, BaseModel):
        parts = ", ".join(f"{part} {_shown(value)}" for part, value in default)
        return f"`{name}`: {parts}"
    return f"`{name}` {_shown(default)}"


def _shown(value: object) -> str:
    if isinstance(value, BaseModel):
        return "/".join(_shown(part) for _, part in value)
    if isinstance(value, dict):
        return ", ".join(f"{name} {_shown(part)}" for name, part in value.items())
    if isinstance(value, tuple):
        pairs = all(isinstance(part, tuple) for part in value)  # from which pressure on, which limit
        if pairs:
            return ", ".join(f"{_shown(limit)} from {_shown(start)} dbar on" for start, limit in value)
        return (" to " if len(value) == 2 else ", ").join(map(_shown, value))
    return f"{value:g}" if isinstance(value, float) else str(value)
