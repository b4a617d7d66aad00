"""The data of the figures as CSV files: full precision, names of the registry, and what the columns are."""

from __future__ import annotations

import io
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.csv as pa_csv

from pipeline.reporting.quantities import PROFILED, SHARE, SHARE_UNCERTAINTY
from pipeline.variables import REGISTRY, RESIDUAL_PREFIX

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

    from pipeline.reporting.gathered import Gathered
    from pipeline.reporting.quantities import Quantity
    from pipeline.reporting.visits import Section, Visits

_KEY = ("expocode", "section", "station", "cast", "sample", "latitude", "longitude", "pressure", "depth")
_WATERS = (
    "absolute_salinity", "conservative_temperature", "sigma0", "tag", "leading_source", "leading_share",
    "leading_share_uncertainty", "leading_probability",
)  # fmt: skip
_FIT = ("mixing_set", "reduced_chi_square", "degrees_of_freedom", "condition_number", "hull_distance")


def cruise_files(
    cruise: Gathered,
    found: Visits,
    sections: Sequence[Section],
    quantities: Sequence[Quantity],
    levels: pa.Table,
) -> dict[str, bytes]:
    """Return the CSV files of a cruise's page by the last part of their names."""
    names = cruise.samples.column_names
    residuals = [name for name in names if name.startswith(RESIDUAL_PREFIX)]
    split = [name for name in names if "_from_sources" in name or "_from_respiration" in name]
    return {
        "waters": as_csv(_picked(cruise.samples, [*_KEY, *_WATERS])),
        "sections": as_csv(_section_table(cruise, found, sections, quantities)),
        "shares": as_csv(cruise.mixtures),
        "residuals": as_csv(_picked(cruise.samples, [*_KEY, *_FIT, *residuals])),
        "respiration": as_csv(
            _picked(cruise.samples, [*_KEY, "respiration", "respiration_uncertainty", *split])
        ),
        "ctd": as_csv(_picked(levels, [*_KEY, *PROFILED])),
        "findings": as_csv(cruise.findings),
        "rejects": as_csv(cruise.rejects),
    }


def columns_file(names: Iterable[str]) -> bytes:
    """Return what the columns of the CSV files are: name, words, unit, source of the formula."""
    known = [REGISTRY[name] for name in names if name in REGISTRY]
    return as_csv(
        pa.table(
            {
                "name": [v.name for v in known],
                "long_name": [v.long_name for v in known],
                "unit": [v.unit for v in known],
                "source": [v.source for v in known],
            }
        )
    )


def as_csv(table: pa.Table) -> bytes:
    """Return a table as CSV (RFC 4180): text in quotes, numbers with all their digits, missing as nothing."""
    sink = io.BytesIO()
    plain = pa.table([_plain(column) for column in table.columns], names=table.column_names)
    pa_csv.write_csv(plain, sink, pa_csv.WriteOptions(quoting_style="needed"))
    return sink.getvalue()


def _plain(column: pa.ChunkedArray) -> pa.ChunkedArray:
    return column.cast(pa.string()) if pa.types.is_timestamp(column.type) else column


def _picked(table: pa.Table, names: Iterable[str]) -> pa.Table:
    return table.select([name for name in dict.fromkeys(names) if name in table.column_names])


def _section_table(
    cruise: Gathered, found: Visits, sections: Sequence[Section], quantities: Sequence[Quantity]
) -> pa.Table:
    """Return all that a section can show, one row for each sample, with its distance along the section."""
    distance = np.full(len(found.station), np.nan)
    for section in sections:
        distance[list(section.casts)] = section.distance
    base = _picked(cruise.samples, [*_KEY, "bottom_depth", "sigma0", "sigma2"])
    columns: Mapping[str, object] = {
        **dict(zip(base.column_names, base.columns, strict=True)),
        "distance_km": pa.array(distance[found.of_row], from_pandas=True),
        **{
            _column_name(quantity.key): pa.array(quantity.values, from_pandas=True)
            for quantity in quantities
            if quantity.key not in base.column_names
        },
    }
    return pa.table(columns)


def _column_name(key: str) -> str:
    """Return a share's column as 'share_OVF'."""
    for prefix in (SHARE_UNCERTAINTY, SHARE):
        if key.startswith(f"{prefix}:"):
            return f"{prefix}_{key.removeprefix(f'{prefix}:')}"
    return key
