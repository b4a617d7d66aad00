"""A page about one delivered file, to be sent to the group that made it: what is wrong, assumed, asked of them."""

from __future__ import annotations

from collections import Counter
from typing import TYPE_CHECKING

import pyarrow.compute as pc

from flows.pages import Block, Grid, Heading, Paragraph, Sentences
from pipeline.findings import Severity
from pipeline.reading import DeliveryKind
from pipeline.variables import MEASURED, REGISTRY, flag_name
from pipeline.version import VERSION

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping, Sequence

    import pyarrow as pa

    from pipeline.findings import Finding, Reject
    from pipeline.reading import Delivery
    from pipeline.settings import UseSettings

MOST_OF_A_KIND = 50  # findings of one kind, and rejected rows, that are told one by one
_SELF_DESCRIBED = (".nc", ".nc4", ".cdf")
_RAW = 200  # characters of a rejected row

_GRAVEST_FIRST = (Severity.FAULT, Severity.DOUBT, Severity.NOTE)
_TITLES = {
    Severity.FAULT: "What is wrong",
    Severity.DOUBT: "What is doubtful",
    Severity.NOTE: "What we assumed, and what else is worth knowing",
}
_ASKED = {
    Severity.FAULT: "Please correct what is wrong, or tell us the right values",
    Severity.DOUBT: "Please look at what is doubtful, and correct or flag it, or tell us that it is right",
}
_TO_DO = "; correct the row and deliver the file again."  # asked once for all rows


def note(delivery: Delivery, findings: Sequence[Finding], use: UseSettings) -> list[Block]:
    """Return the page about a file that was read.

    Parameters
    ----------
    delivery
        The file.
    findings
        All that was noticed in it, of one check in the order of the lines.
    use
        Which flags count as good.

    """
    blocks: list[Block] = [
        Heading(f"Note on {delivery.name}", 1),
        Paragraph(
            "Thank you for this file. We have read and checked it; this page says what we found, what we took for "
            "granted, and what we ask of you. Lines are counted from the first line of the file."
        ),
        Grid(_about(delivery, findings)),
        Heading("What we ask of you"),
        Sentences(_requests(delivery.rejects, findings)),
    ]
    if delivery.rejects:
        blocks += [Heading(f"Rows that could not be used: {len(delivery.rejects)}"), *_rejected(delivery)]
    for severity in _GRAVEST_FIRST:
        mine = [finding for finding in findings if finding.severity == severity]
        told = list(_told(mine, delivery.name))
        if severity is Severity.NOTE:
            told += _always_assumed(delivery, use)
        if told:
            count = f": {_cases(mine)}" if severity is not Severity.NOTE else ""
            blocks += [Heading(f"{_TITLES[severity]}{count}"), Sentences(told)]
    blocks += [Heading("What was read"), Grid(_quantities(delivery, findings))]
    if others := [name for name in delivery.table.column_names if name not in REGISTRY]:
        blocks.append(
            Paragraph(
                f"Columns that are kept as they came and not used: {', '.join(others)}. They are unknown to us, or "
                "hold the numbers in your unit beside those that were converted."
            )
        )
    return blocks


def refused_note(name: str, sentence: str, size: int | None, sha256: str | None) -> list[Block]:
    """Return the page about a file that could not be used at all."""
    about = [("file", name)]
    if size is not None and sha256 is not None:
        about += [("bytes", str(size)), ("SHA-256", sha256)]
    return [
        Heading(f"Note on {name}", 1),
        Paragraph(
            "Thank you for this file. We could not use it; this page says why, and what we ask of you."
        ),
        Grid([*about, ("read by", f"seawhence {VERSION}")]),
        Heading("Why it could not be used"),
        Sentences([sentence]),
        Heading("What we ask of you"),
        Sentences(
            ["Please mend this and send us the file again. Nothing of it was used, and nothing was changed."]
        ),
    ]


def _about(delivery: Delivery, findings: Sequence[Finding]) -> list[tuple[str, str]]:
    count = {severity: _cases(f for f in findings if f.severity == severity) for severity in Severity}
    what = "bottle samples" if delivery.kind is DeliveryKind.BOTTLE else "CTD levels"
    return [
        ("file", delivery.name),
        ("bytes", str(delivery.size)),
        ("SHA-256", delivery.sha256),
        ("cruise", ", ".join(delivery.cruises)),
        ("holds", what),
        ("rows", f"{delivery.rows}: {delivery.table.num_rows} used, {len(delivery.rejects)} not used"),
        (
            "found",
            f"{count[Severity.FAULT]} wrong, {count[Severity.DOUBT]} doubtful, {count[Severity.NOTE]} worth knowing",
        ),
        ("read by", f"seawhence {VERSION}"),
    ]


def _requests(rejects: Sequence[Reject], findings: Sequence[Finding]) -> list[str]:
    """Return what is asked, the gravest first: rows that are lost, what is wrong, what is doubtful."""
    asked = []
    if rejects:
        rows = "row that" if len(rejects) == 1 else f"{len(rejects)} rows that"
        asked.append(f"Please correct the {rows} could not be used, and send us the whole file again.")
    for severity, words in _ASKED.items():
        counts: Counter[str] = Counter()
        for finding in findings:
            if finding.severity == severity:
                counts[_name(finding.variable)] += finding.count
        if counts:
            asked.append(f"{words}: {', '.join(f'{name} {count}' for name, count in counts.most_common())}.")
    last = "If anything that we assumed is not as you meant it, please tell us."
    return [*asked, last] if asked else ["Nothing: we found nothing that is wrong or doubtful.", last]


def _cases(findings: Iterable[Finding]) -> int:
    """Return how many rows findings speak for."""
    return sum(finding.count for finding in findings)


