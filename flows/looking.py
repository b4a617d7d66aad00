"""The command ``seawhence check``: what a file holds and what is doubtful in it, with nothing written."""

from __future__ import annotations

import hashlib
import json
from dataclasses import asdict, dataclass, replace
from typing import TYPE_CHECKING, Any

from flows.beside import Folder
from flows.markdown import visible
from flows.note import note, refused_note
from flows.pages import as_markdown
from flows.plan import shown_name
from flows.records import ExitStatus, Refusal
from flows.to_group import as_delivered
from pipeline.findings import Finding, Severity
from pipeline.problems import DeliveryProblem
from pipeline.process import describe_cruise
from pipeline.reading import CRUISE_FILE, read_delivery
from pipeline.settings import read_settings
from pipeline.variables import MEASURED, REGISTRY

if TYPE_CHECKING:
    import argparse
    from collections.abc import Iterable, Sequence
    from pathlib import Path

    from pipeline.findings import Reject
    from pipeline.reading import Delivery, Description
    from pipeline.settings import Settings

_ORDER = {Severity.FAULT: 0, Severity.DOUBT: 1, Severity.NOTE: 2}
_MOST_TOLD = 3  # of one check and variable; the JSON form tells all


@dataclass(frozen=True, slots=True)
class Look:
    """What was understood of one file."""

    delivery: Delivery
    findings: tuple[Finding, ...]
    description: Description | None = None
    notes: tuple[str, ...] = ()  # on what the cruise.toml beside it says of files that are not there

    @property
    def refused_members(self) -> tuple[Reject, ...]:
        """Members of a zip that were not used."""
        return tuple(reject for reject in self.delivery.rejects if reject.line is None)


@dataclass(frozen=True, slots=True)
class Refused:
    """A file that cannot be used, and what it is, where it could be read at all."""

    refusal: Refusal
    size: int | None = None  # bytes
    sha256: str | None = None
    notes: tuple[str, ...] = ()


def check(chosen: argparse.Namespace) -> int:
    """Look at every file, print what was found, and return the exit status."""
    settings = read_settings(chosen.settings)
    looks = [_look(path, settings) for path in chosen.files]
    match chosen.format:
        case "json":
            print(json.dumps({"files": [_as_json(look) for look in looks]}, indent=2, ensure_ascii=False))
        case "markdown":
            print("\n\n---\n\n".join("\n".join(_as_page(look, settings)) for look in looks))
        case _:
            for look in looks:
                print("\n".join(visible(line) for line in _as_text(look)))
            for note_beside in dict.fromkeys(note for look in looks for note in look.notes):
                print(f"note  {visible(note_beside)}")
    refused = any(isinstance(look, Refused) or look.refused_members for look in looks)
    return ExitStatus.REFUSED if refused else ExitStatus.GOOD


def _look(path: Path, settings: Settings) -> Look | Refused:
    name = shown_name(path.name)
    try:
        if path.exists() and not path.is_file():  # a pipe would wait for ever
            return Refused(
                Refusal(name, "not-a-file", f"{name}: found no regular file; give a delivered file.")
            )
        data = path.read_bytes()
    except OSError as error:
        shown = shown_name(str(path))
        message = f"{shown}: the file cannot be read ({error.strerror}); give another file."
        return Refused(Refusal(shown, "unreadable", message))
    sha256 = hashlib.sha256(data).hexdigest()
    beside = Folder(path.parent, CRUISE_FILE, _names(path.parent)).says(path.name)
    if beside.fault:
        message = f"{name}: not used, because the {CRUISE_FILE} beside it cannot be: {beside.fault}"
        return Refused(Refusal(name, "broken-description", message), len(data), sha256)
    try:
        delivery = read_delivery(name, data, settings.reading, beside.description)
    except DeliveryProblem as problem:
        return Refused(
            Refusal(name, problem.reason, beside.explained(problem)), len(data), sha256, beside.notes
        )
    delivery = replace(delivery, described_by=beside.sha256)
    noticed = as_delivered(_noticed(delivery, settings), delivery.words)
    return Look(delivery, in_line_order([*delivery.findings, *noticed]), beside.description, beside.notes)


def _noticed(delivery: Delivery, settings: Settings) -> list[Finding]:
    """Return what a run notices in the rows of a file, cruise by cruise."""
    parts = ((code, delivery.of_cruise(code)) for code in delivery.cruises)
    return [finding for code, part in parts for finding in describe_cruise(code, [part], settings).findings]


