"""Sentences as they are said to the group that made a file: nothing of our own files, and names as it wrote them."""

from __future__ import annotations

import re
from dataclasses import replace
from pathlib import PurePosixPath
from typing import TYPE_CHECKING

from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from pipeline.findings import Finding, Reject

# Ends of sentences, and clauses of them, that say what the data manager may do here.
_OUR_ENDING = re.compile(r",? or ((give|say) it in )?a cruise\.toml\b.*$|, or raise [\w.]+ in the settings\b")
_OUR_CLAUSE = re.compile(r"cruise\.toml|seawhence |\binbox\b|\bsettings\b|^ask (for|which)\b")
# Words that a sentence may begin with in small letters and a name does not.
_STARTS = frozenset({
    "line", "lines", "row", "rows", "record", "records", "the", "there", "none", "nothing", "no", "dates", "its",
    "found", "units", "a", "an", "one", "more", "every", "all", "neither",
})  # fmt: skip
# Refusals for which our own description of a file is to blame.
OUR_FAULTS = frozenset({
    "broken-description", "unusable-description", "no-kind", "column-not-there", "other-format", "other-kind",
    "which-sheet", "wrong-encoding", "no-heading",
})  # fmt: skip
_NOT_DESCRIBED = (
    "It is a table with a form of its own: nothing in it says for certain what its columns are, in what unit, and whose"
    " flags they have."
)
_ASK_DESCRIPTION = (
    "Please tell us of each column what it holds, in what unit, and which column has its flags and whose flags these"
    " are; or send us the cruise in the exchange format. Nothing of the file was used so far."
)
_ASK_ANEW = "Please mend this and send us the file again. Nothing of it was used, and nothing was changed."
_COUNTED = {
    ".nc": "Records are counted from 1, level by level and profile by profile, as they lie in the file.",
    ".xlsx": "Rows have the numbers that the spreadsheet shows.",
    ".parquet": "Rows are counted from 1, the first of the data.",
    ".zip": "Lines are counted from the first line of each file in the zip.",
}
_COUNTED |= dict.fromkeys((".nc4", ".cdf"), _COUNTED[".nc"])


def counted(file: str) -> str:
    """Return how the places that sentences name are counted in a file."""
    return _COUNTED.get(
        PurePosixPath(file).suffix.lower(), "Lines are counted from the first line of the file."
    )


def said(one: Finding | Reject, file: str) -> str:
    """Return what a finding or a reject says to the group, without the name of the file that the page is about."""
    return here(one.to_group or without_ours(one.message), file)


def without_ours(message: str) -> str:
    """Return a sentence without the clauses that speak of our own files."""
    clauses = _OUR_ENDING.sub("", message).split("; ")
    kept = [clause for clause in clauses[1:] if not _OUR_CLAUSE.search(clause)]
    text = "; ".join([clauses[0], *kept])
    return text if text.endswith((".", "?", "!")) else f"{text}."


def refusal_said(reason: str, message: str, file: str) -> tuple[str, str]:
    """Return why a file could not be used and what is asked, in words for the group."""
    if reason == "not-described":
        return _NOT_DESCRIBED, _ASK_DESCRIPTION
    return here(without_ours(message), file), _ASK_ANEW


def here(message: str, name: str) -> str:
    """Return a sentence without the name of the file; what it begins with is written large where it is no name."""
    for start in (f"{name}, ", f"{name}: "):
        if message.startswith(start):
            rest = message.removeprefix(start)
            first = re.split(r"[ ,:;]", rest, maxsplit=1)[0]
            return rest[:1].upper() + rest[1:] if first in _STARTS else rest
    return message.removeprefix(f"{name}:")  # of a member of a zip its own name is left


def as_delivered(findings: Iterable[Finding], words: Mapping[str, str]) -> tuple[Finding, ...]:
    """Return findings of checks, which name quantities as the exchange format does, with the names of the file.

    Parameters
    ----------
    findings
        What checks noticed.
    words
        What the file calls its quantities.

    """
    names = {
        label: word
        for quantity, word in words.items()
        if quantity in REGISTRY and REGISTRY[quantity].exchange
        and (label := REGISTRY[quantity].exchange[0]) != word and label.isupper()
    }  # fmt: skip
    if not names:
        return tuple(findings)
    pattern = re.compile(rf"(?<!\w)({'|'.join(sorted(map(re.escape, names), key=len, reverse=True))})(?!\w)")

    def renamed(message: str) -> str:
        place, colon, rest = message.partition(": ")
        return f"{place}{colon}{pattern.sub(lambda found: names[found[1]], rest)}"

    return tuple(
        replace(one, message=renamed(one.message), to_group=renamed(one.to_group)) for one in findings
    )
