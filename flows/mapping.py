"""The command ``seawhence mapping``: a draft of the description that a file needs, for a person to finish."""

from __future__ import annotations

from typing import TYPE_CHECKING

from flows.records import ExitStatus
from pipeline.problems import DeliveryProblem, UsageProblem
from pipeline.reading.draft import draft_description
from pipeline.settings import read_settings

if TYPE_CHECKING:
    import argparse
    from pathlib import Path


def mapping(chosen: argparse.Namespace) -> int:
    """Print a draft for a file, or write it where there is nothing yet; return the exit status."""
    settings = read_settings(chosen.settings)
    out: Path | None = chosen.out
    if out is not None and out.exists():
        raise UsageProblem(
            f"{out}: there is such a file already; it was left as it is; name another, or move it away."
        )
    try:
        if chosen.file.exists() and not chosen.file.is_file():  # a pipe would wait for ever
            raise UsageProblem(f"{chosen.file}: found no regular file; give a delivered file.")
        data = chosen.file.read_bytes()
    except OSError as error:
        raise UsageProblem(
            f"{chosen.file}: the file cannot be read ({error.strerror}); give another file."
        ) from error
    try:
        draft = draft_description(chosen.file.name, data, settings.reading)
    except DeliveryProblem as problem:
        print(f"refused: {problem}")
        return ExitStatus.REFUSED
    if out is None:
        print(draft, end="")
        return ExitStatus.GOOD
    try:
        with out.open("x", encoding="utf-8") as stream:
            stream.write(draft)
    except OSError as error:
        raise UsageProblem(
            f"{out}: the draft cannot be written there ({error.strerror}); name another file."
        ) from error
    print(f"{out}: a draft; read every line of it, and fill in what only you know")
    return ExitStatus.GOOD
