"""A page about one delivered file, to be sent to the group that made it: what is wrong, assumed, asked of them."""

from __future__ import annotations

from collections import Counter
from typing import TYPE_CHECKING

from flows.note_tables import described_columns, described_whole, quantities
from flows.pages import Block, Grid, Heading, Paragraph, Sentences
from flows.to_group import OUR_FAULTS, counted, here, refusal_said, said
from pipeline.findings import Severity, rows_word
from pipeline.reading import DeliveryKind
from pipeline.variables import REGISTRY
from pipeline.version import VERSION

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping, Sequence

    from pipeline.findings import Finding
    from pipeline.reading import Delivery, Description
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


def note(
    delivery: Delivery, findings: Sequence[Finding], use: UseSettings, description: Description | None = None
) -> list[Block]:
    """Return the page about a file that was read.

    Parameters
    ----------
    delivery
        The file.
    findings
        All that was noticed in it, of one check in the order of the lines.
    use
        Which flags count as good.
    description
        How it was read, where we were told.

    """
    rows = rows_word(delivery.name)
    blocks: list[Block] = [
        Heading(f"Note on {delivery.name}", 1),
        Paragraph(
            "Thank you for this file. We have read and checked it; this page says what we found, what we took for "
            f"granted, and what we ask of you. {counted(delivery.name)}"
        ),
        Grid(_about(delivery, findings)),
        Heading("What we ask of you"),
        Sentences(_requests(delivery, findings)),
    ]
    if delivery.rejects:
        blocks += [
            Heading(f"{rows.capitalize()} that could not be used: {len(delivery.rejects)}"),
            *_rejected(delivery),
        ]
    for severity in _GRAVEST_FIRST:
        mine = [finding for finding in findings if finding.severity == severity]
        told = list(_told(mine, delivery.name))
        if severity is Severity.NOTE:
            told += _always_assumed(delivery, use, description)
        if told:
            count = f": {len(mine)}" if severity is not Severity.NOTE else ""
            blocks += [Heading(f"{_TITLES[severity]}{count}"), Sentences(told)]
    if description is not None:
        blocks.append(Heading("How we read your file"))
        whole = described_whole(description, says_itself=delivery.name.lower().endswith(_SELF_DESCRIBED))
        if whole:
            blocks.append(Sentences(whole))
        if description.columns:
            blocks.append(Grid(described_columns(description)))
    blocks += [Heading("What was read"), Grid(quantities(delivery, findings))]
    if others := [name for name in delivery.table.column_names if name not in REGISTRY]:
        blocks.append(
            Paragraph(
                f"Columns that are kept as they came and not used: {', '.join(others)}. They are unknown to us, or "
                "hold the numbers in your unit beside those that were converted."
            )
        )
    return blocks


def refused_note(name: str, reason: str, sentence: str, size: int | None, sha256: str | None) -> list[Block]:
    """Return the page about a file that could not be used at all."""
    about = [("file", name)]
    if size is not None and sha256 is not None:
        about += [("bytes", str(size)), ("SHA-256", sha256)]
    head = Heading(f"Note on {name}", 1)
    grid = Grid([*about, ("read by", f"seawhence {VERSION}")])
    if reason in OUR_FAULTS:
        return [
            head,
            Paragraph(
                "Do not send this page: what is in the way is our own description of the file. Mend that first."
            ),
            grid,
            Sentences([here(sentence, name)]),
        ]
    why, asked = refusal_said(reason, sentence, name)
    return [
        head,
        Paragraph(
            "Thank you for this file. We could not use it; this page says why, and what we ask of you."
        ),
        grid,
        Heading("Why it could not be used"),
        Sentences([why]),
        Heading("What we ask of you"),
        Sentences([asked]),
    ]


def _about(delivery: Delivery, findings: Sequence[Finding]) -> list[tuple[str, str]]:
    count = Counter(finding.severity for finding in findings)
    what = "bottle samples" if delivery.kind is DeliveryKind.BOTTLE else "CTD levels"
    return [
        ("file", delivery.name),
        ("bytes", str(delivery.size)),
        ("SHA-256", delivery.sha256),
        ("cruise", ", ".join(delivery.cruises)),
        ("holds", what),
        (
            rows_word(delivery.name),
            f"{delivery.rows}: {delivery.table.num_rows} used, {len(delivery.rejects)} not used",
        ),
        (
            "found",
            f"{count[Severity.FAULT]} wrong, {count[Severity.DOUBT]} doubtful, {count[Severity.NOTE]} worth knowing",
        ),
        ("read by", f"seawhence {VERSION}"),
    ]


def _requests(delivery: Delivery, findings: Sequence[Finding]) -> list[str]:
    """Return what is asked, the gravest first: rows that are lost, what is wrong, what is doubtful."""
    asked = []
    rows = rows_word(delivery.name)
    if lost := len(delivery.rejects):
        which = f"{rows[:-1]} that" if lost == 1 else f"{lost} {rows} that"
        asked.append(f"Please correct the {which} could not be used, and send us the whole file again.")
    for severity, words in _ASKED.items():
        counts: Counter[str] = Counter()
        for finding in findings:
            if finding.severity == severity:
                counts[_name(finding.variable, delivery.words)] += finding.count
        if counts:
            told = ", ".join(
                f"{name} ({count} {rows[:-1] if count == 1 else rows})"
                for name, count in counts.most_common()
            )
            asked.append(f"{words}: {told}.")
    last = "If anything that we assumed is not as you meant it, please tell us."
    return [*asked, last] if asked else ["Nothing: we found nothing that is wrong or doubtful.", last]


def _name(variable: str | None, words: Mapping[str, str]) -> str:
    """Return what a quantity is called in the file; what is no quantity is the file as a whole."""
    if variable is None:
        return "the file"
    if variable in words or variable not in REGISTRY:
        return words.get(variable, variable)
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
        yield from (said(finding, name) for finding in group[:MOST_OF_A_KIND])
        if left := len(group[MOST_OF_A_KIND:]):
            yield f"... and {left} more like the last."


def _always_assumed(delivery: Delivery, use: UseSettings, description: Description | None) -> list[str]:
    """Return what is taken for granted of every file of its format, or what says what stands in it."""
    kept = "Your values and flags are kept as you sent them; what we think of them stands beside them."
    if description is not None and description.columns:
        itself = delivery.name.lower().endswith(_SELF_DESCRIBED)
        how = "as the file itself describes them and as listed below" if itself else "as listed below"
        return [f"Names, units, flags, missing codes and times were read {how}.", kept]
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
    word = rows_word(delivery.name)
    rows = [("why", f"text of the {word[:-1]}")]
    for reject in ordered[:MOST_OF_A_KIND]:
        why = said(reject, delivery.name)
        why = f"{why.removesuffix(_TO_DO)}." if why.endswith(_TO_DO) else why
        rows.append((why, reject.raw[:_RAW] + ("..." if len(reject.raw) > _RAW else "")))
    yield Grid(rows)
    if left := Counter(reject.reason.replace("-", " ") for reject in ordered[MOST_OF_A_KIND:]):
        reasons = ", ".join(f"{reason} {count}" for reason, count in left.items())
        yield Paragraph(f"... and {left.total()} more {word} ({reasons}).")
