"""The arguments of every command, with the words of its help. No work is done and no room is loaded here."""

from __future__ import annotations

import argparse
from pathlib import Path

from flows.places import place
from flows.table_parsers import add_tables
from pipeline.version import VERSION

_MOST_WORKERS = 256

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

NIGHTLY_EXAMPLE = """\
example:
  seawhence nightly deliveries --archive archive --at 02:30 --timezone UTC
  seawhence nightly deliveries --archive archive --once

runs as a Prefect flow at that time of every day until it is stopped, or once, now. Where PREFECT_API_URL names no
server it starts one of its own, on this machine alone. With --pool the server's workers run it, and the command ends.
Whom to notify may also stand in SEAWHENCE_NOTIFY_COMMAND and SEAWHENCE_NOTIFY_URL."""

CHECK_EXAMPLE = """\
example:
  seawhence check deliveries/*.csv
  seawhence check deliveries/a_hy1.csv --format markdown > note.md

reads and checks the files and writes nothing. As Markdown it is a page to send to the group that made the file."""

MAPPING_EXAMPLE = """\
example:
  seawhence mapping deliveries/nutrients.xlsx --out deliveries/cruise.toml

drafts the cruise.toml that a table needs, with every doubt as a comment. Read and finish it: a run uses a
cruise.toml that lies beside its file, and never a guess."""

SHOW_EXAMPLE = """\
example:
  seawhence show archive
  seawhence show archive ZZV120090214

lists the cruises of an archive, or tells of one cruise what it was made from, what became of every row, and what
its samples are. With --verify every delivered file that is kept is hashed again and every table is read."""


CHANGES_EXAMPLE = """\
example:
  seawhence changes archive ZZV120090214
  seawhence changes archive ZZV120090214 --from 1 --to 3 --format markdown --out changes.parquet

tells which samples, CTD levels and values differ between two revisions of a cruise, and whether the delivery or
the processing is another. Of what is computed from the delivered values only counts and the largest difference
are told."""

CHANGES_STATUSES = """\
exit status: 0 the revisions were compared, or there is only one; 2 wrong usage, or an archive that cannot be read;
3 a fault of ours"""

SHOW_STATUSES = """\
exit status: 0 what was looked at is whole; 1 something is damaged or missing (each is told); 2 wrong usage, or an
archive that cannot be read; 3 a fault of ours"""

SOURCES_CHECK_EXAMPLE = """\
example:
  seawhence sources check sources.toml
  seawhence sources check sources.toml --properties conservative_temperature preformed_salinity oxygen

tells of every set how well its sources can be told apart, and in a sentence what stands in the way."""

SOURCES_DERIVE_EXAMPLE = """\
example:
  seawhence sources derive archive --rules rules.toml --out sources.toml

finds each source by its rule in the good values of the archive, and writes how it was found beside it."""

CROSSOVERS_EXAMPLE = """\
example:
  seawhence crossovers archive --out crossovers

compares the deep values of every two cruises that come near each other, and writes the offsets, the corrections
that would make all agree, and a page with both in sentences. The archive is not changed."""

CROSSOVERS_STATUSES = """\
exit status: 0 the cruises were compared; 1 some could not be read (each is told why); 2 wrong usage; 3 a fault of
ours"""

SPECIATION_EXAMPLE = """\
example:
  seawhence speciation --salinity 35 --temperature 25
  seawhence speciation --salinity 34.7 --temperature 1.5 --pressure 4000 --out deep.svg

tells how carbon is divided into carbon dioxide, bicarbonate and carbonate over pH, with the constants of the
settings, and where ocean water lies."""

REPORT_EXAMPLE = """\
example:
  seawhence report archive --out pages
  seawhence report archive ZZV120090306 --out pages

writes a page of the archive and one of each cruise, which open from the disk: no server, no network. The data of
every figure lie beside them as CSV files."""

REPORT_STATUSES = """\
exit status: 0 every page was written; 1 cruises were left out (each is told why); 2 wrong usage, or an archive that
cannot be read; 3 a fault of ours"""

SPECIATION_STATUSES = """\
exit status: 0 the table was made; 2 wrong usage; 3 a fault of ours"""

