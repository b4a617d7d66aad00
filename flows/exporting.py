"""The command ``seawhence export``: a cruise as a CF NetCDF file."""

from __future__ import annotations

from typing import TYPE_CHECKING

from flows.records import ExitStatus
from pipeline.archive import open_archive, read_cruise, read_table
from pipeline.exporting import export_netcdf
from pipeline.problems import ArchiveProblem, UsageProblem

if TYPE_CHECKING:
    import argparse


def export(chosen: argparse.Namespace) -> int:
    """Write a table of a cruise as a NetCDF file.

    Parameters
    ----------
    chosen
        ``archive`` and ``out`` are paths, ``cruise`` is an expocode, ``table`` is ``samples`` or ``casts``.

    """
    out = chosen.out
    if out.suffix != ".nc":
        raise UsageProblem(f"{out}: found another ending, expected .nc; give such a file as --out.")
    if out.resolve().is_relative_to(chosen.archive.resolve()):
        raise UsageProblem(
            f"{out}: lies in the archive, which keeps its own tables only; give another file as --out."
        )
    store = open_archive(chosen.archive)
    found = read_cruise(store, chosen.cruise)
    if found.provenance is None and not found.rows:
        raise UsageProblem(
            f"{chosen.archive}: there is no cruise '{chosen.cruise}'; 'seawhence show' lists those that there are."
        )
    if not found.is_whole or found.provenance is None:
        raise ArchiveProblem(" ".join(found.troubles))
    table, mixtures = (read_table(store, chosen.cruise, name) for name in (chosen.table, "mixtures"))
    data = export_netcdf(chosen.table, table, mixtures, found.provenance)
    part = out.with_name(f".{out.name}.part")
    try:
        part.write_bytes(data)
        part.replace(out)
    except OSError as error:
        part.unlink(missing_ok=True)
        raise UsageProblem(
            f"{out}: the file cannot be written ({error.strerror}); give another file as --out."
        ) from error
    print(f"{chosen.cruise}: {table.num_rows} rows of {chosen.table} are in {out}.")
    return ExitStatus.GOOD
