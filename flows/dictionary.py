"""The command ``seawhence dictionary``: what every column of every table is."""

from __future__ import annotations

from typing import TYPE_CHECKING

from flows.records import ExitStatus
from pipeline.dictionary import as_csv, as_json, as_markdown
from pipeline.problems import UsageProblem

if TYPE_CHECKING:
    import argparse

FORMS = {"markdown": as_markdown, "json": as_json, "csv": as_csv}


def dictionary(chosen: argparse.Namespace) -> int:
    """Print the data dictionary, or write it.

    Parameters
    ----------
    chosen
        ``format`` is ``markdown``, ``json`` or ``csv``, ``out`` is a path or None.

    """
    text = FORMS[chosen.format]()
    if chosen.out is None:
        print(text, end="")
        return ExitStatus.GOOD
    part = chosen.out.with_name(f".{chosen.out.name}.part")
    try:
        part.write_text(text, encoding="utf-8")
        part.replace(chosen.out)
    except OSError as error:
        part.unlink(missing_ok=True)
        raise UsageProblem(
            f"{chosen.out}: the dictionary cannot be written ({error.strerror}); give another file as --out."
        ) from error
    return ExitStatus.GOOD
