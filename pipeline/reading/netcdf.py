"""CF NetCDF files of profiles, bottle and CTD, to rows."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow.compute as pc

from pipeline.problems import DeliveryProblem
from pipeline.reading.assembly import ReadRows, assemble
from pipeline.reading.cells import Cells
from pipeline.reading.cf_flags import flag_columns
from pipeline.reading.cf_names import recognise
from pipeline.reading.cf_profiles import layout_of, no_profiles, refuse_other_features
from pipeline.reading.cf_rows import as_cells, lay_out, lay_out_flags, used_rows
from pipeline.reading.columns import Heading, Meanings, Use, plan_columns
from pipeline.reading.describing import describe
from pipeline.reading.grid import Grid
from pipeline.reading.netcdf_bytes import NETCDF_MAGICS, open_netcdf
from pipeline.tables import with_metadata
from pipeline.units import Conversion
from pipeline.variables import MEASURED, flag_name

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from pipeline.findings import Finding
    from pipeline.reading.cf_names import Recognised
    from pipeline.reading.cf_profiles import Layout
    from pipeline.reading.cf_rows import CellColumns
    from pipeline.reading.columns import Column
    from pipeline.reading.delivery import DeliveryKind
    from pipeline.reading.description import Description
    from pipeline.reading.netcdf_bytes import StoredFile
    from pipeline.reading.spread import Spread
    from pipeline.settings import ReadingSettings

__all__ = ["NETCDF_MAGICS", "read_netcdf"]

_EXAMPLES = {
    "expocode": "ZZV120090214", "station": "12", "latitude": "-35.5", "longitude": "-12.25",
}  # fmt: skip
_PLACES_OF_A_CAST = 1
_UPWARD = Conversion("positive up to positive down", -1.0)


def read_netcdf(
    name: str, data: bytes, limits: ReadingSettings, description: Description | None
) -> tuple[DeliveryKind, ReadRows]:
    """Read a NetCDF file of profiles.

    Raises
    ------
    DeliveryProblem
        Where the file is spoiled, holds no profiles, or does not say whose they are.

    """
    file = _distinct(open_netcdf(name, data, limits))
    refuse_other_features(name, file)
    recognised = recognise(name, file, description)
    layout = _layout(name, file, recognised)
    laid = len(file.variables) * layout.n_row
    if laid > limits.netcdf_values:
        raise DeliveryProblem(
            "too-large",
            f"{name}: {layout.n_row} rows of {len(file.variables)} variables are {laid} values; expected at most"
            f" {limits.netcdf_values}; deliver the cruise in several files, or raise reading.netcdf_values in the"
            " settings.",
        )
    columns = lay_out(name, file, layout, recognised)
    flags, flag_findings = flag_columns(name, file, recognised, description)
    lay_out_flags(name, columns, layout, flags, file)
    grid = _grid(name, file, columns, recognised, used_rows(columns, layout, file))
    planned, plan, metadata, told = _planned(grid, columns, recognised, description)
    _refuse_tracks(planned, plan, layout)
    _require_identity(planned, plan)
    _refuse_one_station(planned, plan, layout)
    findings = (*recognised.findings, *flag_findings, *columns.findings, *told)
    read = assemble(planned, plan, limits, findings)
    return recognised.kind, replace(read, table=with_metadata(read.table, metadata))


def _distinct(file: StoredFile) -> StoredFile:
    """Return the file with the second of two names that differ in capitals only marked as such."""
    names: dict[str, str] = {}
    for title in file.variables:
        name = title
        while name.upper() in names:
            name += "'"
        names[name.upper()] = title
    titles = {title: name for title, name in zip(file.variables, names, strict=True) if title.upper() != name}
    if not titles:
        return file
    marks = {title: title + "'" * name.count("'") for title, name in titles.items()}
    variables = {
        marks.get(title, title): replace(variable, name=marks.get(title, title))
        for title, variable in file.variables.items()
    }
    return replace(file, variables=variables)


def _layout(name: str, file: StoredFile, recognised: Recognised) -> Layout:
    """Return how the profiles lie, by the pressure or the depth."""
    vertical = recognised.of("pressure") or recognised.of("depth")
    if vertical is None:
        names = ", ".join(list(file.variables)[:12]) or "no variables"
        if not file.variables and file.groups:
            names = f"no variables outside its groups {', '.join(file.groups[:12])}"
        raise no_profiles(
            name,
            f"neither pressure nor depth among {names} (looked for: the standard names"
            " sea_water_pressure_due_to_sea_water, sea_water_pressure and depth, axis = Z, and CTDPRS)",
        )
    measured = {
        title: file.variables[title]
        for title, means in recognised.values.items()
        if means.name in MEASURED and title != vertical
    }
    return layout_of(name, file, file.variables[vertical], measured)


def _grid(
    name: str, file: StoredFile, columns: CellColumns, recognised: Recognised, used: NDArray[np.bool_]
) -> Grid:
    """Return the rows in use as a grid; what the file says of all of them are its constants."""
    lines = np.flatnonzero(used).astype(np.int64) + 1
    cells = tuple(as_cells(column[used]) for column in columns.cells)
    given = {means.name for means in columns.values.values()}
    constants = {
        quantity: text
        for quantity in ("expocode", "section", "station", "cast")
        if quantity not in given and (text := file.text(quantity))
    }
    return Grid(
        name, recognised.kind, tuple(columns.names), tuple(columns.units),
        cells=Cells(cells, lines, ()),
        raw=_row_text(columns.names, columns.cells),
        constants=constants,
        holders="variables and global attributes",
        words={means.name: _source_of(title) for title, means in columns.values.items()},
    )  # fmt: skip


def _source_of(title: str) -> str:
    """Return the variable that a column was made of, such as time where it is called ``date (of time)``."""
    return title.partition(" (of ")[2].removesuffix(")") or title


def _row_text(names: Sequence[str], cells: Sequence[NDArray[Any]]) -> Any:
    def text(line: int) -> str:
        return ", ".join(f"{name}={column[line - 1]}" for name, column in zip(names, cells, strict=True))

    return text


def _planned(
    grid: Grid, columns: CellColumns, recognised: Recognised, description: Description | None
) -> tuple[Grid, tuple[Column, ...], dict[str, dict[str, str]], tuple[Finding | Spread, ...]]:
    """Return the grid under its description, if it has one, with its columns planned, and metadata for some of them."""
    meanings = Meanings(columns.values, columns.flags)
    metadata: dict[str, dict[str, str]] = {}
    findings: tuple[Finding | Spread, ...]
    if description is None:
        plan, findings = plan_columns(Heading(grid.name, grid.names, grid.units), meanings)
    else:
        described = describe(grid, meanings, description)
        grid, plan, findings = described.grid, described.columns, described.findings
        metadata |= {name: dict(entries) for name, entries in described.metadata.items()}
    consumed = {
        columns.flag_of[column.delivered]
        for column in plan
        if column.use is Use.FLAG and columns.words.get(column.delivered) == ""
    }
    kept = []
    for column in plan:
        made = column.delivered in columns.words
        if column.use is Use.EXTRA and (made or column.delivered in columns.instants | consumed):
            continue
        if made and columns.words[column.delivered]:
            metadata.setdefault(flag_name(columns.flags[column.delivered].name), {}).update(
                conversion=columns.words[column.delivered], delivered_name=columns.flag_of[column.delivered]
            )
        if column.use is Use.VALUE and column.delivered in recognised.written:
            metadata.setdefault(column.name, {})["delivered_units"] = recognised.written[column.delivered]
        upward = column.use is Use.VALUE and column.delivered in recognised.upward
        kept.append(replace(column, conversion=_UPWARD) if upward else column)
    return grid, tuple(kept), metadata, findings


def _require_identity(grid: Grid, plan: Sequence[Column]) -> None:
    """Refuse a file that does not say whose rows it holds, with the lines that would say it."""
    given = {column.name for column in plan} | set(grid.constants)
    absent = [quantity for quantity in _EXAMPLES if quantity not in given]
    if not absent:
        return
    position = {"latitude", "longitude"} & set(absent)
    reason = "no-expocode" if "expocode" in absent else "no-station" if "station" in absent else "no-position"
    words = [quantity for quantity in absent if quantity not in position] + (["position"] if position else [])
    lines = "; ".join(f'{quantity} = "{_EXAMPLES[quantity]}"' for quantity in absent)
    base = grid.name.rsplit("/", 1)[-1]
    raise DeliveryProblem(
        reason,
        f"{grid.name}: the file does not tell its {' and '.join(words)}; expected a variable or global attribute of"
        f' that name, or a cruise.toml beside it with the lines: [[file]]; files = "{base}"; [file.constants]; {lines}'
        " (with your own values, a line each).",
    )


def _refuse_tracks(grid: Grid, plan: Sequence[Column], layout: Layout) -> None:
    """Refuse positions that change from row to row where no profile or station says which rows are one cast."""
    if len(layout.dimensions) != 1 or layout.profile_of is not None or "station" in grid.constants:
        return
    identity = {
        column.name: grid.cells.columns[column.position] for column in plan if column.use is Use.IDENTITY
    }
    for axis in ("latitude", "longitude"):
        places = identity.get(axis)
        if "station" not in identity and places is not None and len(pc.unique(places)) > _PLACES_OF_A_CAST:
            raise no_profiles(
                grid.name, f"positions that change along {layout.dimensions[0]} and no station: a track"
            )


def _refuse_one_station(grid: Grid, plan: Sequence[Column], layout: Layout) -> None:
    """Refuse several profiles that are all of one station and cast: a time series at one place, or names forgotten."""
    along = {column.name for column in plan if column.use is Use.IDENTITY}
    if along & {"station", "cast"}:
        return
    if layout.profile_of is not None:
        count = len(np.unique(layout.profile_of[layout.profile_of >= 0]))
    else:
        count = layout.shape[0] if len(layout.shape) == 2 else 1
    if count > 1:
        raise no_profiles(
            grid.name,
            f"{count} profiles that are all of station '{grid.constants.get('station', '')}', a time series",
        )