def _names(folder: Path) -> set[str]:
    try:
        return {path.name for path in folder.iterdir()}
    except OSError:
        return set()


def in_line_order(findings: Sequence[Finding]) -> tuple[Finding, ...]:
    """Return findings check by check as they were made, those of one check in the order of files and lines.

    What a check says of a whole file comes before what it says of a line.
    """
    order = {check: place for place, check in enumerate(dict.fromkeys(f.check for f in findings))}
    return tuple(sorted(findings, key=lambda f: (order[f.check], f.file or "", f.line or 0)))


def _as_page(look: Look | Refused, settings: Settings) -> list[str]:
    if isinstance(look, Refused):
        refusal = look.refusal
        return as_markdown(
            refused_note(refusal.file, refusal.reason, refusal.message, look.size, look.sha256)
        )
    return as_markdown(note(look.delivery, look.findings, settings.use, look.description))


def _as_json(look: Look | Refused) -> dict[str, Any]:
    if isinstance(look, Refused):
        return {
            "file": look.refusal.file,
            "used": False,
            "refused": asdict(look.refusal),
            "sha256": look.sha256,
        }
    delivery = look.delivery
    return {
        "file": delivery.name,
        "used": True,
        "kind": delivery.kind,
        "sha256": delivery.sha256,
        "cruises": list(delivery.cruises),
        "rows": delivery.rows,
        "kept": delivery.table.num_rows,
        "rejected": len(delivery.rejects),
        "quantities": _quantities(delivery),
        "passed_through": _passed_through(delivery),
        "rejects": [asdict(reject) for reject in delivery.rejects],
        "findings": [asdict(finding) for finding in look.findings],
    }


def _as_text(look: Look | Refused) -> list[str]:
    if isinstance(look, Refused):
        return [f"refused: {look.refusal.message}"]
    delivery = look.delivery
    kind = "bottle" if delivery.kind == "bottle" else "CTD"
    lines = [
        (
            f"{delivery.name}: {kind} file of {', '.join(delivery.cruises)}; {delivery.rows} rows,"
            f" {delivery.table.num_rows} kept, {len(delivery.rejects)} rejected"
        ),
        f"  read: {', '.join(_quantities(delivery))}",
    ]
    if extra := _passed_through(delivery):
        lines.append(f"  passed through: {', '.join(extra)}")
    lines += [f"  rejected  {sentence}" for sentence in _first_of_each_reason(delivery.rejects)]
    for severity, group in _grouped(look.findings):
        lines += [f"  {severity:<8}  {finding.message}" for finding in group[:_MOST_TOLD]]
        if left := sum(finding.count for finding in group[_MOST_TOLD:]):
            what = f"{group[0].check} in {group[0].variable}" if group[0].variable else group[0].check
            lines.append(f"  {severity:<8}  ... and {left} more of {what} (--format json tells all)")
    if not delivery.rejects and not look.findings:
        lines.append("  nothing doubtful was found")
    return lines


def _first_of_each_reason(rejects: Iterable[Reject]) -> list[str]:
    """Return the first sentences of each reason, and how many more there are."""
    by_reason: dict[str, list[Reject]] = {}
    for reject in rejects:
        by_reason.setdefault(reject.reason, []).append(reject)
    sentences = []
    for reason, group in by_reason.items():
        sentences += [reject.message for reject in group[:_MOST_TOLD]]
        if len(group) > _MOST_TOLD:
            sentences.append(f"... and {len(group) - _MOST_TOLD} more rows for the reason {reason}")
    return sentences


def _grouped(findings: Iterable[Finding]) -> list[tuple[Severity, list[Finding]]]:
    """Return findings of one check and variable together, the gravest first."""
    groups: dict[tuple[Severity, str, str | None], list[Finding]] = {}
    for finding in findings:
        groups.setdefault((finding.severity, finding.check, finding.variable), []).append(finding)
    return [(key[0], group) for key, group in sorted(groups.items(), key=lambda item: _ORDER[item[0][0]])]


def _quantities(delivery: Delivery) -> list[str]:
    return [name for name in MEASURED if name in delivery.table.column_names]


def _passed_through(delivery: Delivery) -> list[str]:
    return [name for name in delivery.table.column_names if name not in REGISTRY]
