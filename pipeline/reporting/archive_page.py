"""The page of the archive: its cruises on a map and in a list, what is in doubt, and what changed between visits."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa

from pipeline.findings import Severity
from pipeline.reporting.colours import scales
from pipeline.reporting.csv_files import as_csv, columns_file
from pipeline.reporting.embedding import numbers
from pipeline.reporting.files import INDEX, csv_path, file_name
from pipeline.reporting.occupations import BETWEEN, compare
from pipeline.reporting.pages import render
from pipeline.reporting.wording import visible
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Sequence

    from pipeline.reporting.occupations import Comparison
    from pipeline.reporting.summary import Summary

SCRIPTS = ("numbers.js", "theme.js", "figures.js", "archive.js")


def archive_page(
    cruises: Sequence[Summary], linked: frozenset[str], troubles: Sequence[str] = ()
) -> dict[str, bytes]:
    """Return the page of the archive and its CSV files by their paths.

    Parameters
    ----------
    cruises
        All cruises, in order.
    linked
        Those that have a page beside this one.
    troubles
        What else is wrong, in sentences.

    """
    found = compare([one for cruise in cruises for one in cruise.occupations])
    files = {"cruises": _cruises_table(cruises), "changes": _changes_table(found)}
    paths = {name: csv_path("archive", name) for name in files}
    page = render(
        "archive.html",
        _data(cruises, found),
        SCRIPTS,
        cruises=cruises,
        pages={
            cruise.expocode: file_name(cruise.expocode) for cruise in cruises if cruise.expocode in linked
        },
        comparisons=found,
        severities=[severity.value for severity in (Severity.FAULT, Severity.DOUBT, Severity.NOTE)],
        between=BETWEEN,
        troubles=troubles,
        csv=paths,
        map_words=_map_words(cruises),
    )
    return {
        INDEX: page,
        **{paths[name]: as_csv(table) for name, table in files.items()},
        csv_path("archive", "columns"): columns_file(REGISTRY),
    }


def central_longitude(longitudes: np.ndarray[Any, np.dtype[np.float64]]) -> float:
    """Return the middle of the smallest arc that holds all longitudes, degrees, so that no track is torn apart."""
    if not len(longitudes):
        return 0.0
    ordered = np.unique(np.mod(longitudes, 360.0))
    gaps = np.diff(np.append(ordered, ordered[0] + 360.0))
    widest = int(np.argmax(gaps))
    west = float(ordered[(widest + 1) % len(ordered)])
    middle = west + (360.0 - float(gaps[widest])) / 2
    return (middle + 180.0) % 360.0 - 180.0


def _data(cruises: Sequence[Summary], found: Sequence[Comparison]) -> dict[str, Any]:
    every = [longitude for cruise in cruises for _, longitude in cruise.tracks]
    centre = central_longitude(np.concatenate(every) if every else np.zeros(0))
    order = sorted(cruises, key=lambda cruise: (np.nan_to_num(cruise.time, nan=np.inf), cruise.expocode))
    rank = {cruise.expocode: number for number, cruise in enumerate(order)}
    looks = {look.code: look for one in found for look in one.earlier.sources}
    return {
        "rows": "cruise",
        "centre": round(centre, 4),
        "scales": scales(),
        "sources": [{"code": s.code, "colour": s.colour, "marker": s.marker} for s in looks.values()],
        "cruises": [
            {
                "name": visible(cruise.expocode),
                "days": " to ".join(day for day in (cruise.first_day, cruise.last_day) if day),
                "rank": rank[cruise.expocode],
                "tracks": [
                    {"latitude": numbers(latitude, 6), "longitude": numbers(longitude, 7)}
                    for latitude, longitude in cruise.tracks
                ],
            }
            for cruise in cruises
        ],
        "comparisons": [
            {
                "name": visible(one.name),
                "earlier": visible(one.earlier.expocode),
                "later": visible(one.later.expocode),
                "changes": [
                    {
                        "code": c.code, "top": c.top, "bottom": c.bottom, "earlier": round(c.earlier, 5),
                        "later": round(c.later, 5), "difference": round(c.difference, 5),
                        "error": round(c.standard_error, 5), "places": c.places,
                    }
                    for c in one.changes
                ],
            }
            for one in found
        ],
    }  # fmt: skip


def _map_words(cruises: Sequence[Summary]) -> str:
    latitudes = [latitude for cruise in cruises for latitude, _ in cruise.tracks if len(latitude)]
    if not latitudes:
        return "No cruise has a position."
    every = np.concatenate(latitudes)
    south, north = (
        f"{abs(x):.0f}° {'N' if x >= 0 else 'S'}" for x in (float(every.min()), float(every.max()))
    )
    days = sorted(day for cruise in cruises for day in (cruise.first_day, cruise.last_day) if day)
    when = f", {days[0][:4]} to {days[-1][:4]}" if days else ""
    return f"{sum(bool(c.tracks) for c in cruises)} cruises between {south} and {north}{when}."


def _cruises_table(cruises: Sequence[Summary]) -> pa.Table:
    columns = (
        "expocode",
        "revision",
        "first_day",
        "last_day",
        "stations",
        "samples",
        "levels",
        "rejected",
        "tagged",
    )
    return pa.table(
        {
            **{name: [getattr(cruise, name) for cruise in cruises] for name in columns},
            **{s.value: [cruise.findings.get(s.value, 0) for cruise in cruises] for s in Severity},
            "trouble": [" ".join(cruise.troubles) for cruise in cruises],
        }
    )


def _changes_table(found: Sequence[Comparison]) -> pa.Table:
    rows = [(one, change) for one in found for change in one.changes]
    names = ("code", "top", "bottom", "earlier", "later", "difference", "standard_error", "places")
    return pa.table(
        {
            "section": [one.earlier.section for one, _ in rows],
            "earlier_cruise": [one.earlier.expocode for one, _ in rows],
            "later_cruise": [one.later.expocode for one, _ in rows],
            **{name: [getattr(change, name) for _, change in rows] for name in names},
        }
    )
