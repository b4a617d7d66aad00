"""The arguments of the commands whose result others build on: census, export and dictionary, with the words of help."""

from __future__ import annotations

import argparse
from pathlib import Path

from flows.places import place

CENSUS_EXAMPLE = """\
example:
  seawhence census archive ZZV120090306 --boundaries 36.5 36.9 37.0
  seawhence census archive ZZV120090306 ZZV220210218 --format markdown --out census.parquet

tells how much of a section each source water makes up, of the whole and by density class, and of two occupations
whether the change is more than its uncertainty. Uncertainties come from the ensemble, with the settings and source
waters that the archive was made with."""

EXPORT_EXAMPLE = """\
example:
  seawhence export archive ZZV120090306 --out samples.nc
  seawhence export archive ZZV120090306 --table casts --out casts.nc

writes the samples of a cruise, or its CTD levels, as profiles in a CF NetCDF file, with flags, shares and what the
table was made from."""

DICTIONARY_EXAMPLE = """\
example:
  seawhence dictionary
  seawhence dictionary --format csv --out columns.csv

lists every column of every table with its unit, CF standard name, source, exchange names, plausible range and usual
uncertainty, and what the flags and tags mean."""

STATUSES = """\
exit status: 0 it was made; 2 wrong usage, or an archive that cannot be read; 3 a fault of ours"""


def add_tables(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the parsers of ``seawhence census``, ``export`` and ``dictionary``."""
    plain = argparse.RawDescriptionHelpFormatter
    census = commands.add_parser(
        "census", help="tell how much of a section each source water makes up",
        description="Tell how much of a section each source water makes up, and what changed between two occupations.",
        epilog=f"{CENSUS_EXAMPLE}\n\n{STATUSES}", formatter_class=plain,
    )  # fmt: skip
    census.add_argument("archive", type=place, metavar="ARCHIVE", help="the archive's directory")
    census.add_argument("cruise", metavar="CRUISE", help="expocode of a cruise")
    census.add_argument(
        "other", nargs="?", metavar="CRUISE2", help="another occupation, compared with the first"
    )
    census.add_argument("--density", choices=("sigma0", "sigma2", "sigma4"), help="what the classes are of")
    census.add_argument(
        "--boundaries", type=float, nargs="+", metavar="SIGMA", help="kg/m3 between the density classes"
    )
    census.add_argument("--settings", type=Path, metavar="FILE.toml", help="settings; of it [census] is used")
    census.add_argument(
        "--format", choices=("text", "json", "markdown"), default="text", help="default: text"
    )
    census.add_argument(
        "--out", type=Path, metavar="FILE.parquet", help="write the census there as a table too"
    )

    export = commands.add_parser(
        "export", help="write a cruise as a CF NetCDF file",
        description="Write the samples of a cruise, or its CTD levels, as a CF NetCDF file of profiles.",
        epilog=f"{EXPORT_EXAMPLE}\n\n{STATUSES}", formatter_class=plain,
    )  # fmt: skip
    export.add_argument("archive", type=place, metavar="ARCHIVE", help="the archive's directory")
    export.add_argument("cruise", metavar="CRUISE", help="expocode of a cruise")
    export.add_argument("--table", choices=("samples", "casts"), default="samples", help="default: samples")
    export.add_argument("--out", type=Path, required=True, metavar="FILE.nc", help="where it is written")

    dictionary = commands.add_parser(
        "dictionary", help="list what every column of every table is",
        description="List every column of every table, and what flags and tags mean.",
        epilog=f"{DICTIONARY_EXAMPLE}\n\n{STATUSES}", formatter_class=plain,
    )  # fmt: skip
    dictionary.add_argument(
        "--format", choices=("markdown", "json", "csv"), default="markdown", help="default: markdown"
    )
    dictionary.add_argument("--out", type=Path, metavar="FILE", help="write it there; printed without it")
