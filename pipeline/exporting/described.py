"""What an exported file says of itself: global attributes of CF and ACDD, from the table and its provenance."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.exporting.attributes import CONVENTIONS, OF_THE_DELIVERY
from pipeline.tables import floats

if TYPE_CHECKING:
    from pipeline.archive import Provenance

_VOCABULARY = "CF Standard Name Table v93"
_CAUTION = "For scientific judgement; not for navigation or for decisions on safety at sea."
_WHAT = {"samples": "bottle samples", "casts": "CTD levels"}


def global_attributes(name: str, table: pa.Table, made: Provenance) -> dict[str, Any]:
    """Return the global attributes of an exported file: the same for the same table, at any time of day.

    Parameters
    ----------
    name, table
        ``samples`` or ``casts``, and its rows.
    made
        Where the table came from.

    """
    what = _WHAT[name]
    kind = "bottle" if name == "samples" else "ctd"
    files = [file for file in made.deliveries if file.kind == kind]
    attributes = {
        "Conventions": CONVENTIONS,
        "featureType": "profile",
        "title": f"Cruise {made.expocode}: {what}",
        "summary": f"{table.num_rows} {what} of cruise {made.expocode} with delivered values and flags as they came,"
        " the results of checks beside them, TEOS-10 properties, oxygen and nutrient tracers"
        + (", and the shares of the source waters." if name == "samples" and made.catalogue_sha256 else "."),
        "keywords": "oceanography, hydrography, water masses, TEOS-10, " + what,
        "id": f"{made.expocode}_{name}_r{made.revision:04d}",
        "source": f"in situ: {what} of a research cruise",
        "history": f"revision {made.revision}, made by seawhence {made.pipeline_version} from "
        + (", ".join(f"{file.name} (SHA-256 {file.sha256})" for file in files) or "no file"),
        "references": "see the attribute references of each variable",
        "comment": _CAUTION,
        "processing_level": "delivered values unchanged; checked, and quantities computed from those that may be used",
        "standard_name_vocabulary": _VOCABULARY,
        "product_version": f"revision {made.revision}",
        "cdm_data_type": "Profile",
        "expocode": made.expocode,
        **_extent(table),
        "seawhence_table": name,
        "seawhence_fingerprint": made.fingerprint,
        "seawhence_settings_sha256": made.settings_sha256,
        "seawhence_catalogue_sha256": made.catalogue_sha256 or "",
        "seawhence_catalogue_title": made.catalogue_title,
        "seawhence_provenance": made.to_json(),
        "seawhence_deliveries": _delivered_as(table),
    }
    if "section" in table.column_names:
        sections = [one for one in table.column("section").unique().to_pylist() if one]
        attributes["section"] = sections[0] if len(sections) == 1 else ""
    return {key: value for key, value in attributes.items() if value != ""}


def _delivered_as(table: pa.Table) -> str:
    """Return how columns were delivered and what was converted, a line each."""
    lines = []
    for field in table.schema:
        told = {key: (field.metadata or {}).get(key.encode(), b"").decode() for key in OF_THE_DELIVERY}
        words = [f"{key.replace('_', ' ')} {text}" for key, text in told.items() if text]
        lines += [f"{field.name}: {'; '.join(words)}"] if words else []
    return "\n".join(lines)


def _extent(table: pa.Table) -> dict[str, Any]:
    """Return where and when the rows are from."""
    told: dict[str, Any] = {}
    latitude, longitude, depth = (floats(table, name) for name in ("latitude", "longitude", "depth"))
    if np.isfinite(latitude).any() and np.isfinite(longitude).any():
        west, east = _west_and_east(longitude)
        told |= {
            "geospatial_lat_min": float(np.nanmin(latitude)), "geospatial_lat_max": float(np.nanmax(latitude)),
            "geospatial_lon_min": west, "geospatial_lon_max": east,
            "geospatial_lat_units": "degrees_north", "geospatial_lon_units": "degrees_east",
        }  # fmt: skip
    if np.isfinite(depth).any():
        told |= {
            "geospatial_vertical_min": float(np.nanmin(depth)), "geospatial_vertical_max": float(np.nanmax(depth)),
            "geospatial_vertical_positive": "down", "geospatial_vertical_units": "m",
        }  # fmt: skip
    if "time" in table.column_names and not table.column("time").null_count:
        ends = pc.min_max(table.column("time").cast(pa.timestamp("s"))).as_py()
        told |= {
            "time_coverage_start": f"{ends['min'].isoformat()}Z",
            "time_coverage_end": f"{ends['max'].isoformat()}Z",
        }
    elif "date" in table.column_names and (ends := pc.min_max(table.column("date")).as_py())["min"]:
        told |= {
            "time_coverage_start": ends["min"].isoformat(),
            "time_coverage_end": ends["max"].isoformat(),
        }
    return told


def _west_and_east(longitude: Any) -> tuple[float, float]:
    """Return the ends of the shortest arc that has all longitudes; across 180 the east end is below the west end."""
    known = np.unique(longitude[np.isfinite(longitude)])
    gaps = np.diff(np.concatenate([known, [known[0] + 360.0]]))
    widest = int(gaps.argmax())
    return float(known[(widest + 1) % len(known)]), float(known[widest])
