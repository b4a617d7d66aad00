"""Findings of a cruise in groups, the gravest first, and rows that were refused."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from pipeline.findings import Severity
from pipeline.mixing.notices import CHECKS as ABOUT_MIXING

if TYPE_CHECKING:
    import pyarrow as pa

    from pipeline.reporting.gathered import Gathered

GRAVEST_FIRST = (Severity.FAULT, Severity.DOUBT, Severity.NOTE)
MOST_MESSAGES = 100  # of a group, and of refused rows; all are in the CSV file

SEVERITY_WORDS = {
    Severity.FAULT: "Wrong or unreadable: counted as missing, or not used",
    Severity.DOUBT: "May be wrong",
    Severity.NOTE: "Worth knowing; changes nothing",
}


@dataclass(frozen=True, slots=True)
class Group:
    """Findings of one check."""

    severity: Severity
    check: str
    rows: int  # that the findings speak for
    messages: tuple[str, ...]  # the first ones
    more: int  # how many others there are


@dataclass(frozen=True, slots=True)
class Refused:
    """A delivered row, or a member of a zip, that could not be used."""

    message: str
    raw: str


def grouped(cruise: Gathered) -> list[Group]:
    """Return the findings by severity and check; within one severity those that speak for most rows come first.

    What the mixing analysis has to say stands beside its figures and is not repeated here.
    """
    found: dict[tuple[Severity, str], list[tuple[int, str]]] = {}
    columns = cruise.findings.select(["severity", "check", "count", "message"])
    for row in columns.to_pylist():
        if row["check"] not in ABOUT_MIXING:
            key = (Severity(row["severity"]), row["check"] or "")
            found.setdefault(key, []).append((row["count"] or 1, row["message"] or ""))
    groups = [
        Group(
            severity,
            check,
            sum(count for count, _ in told),
            tuple(message for _, message in told[:MOST_MESSAGES]),
            max(0, len(told) - MOST_MESSAGES),
        )
        for (severity, check), told in found.items()
    ]
    return sorted(groups, key=lambda g: (GRAVEST_FIRST.index(g.severity), -g.rows, g.check))


def refused(rejects: pa.Table) -> list[Refused]:
    """Return the refused rows, the first ones."""
    rows = rejects.slice(0, MOST_MESSAGES).select(["message", "raw"]).to_pylist()
    return [Refused(row["message"] or "", row["raw"] or "") for row in rows]
