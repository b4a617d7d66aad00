"""The data of a cruise's page, once for all its figures, as plain values that become JSON."""

from __future__ import annotations

from datetime import UTC, datetime
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.reporting.colours import NO_SOURCE, scales
from pipeline.reporting.density_lines import density_lines
from pipeline.reporting.embedding import numbers
from pipeline.reporting.quantities import PROFILED, SPLIT, SURE
from pipeline.reporting.visits import visits
from pipeline.reporting.wording import quantity_words, unit_words, visible
from pipeline.tables import floats, texts
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.reporting.colours import SourceLook
    from pipeline.reporting.gathered import Gathered
    from pipeline.reporting.quantities import Quantity
    from pipeline.reporting.visits import Section, Visits

VIEWS = (0, 500, 1000, 2000)  # dbar from which on samples are in a view of the waters


def page_data(
    cruise: Gathered,
    found: Visits,
    sections: Sequence[Section],
    quantities: Sequence[Quantity],
    levels: pa.Table,
) -> dict[str, Any]:
    """Return the data.

    Parameters
    ----------
    cruise, found, sections, quantities
        The cruise, its casts, the lines they lie along, what can be drawn.
    levels
        Its CTD levels, as few as are drawn.

    """
    leaders = {look.code: number for number, look in enumerate(cruise.sources)}
    by_key = {quantity.key: quantity for quantity in quantities}
    return {
        "cruise": cruise.expocode,
        "rows": "sample" if cruise.samples_are_bottles else "level",
        "sources": [_source(look) for look in cruise.sources],
        "noSource": NO_SOURCE,
        "samples": {
            "cast": found.of_row.tolist(),
            "sample": [visible(text or "") for text in texts(cruise.samples, "sample")],
            "leader": [leaders.get(code or "", -1) for code in texts(cruise.samples, "leading_source")],
            "tag": [text or "" for text in texts(cruise.samples, "tag")],
        },
        "quantities": [_quantity(quantity) for quantity in quantities],
        "casts": {
            "name": list(found.names),
            "latitude": numbers(found.latitude),
            "longitude": numbers(found.longitude),
            "bottom": numbers(found.bottom),
            "date": [date_words(time) for time in found.time],
        },
        "sections": [
            {"name": s.name, "casts": list(s.casts), "distance": numbers(s.distance, 6), "off": list(s.off)}
            for s in sections
        ],
        "ctd": _profiles(levels, found, cruise),
        "profiled": {
            name: {"words": quantity_words(name), "unit": unit_words(REGISTRY[name].unit)}
            for name in PROFILED
        },
        "split": [name for name in SPLIT if f"{name}_from_sources" in by_key],
        "views": _densities(by_key, cruise.sources),
        "sure": SURE,
        "scales": scales(),
    }


def date_words(seconds: float) -> str:
    """Return the day of seconds since 1970, '' where they are missing."""
    return "" if np.isnan(seconds) else datetime.fromtimestamp(seconds, UTC).strftime("%Y-%m-%d")


def _source(look: SourceLook) -> dict[str, Any]:
    salinity, temperature = numbers([look.preformed_salinity, look.conservative_temperature])
    return {
        "code": look.code,
        "name": visible(look.name),
        "colour": look.colour,
        "marker": look.marker,
        "salinity": salinity,
        "temperature": temperature,
    }


def _quantity(quantity: Quantity) -> dict[str, Any]:
    told: dict[str, Any] = {
        "key": quantity.key,
        "group": quantity.group,
        "words": quantity.words,
        "unit": quantity.unit,
        "values": numbers(quantity.values),
    }
    if quantity.refused is not None:
        rows = np.flatnonzero(np.isfinite(quantity.refused))
        told["refused"] = [
            [int(row), value] for row, value in zip(rows, numbers(quantity.refused[rows]), strict=True)
        ]
    return told


def _densities(by_key: Mapping[str, Quantity], sources: Sequence[SourceLook]) -> list[dict[str, Any]]:
    """Return what the diagram of the waters can show: all samples, or those below a pressure, with density lines."""
    views = []
    for above in VIEWS:
        ranges = []
        for name, ends in (("absolute_salinity", "preformed_salinity"), ("conservative_temperature",) * 2):
            if name in by_key and "pressure" in by_key:
                below = by_key["pressure"].values >= above
                of_sources = [getattr(look, ends) for look in sources] if not above else []
                ranges.append(_range(np.concatenate([by_key[name].values[below], of_sources])))
        if len(ranges) == 2 and None not in ranges:
            salinity, temperature = ((low, high) for low, high in filter(None, ranges))
            views.append(
                {
                    "above": above,
                    "salinity": numbers(salinity, 6),
                    "temperature": numbers(temperature, 5),
                    "lines": [
                        {
                            "sigma": line.sigma,
                            "x": numbers(line.absolute_salinity, 6),
                            "y": numbers(line.conservative_temperature, 5),
                        }
                        for line in density_lines((max(0.0, salinity[0]), salinity[1]), temperature)
                    ],
                }
            )
    return views


def _range(values: NDArray[np.float64]) -> tuple[float, float] | None:
    known = values[np.isfinite(values)]
    if not len(known):
        return None
    margin = 0.05 * float(np.ptp(known)) or 0.1
    return float(known.min()) - margin, float(known.max()) + margin


def _profiles(levels: pa.Table, found: Visits, cruise: Gathered) -> list[dict[str, Any]]:
    """Return the CTD profiles: of which cast of the samples, if of one, and its levels."""
    if not levels.num_rows:
        return []
    ctd = visits(levels)
    known = {place: number for number, place in enumerate(zip(found.station, found.cast, strict=True))}
    columns = {"pressure": floats(levels, "pressure")}
    columns |= {name: cruise.usable_levels(levels, name) for name in PROFILED if name in levels.column_names}
    profiles = []
    for number, name in enumerate(ctd.names):
        rows = np.flatnonzero(ctd.of_row == number)
        rows = rows[np.argsort(columns["pressure"][rows], kind="stable")]
        values = {
            key: numbers(column[rows], 6)
            for key, column in columns.items()
            if np.isfinite(column[rows]).any()
        }
        cast = known.get((ctd.station[number], ctd.cast[number]))
        profiles.append({"name": name, "cast": -1 if cast is None else cast, "values": values})
    return profiles
