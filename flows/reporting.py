"""The command ``seawhence report``: pages to look at, made from an archive."""

from __future__ import annotations

import sys
from typing import TYPE_CHECKING

from flows.records import ExitStatus
from pipeline.archive import open_archive, read_contents
from pipeline.problems import ArchiveProblem, UsageProblem
from pipeline.reporting import archive_page, cruise_page, file_name, gather, summary, unreadable
from pipeline.settings import read_settings

if TYPE_CHECKING:
    import argparse
    from collections.abc import Mapping
    from pathlib import Path

    from pipeline.reporting import Summary

INDEX = "index.html"


def report(chosen: argparse.Namespace) -> int:
    """Write the page of the archive and one for each cruise that was asked for; tell what could not be read.

    Parameters
    ----------
    chosen
        ``archive`` and ``out`` are paths, ``cruises`` expocodes, all cruises where there are none, ``settings`` a
        path or None.

    """
    use = read_settings(chosen.settings).use
    store = open_archive(chosen.archive)
    if chosen.out.resolve().is_relative_to(chosen.archive.resolve()):
        raise UsageProblem(f"{chosen.out}: it lies in the archive; give a directory outside it as --out.")
    contents = read_contents(store)
    unknown = [expocode for expocode in chosen.cruises if expocode not in contents.cruises]
    if unknown:
        known = ", ".join(contents.cruises) or "none"
        raise UsageProblem(f"{chosen.archive}: there is no cruise '{unknown[0]}'; its cruises are: {known}.")
    wanted = frozenset(chosen.cruises or contents.cruises)
    made: list[Summary] = []
    written = 0
    for expocode, contained in contents.cruises.items():
        try:
            cruise = gather(store, contained, use)
        except ArchiveProblem as problem:
            made.append(unreadable(contained, "" if contained.troubles else str(problem)))
            continue
        made.append(summary(cruise))
        if expocode in wanted:
            _write(chosen.out, cruise_page(cruise))
            written += 1
    strangers = [f"{stranger}: not a table of the archive." for stranger in contents.strangers]
    # pages of an earlier call that named other cruises are linked too
    linked = frozenset(one.expocode for one in made if (chosen.out / file_name(one.expocode)).is_file())
    _write(chosen.out, archive_page(made, linked, strangers))
    troubles = [trouble for one in made for trouble in one.troubles]
    for trouble in troubles:
        print(f"left out  {trouble}", file=sys.stderr)
    pages = f"{written} cruise page{'s' if written != 1 else ''}"
    print(f"{pages} and the page of the archive. Open {chosen.out / INDEX}.")
    return ExitStatus.REFUSED if troubles else ExitStatus.GOOD


def _write(out: Path, files: Mapping[str, bytes]) -> None:
    """Write every file whole, or leave what stood there."""
    part = out / ".part"
    try:
        for name, data in files.items():
            (out / name).parent.mkdir(parents=True, exist_ok=True)
            part.write_bytes(data)
            part.replace(out / name)
    except OSError as error:
        raise UsageProblem(
            f"{out}: the pages cannot be written there ({error.strerror}); give another directory as --out."
        ) from error
    finally:
        part.unlink(missing_ok=True) if out.is_dir() else None