def _name(variable: str | None) -> str:
    """Return what a quantity is called in the file; what is no quantity is the file as a whole."""
    if variable is None:
        return "the file"
    if variable not in REGISTRY:
        return variable
    known = REGISTRY[variable]
    return known.exchange[0] if known.exchange else known.long_name


def _groups(findings: Iterable[Finding]) -> list[list[Finding]]:
    """Return findings of one check and variable together, in the order of the first of each."""
    groups: dict[tuple[str, str | None], list[Finding]] = {}
    for finding in findings:
        groups.setdefault((finding.check, finding.variable), []).append(finding)
    return list(groups.values())


def _told(findings: Sequence[Finding], name: str) -> Iterator[str]:
    for group in _groups(findings):
        yield from (_here(finding.message, name) for finding in group[:MOST_OF_A_KIND])
        if left := _cases(group[MOST_OF_A_KIND:]):
            yield f"... and {left} more like the last."


def _here(message: str, name: str) -> str:
    """Return a sentence without the name of the file, which the page is about."""
    for start in (f"{name}, ", f"{name}: "):
        if message.startswith(start):
            rest = message.removeprefix(start)
            return rest[:1].upper() + rest[1:]
    return message.removeprefix(f"{name}:")  # of a member of a zip its own name is left


def _always_assumed(delivery: Delivery, use: UseSettings) -> list[str]:
    """Return what is taken for granted of every file of its format, or what says what stands in it."""
    kept = "Your values and flags are kept as you sent them; what we think of them stands beside them."
    if delivery.described_by:
        return [
            "Names, units, flags, missing codes and times were read as the description beside the file says.",
            kept,
        ]
    if delivery.name.lower().endswith(_SELF_DESCRIBED):
        return [
            "Names, units, flags, missing values and times were read as the file itself describes them.",
            kept,
        ]
    flags = use.water_flags if delivery.kind is DeliveryKind.BOTTLE else use.ctd_flags
    kind = "water samples" if delivery.kind is DeliveryKind.BOTTLE else "CTD values"
    *others, last = map(str, flags) if flags else ("none",)
    good = f"flags {', '.join(others)} and {last}" if others else f"flag {last}"
    unflagged = ", and so do values without any flag" if use.unflagged else "; values without any flag do not"
    return [
        "Dates and times were taken as UTC.",
        (
            "-999 and longer codes of that kind were read as missing; -9 and -99 only where the flag says so, or where "
            "they could not be a value."
        ),
        f"Flags were read as WHP quality flags: {kind} under {good} count as good{unflagged}.",
        kept,
    ]


def _rejected(delivery: Delivery) -> Iterator[Block]:
    """Yield the rows that could not be used in the order of their lines, with why and with their text."""
    ordered = sorted(delivery.rejects, key=lambda reject: (reject.file, reject.line or 0))
    rows = [("why", "text of the row")]
    for reject in ordered[:MOST_OF_A_KIND]:
        why = _here(reject.message, delivery.name)
        why = f"{why.removesuffix(_TO_DO)}." if why.endswith(_TO_DO) else why
        rows.append((why, reject.raw[:_RAW] + ("..." if len(reject.raw) > _RAW else "")))
    yield Grid(rows)
    if left := Counter(reject.reason.replace("-", " ") for reject in ordered[MOST_OF_A_KIND:]):
        reasons = ", ".join(f"{reason} {count}" for reason, count in left.items())
        yield Paragraph(f"... and {left.total()} more rows ({reasons}).")


def _quantities(delivery: Delivery, findings: Sequence[Finding]) -> list[tuple[str, ...]]:
    """Return what was read: a row for each measured quantity."""
    table = delivery.table
    without_units = any(f.check == "no-units" and f.file == delivery.name for f in findings)
    rows: list[tuple[str, ...]] = [
        (
            "quantity",
            "name in the file",
            "unit in the file",
            "conversion",
            "values",
            "missing",
            "flags, with their number",
        )
    ]
    for name in (name for name in MEASURED if name in table.column_names):
        told = {
            key.decode(): text.decode() for key, text in (table.schema.field(name).metadata or {}).items()
        }
        missing = table.column(name).null_count
        rows.append(
            (
                REGISTRY[name].long_name,
                told.get("delivered_name") or _spelled(name, findings),
                "-" if without_units else _unit(name, told, findings),
                told.get("conversion", "none"),
                str(table.num_rows - missing),
                str(missing),
                _flags(table, name),
            )
        )
    return rows


def _spelled(name: str, findings: Sequence[Finding]) -> str:
    said = (f.value for f in findings if f.check == "column-spelling" and f.variable == name and f.value)
    return next(said, REGISTRY[name].exchange[0])


def _unit(name: str, told: Mapping[str, str], findings: Sequence[Finding]) -> str:
    """Return the unit as it stands in the file; "-" where none does, or where reading does not keep it."""
    if "delivered_units" in told:
        return told["delivered_units"] or "-"
    if any(f.check == "unit-assumed" and f.variable == name for f in findings):
        return "-"
    said = (f.value for f in findings if f.check == "unit-spelling" and f.variable == name and f.value)
    usual = "" if REGISTRY[name].unit == "1" else REGISTRY[name].exchange_unit
    return next(said, usual) or "-"


def _flags(table: pa.Table, name: str) -> str:
    """Return the delivered flags of a quantity, each with how often it stands."""
    if flag_name(name) not in table.column_names:
        return "none given"
    counted = [
        (one["values"], one["counts"]) for one in pc.value_counts(table.column(flag_name(name))).to_pylist()
    ]
    known = sorted((flag, count) for flag, count in counted if flag is not None)
    blank = [("blank", count) for flag, count in counted if flag is None]
    return ", ".join(f"{flag}: {count}" for flag, count in [*known, *blank])
