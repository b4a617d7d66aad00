"""The arguments of every command, with the words of its help. No work is done and no room is loaded here."""

from __future__ import annotations

import argparse
from pathlib import Path

from pipeline.version import VERSION

DESCRIPTION = """\
Turn what research cruises deliver, bottle and CTD files, into an archive of Parquet tables in which every
sample is checked, converted to TEOS-10, given its tracers and resolved into the source waters it was mixed
from. The tables inform scientific judgement; they are not for navigation or for decisions on safety at sea."""

STATUSES = """\
exit status: 0 every delivery was used; 1 some were refused (each is told why); 2 wrong usage; 3 a fault of ours"""

RUN_EXAMPLE = """\
example:
  seawhence run deliveries --archive archive --sources sources.toml

prints one line per cruise and where the tables are. Run it again after a new delivery: only what changed is
made anew."""

CHECK_EXAMPLE = """\
example:
  seawhence check deliveries/*.csv

reads and checks the files and writes nothing."""

SHOW_EXAMPLE = """\
example:
  seawhence show archive
  seawhence show archive ZZV120090214

lists the cruises of an archive, or tells of one cruise what it was made from and what its samples are."""


SOURCES_CHECK_EXAMPLE = """\
example:
  seawhence sources check sources.toml
  seawhence sources check sources.toml --properties conservative_temperature preformed_salinity oxygen

tells of every set how well its sources can be told apart, and in a sentence what stands in the way."""

SOURCES_DERIVE_EXAMPLE = """\
example:
  seawhence sources derive archive --rules rules.toml --out sources.toml

finds each source by its rule in the good values of the archive, and writes how it was found beside it."""

SOURCES_STATUSES = """\
exit status: 0 every set can be used; 1 a set has a problem; 2 wrong usage, or a catalogue that cannot be read;
3 a fault of ours"""


def parser() -> argparse.ArgumentParser:
    """Return the parser of the whole command."""
    top = argparse.ArgumentParser(
        "seawhence", description=DESCRIPTION, epilog=STATUSES, formatter_class=_Plain
    )
    top.add_argument("--version", action="version", version=f"seawhence {VERSION}")
    commands = top.add_subparsers(dest="command", required=True, metavar="COMMAND")

    run = commands.add_parser(
        "run", help="bring an archive up to date with an inbox",
        description="Bring an archive up to date with a directory of delivered files.",
        epilog=RUN_EXAMPLE + "\n\n" + STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    run.add_argument(
        "inbox", type=Path, metavar="INBOX", help="directory of delivered files, with its folders"
    )
    run.add_argument(
        "--archive", type=Path, required=True, metavar="DIR", help="the archive; made if there is none"
    )
    run.add_argument(
        "--sources",
        type=Path,
        metavar="FILE.toml",
        help="source waters; without it those of the archive, if any",
    )
    run.add_argument("--settings", type=Path, metavar="FILE.toml", help="settings; the defaults without it")
    run.add_argument("--summary", type=Path, metavar="FILE.json", help="write the summary there as JSON too")
    run.add_argument(
        "--flow", action="store_true",
        help="run as a Prefect flow; always so where PREFECT_API_URL names a server; the tables are the same",
    )  # fmt: skip

    check = commands.add_parser(
        "check", help="read and check files, write nothing",
        description="Read delivered files and tell what was understood and what is doubtful. Nothing is written.",
        epilog=CHECK_EXAMPLE + "\n\n" + STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    check.add_argument("files", type=Path, nargs="+", metavar="FILE", help="delivered file")
    check.add_argument("--format", choices=("text", "json"), default="text", help="default: text")
    check.add_argument("--settings", type=Path, metavar="FILE.toml", help="settings; the defaults without it")

    show = commands.add_parser(
        "show", help="tell what is in an archive",
        description="Tell what is in an archive, or of one cruise: revision, provenance, rows, tags.",
        epilog=SHOW_EXAMPLE, formatter_class=_Plain,
    )  # fmt: skip
    show.add_argument("archive", type=Path, metavar="ARCHIVE", help="the archive's directory")
    show.add_argument("cruise", nargs="?", metavar="CRUISE", help="expocode of a cruise")
    _add_sources(commands)
    return top


def _add_sources(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the parsers of ``seawhence sources``."""
    sources = commands.add_parser(
        "sources", help="judge a catalogue of source waters, or make one from an archive",
        description="Judge a catalogue of source waters before a run, or make one from an archive.",
        formatter_class=_Plain,
    )  # fmt: skip
    tasks = sources.add_subparsers(dest="task", required=True, metavar="TASK")
    check = tasks.add_parser(
        "check", help="tell what a catalogue can tell apart",
        description="Tell how well the sources of every set can be told apart. No cruise is read.",
        epilog=SOURCES_CHECK_EXAMPLE + "\n\n" + SOURCES_STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    check.add_argument("catalogue", type=Path, metavar="CATALOGUE", help="source waters, a TOML file")
    check.add_argument(
        "--properties",
        nargs="+",
        metavar="NAME",
        help="judge with these alone, as when others were not measured",
    )
    check.add_argument("--settings", type=Path, metavar="FILE.toml", help="settings; the defaults without it")
    check.add_argument("--format", choices=("text", "json"), default="text", help="default: text")

    derive = tasks.add_parser(
        "derive", help="find source waters in an archive by rules",
        description="Find source waters in an archive by rules, and write them as a catalogue.",
        epilog=SOURCES_DERIVE_EXAMPLE + "\n\n" + STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    derive.add_argument("archive", type=Path, metavar="ARCHIVE", help="the archive's directory")
    derive.add_argument("--rules", type=Path, required=True, metavar="FILE.toml", help="a rule per source")
    derive.add_argument(
        "--out", type=Path, required=True, metavar="CATALOGUE.toml", help="where the catalogue is written"
    )
    derive.add_argument(
        "--settings", type=Path, metavar="FILE.toml", help="settings; the defaults without it"
    )


class _Plain(argparse.RawDescriptionHelpFormatter):
    """Help as it is written."""