SOURCES_DERIVE_STATUSES = """\
exit status: 0 every source was found and the catalogue is written; 1 it is written, and cruises were left out (each
is told why); 2 wrong usage, rules or an archive that cannot be used, or a source that was not found: nothing is
written; 3 a fault of ours"""

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
    _add_what_is_run(run)
    run.add_argument(
        "--flow", action="store_true",
        help="run as a Prefect flow; always so where PREFECT_API_URL names a server; the tables are the same",
    )  # fmt: skip
    run.add_argument(
        "--workers", type=_number_of_workers, metavar="N",
        help="how many cruises are made at once; as the machine and the work allow without it; the tables are the same",
    )  # fmt: skip

    _add_nightly(commands)
    check = commands.add_parser(
        "check", help="read and check files, write nothing",
        description="Read delivered files and tell what was understood and what is doubtful. Nothing is written.",
        epilog=CHECK_EXAMPLE + "\n\n" + STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    check.add_argument("files", type=Path, nargs="+", metavar="FILE", help="delivered file")
    check.add_argument("--format", choices=("text", "json", "markdown"), default="text", help="default: text")
    check.add_argument("--settings", type=Path, metavar="FILE.toml", help="settings; the defaults without it")

    _add_mapping(commands)
    show = commands.add_parser(
        "show", help="tell what is in an archive",
        description="Tell what is in an archive, or of one cruise: revision, provenance, rows, tags.",
        epilog=SHOW_EXAMPLE + "\n\n" + SHOW_STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    show.add_argument("archive", type=place, metavar="ARCHIVE", help="the archive's directory")
    show.add_argument("cruise", nargs="?", metavar="CRUISE", help="expocode of a cruise")
    show.add_argument("--format", choices=("text", "json"), default="text", help="default: text")
    show.add_argument(
        "--verify", action="store_true", help="hash every kept delivery again and read every table"
    )
    _add_changes(commands)
    _add_sources(commands)
    _add_crossovers(commands)
    _add_report(commands)
    _add_speciation(commands)
    add_tables(commands)
    return top


def _add_what_is_run(run: argparse.ArgumentParser) -> None:
    """Add the arguments that every run has, whenever it comes."""
    run.add_argument(
        "inbox", type=place, metavar="INBOX", help="directory of delivered files, with its folders"
    )
    run.add_argument(
        "--archive", type=place, required=True, metavar="DIR", help="the archive; made if there is none"
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
        "--notify-command",
        metavar="COMMAND",
        help="run it after the run, the summary as JSON on its standard input",
    )
    run.add_argument(
        "--cluster", metavar="ADDRESS",
        help="make the cruises on the workers of the Dask scheduler at tcp://HOST:PORT, as a Prefect flow",
    )  # fmt: skip
    run.add_argument("--notify-url", metavar="URL", help="post the summary there as JSON after the run")


def _number_of_workers(text: str) -> int:
    """Return a number of processes.

    Raises
    ------
    ArgumentTypeError
        Where it is none that can be started.

    """
    if not text.isdecimal() or not 0 < int(text) <= _MOST_WORKERS:
        raise argparse.ArgumentTypeError(f"found '{text}'; expected a whole number from 1 to {_MOST_WORKERS}")
    return int(text)


def _add_nightly(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the parser of ``seawhence nightly``."""
    nightly = commands.add_parser(
        "nightly", help="bring an archive up to date every night, by itself",
        description="Bring an archive up to date with a directory of delivered files, at a time of day.",
        epilog=NIGHTLY_EXAMPLE + "\n\n" + STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    _add_what_is_run(nightly)
    when = nightly.add_mutually_exclusive_group(required=True)
    when.add_argument("--at", metavar="HH:MM", help="time of day, or the five fields of cron")
    when.add_argument("--once", action="store_true", help="run once, now, and end")
    nightly.add_argument("--timezone", default="UTC", metavar="NAME", help="of --at; default: UTC")
    nightly.add_argument("--pool", metavar="NAME", help="deploy to this work pool of the server, and end")


def _add_mapping(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the parser of ``seawhence mapping``."""
    mapping = commands.add_parser(
        "mapping", help="draft the description that a table needs",
        description="Draft a cruise.toml, which says what the columns of a file are. The file is not changed.",
        epilog=MAPPING_EXAMPLE + "\n\n" + STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    mapping.add_argument("file", type=Path, metavar="FILE", help="delivered file")
    mapping.add_argument(
        "--out", type=Path, metavar="cruise.toml", help="where it is written; printed without it"
    )
    mapping.add_argument(
        "--settings", type=Path, metavar="FILE.toml", help="settings; the defaults without it"
    )


def _add_changes(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the parser of ``seawhence changes``."""
    changes = commands.add_parser(
        "changes", help="tell what differs between two revisions of a cruise",
        description="Tell what differs between two revisions of a cruise, the last two where nothing else is said.",
        epilog=CHANGES_EXAMPLE + "\n\n" + CHANGES_STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    changes.add_argument("archive", type=place, metavar="ARCHIVE", help="the archive's directory")
    changes.add_argument("cruise", metavar="CRUISE", help="expocode of a cruise")
    changes.add_argument("--from", dest="earlier", type=int, metavar="N", help="the earlier revision")
    changes.add_argument(
        "--to", dest="later", type=int, metavar="M", help="the later one; the last without it"
    )
    changes.add_argument(
        "--format", choices=("text", "json", "markdown"), default="text", help="default: text"
    )
    changes.add_argument(
        "--out", type=Path, metavar="FILE.parquet", help="write every change there as a table too"
    )


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
        help="judge with these alone, as when others were not measured; one named twice counts once",
    )
    check.add_argument("--settings", type=Path, metavar="FILE.toml", help="settings; the defaults without it")
    check.add_argument("--format", choices=("text", "json"), default="text", help="default: text")

    derive = tasks.add_parser(
        "derive", help="find source waters in an archive by rules",
        description="Find source waters in an archive by rules, and write them as a catalogue.",
        epilog=SOURCES_DERIVE_EXAMPLE + "\n\n" + SOURCES_DERIVE_STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    derive.add_argument("archive", type=place, metavar="ARCHIVE", help="the archive's directory")
    derive.add_argument("--rules", type=Path, required=True, metavar="FILE.toml", help="a rule per source")
    derive.add_argument(
        "--out", type=Path, required=True, metavar="CATALOGUE.toml", help="where the catalogue is written"
    )
    derive.add_argument(
        "--settings", type=Path, metavar="FILE.toml", help="settings; the defaults without it"
    )


def _add_crossovers(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the parser of ``seawhence crossovers``."""
    crossovers = commands.add_parser(
        "crossovers", help="compare the deep values of the cruises of an archive",
        description="Compare the deep values of the cruises of an archive, and propose corrections.",
        epilog=CROSSOVERS_EXAMPLE + "\n\n" + CROSSOVERS_STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    crossovers.add_argument("archive", type=place, metavar="ARCHIVE", help="the archive's directory")
    crossovers.add_argument(
        "--out", type=Path, required=True, metavar="DIR", help="where the tables and the page are written"
    )
    crossovers.add_argument(
        "--settings", type=Path, metavar="FILE.toml", help="settings; the defaults without it"
    )


def _add_report(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the parser of ``seawhence report``."""
    report = commands.add_parser(
        "report", help="write pages to look at",
        description="Write pages of an archive and its cruises, with figures, sentences and the data as CSV files.",
        epilog=REPORT_EXAMPLE + "\n\n" + REPORT_STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    report.add_argument("archive", type=Path, metavar="ARCHIVE", help="the archive's directory")
    report.add_argument(
        "cruises",
        nargs="*",
        metavar="CRUISE",
        help="expocodes of the cruises that get a page; all without it",
    )
    report.add_argument("--out", type=Path, required=True, metavar="DIR", help="where the pages are written")
    report.add_argument(
        "--settings",
        type=Path,
        metavar="FILE.toml",
        help="whose [use] decides which values are shown; the defaults without it",
    )


def _add_speciation(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the parser of ``seawhence speciation``."""
    speciation = commands.add_parser(
        "speciation", help="tell how carbon is divided among its forms over pH",
        description="Tell how carbon is divided among its forms over pH, as a table and as a figure.",
        epilog=SPECIATION_EXAMPLE + "\n\n" + SPECIATION_STATUSES, formatter_class=_Plain,
    )  # fmt: skip
    speciation.add_argument("--salinity", type=float, required=True, metavar="S", help="practical salinity")
    speciation.add_argument("--temperature", type=float, required=True, metavar="T", help="degC")
    speciation.add_argument("--pressure", type=float, default=0.0, metavar="P", help="dbar; 0 without it")
    speciation.add_argument(
        "--out", type=Path, metavar="FILE", help="write a figure (.svg, .png) or a table (.csv)"
    )
    speciation.add_argument("--format", choices=("text", "json"), default="text", help="default: text")
    speciation.add_argument(
        "--settings", type=Path, metavar="FILE.toml", help="settings; the defaults without it"
    )


class _Plain(argparse.RawDescriptionHelpFormatter):
    """Help as it is written."""
