"""Crossovers and proposals as tables of registry columns."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.tables import OFFSETS, PROPOSALS, empty, with_columns

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import pyarrow as pa

    from pipeline.crossovers.comparing import Crossover
    from pipeline.crossovers.proposing import Proposal


def offsets_table(
    crossovers: Sequence[Crossover], left: Mapping[tuple[str, str, str], Crossover]
) -> pa.Table:
    """Return a row per crossover and quantity.

    Parameters
    ----------
    crossovers
        What was found.
    left
        The same with the corrections in force, by key, where there are any.

    """
    rows: list[dict[str, Any]] = []
    for c in crossovers:
        difference, uncertainty = in_unit(c)
        part = float(np.exp(c.offset)) if c.relative else 1.0
        remaining = _offset(left[c.key]) if c.key in left else (None, None)
        rows.append(
            {
                "expocode": c.expocode, "other_expocode": c.other, "variable": c.quantity.name,
                "kind": c.quantity.kind.value, "offset": _offset(c)[0], "offset_uncertainty": _offset(c)[1],
                "offset_remaining": remaining[0], "offset_remaining_uncertainty": remaining[1],
                "between_places": part * c.between_places,
                "depth_contrast": part * c.contrast,
                "depth_contrast_uncertainty": part * c.contrast_uncertainty,
                "mean_difference": difference, "mean_difference_uncertainty": uncertainty,
                "difference_unit": c.quantity.unit, "surface": ", ".join(c.surfaces), "stations": c.stations,
                "other_stations": c.other_stations, "station_pairs": c.station_pairs, "places": c.places,
                "levels": c.levels, "years_apart": c.years_apart,
            }
        )  # fmt: skip
    return _table(OFFSETS, rows)


def proposals_table(proposals: Sequence[Proposal]) -> pa.Table:
    """Return a row per cruise and quantity."""
    rows: list[dict[str, Any]] = [
        {
            "expocode": p.expocode, "variable": p.quantity.name, "kind": p.quantity.kind.value,
            "correction": p.correction, "correction_uncertainty": p.uncertainty,
            "correction_limit": p.quantity.limit, "correction_in_force": p.in_force or None,
            "correction_remaining": p.remains, "correction_remaining_uncertainty": p.remains_uncertainty,
            "difference_unit": p.quantity.unit, "crossovers": p.crossovers,
            "group": p.group, "proposed": "yes" if p.proposed else "no", "why_not": p.why_not or None,
        }
        for p in proposals
    ]  # fmt: skip
    return _table(PROPOSALS, rows)


def _offset(crossover: Crossover) -> tuple[float, float]:
    """Return an offset and its standard uncertainty: in the unit, or as parts of the value."""
    if not crossover.relative:
        return crossover.offset, crossover.uncertainty
    return as_part(crossover.offset), float(np.exp(crossover.offset)) * crossover.uncertainty


def as_part(logarithm: float) -> float:
    """Return by which part of the other value one value is larger, from the logarithm of their proportion."""
    return float(np.expm1(logarithm))


def in_unit(crossover: Crossover) -> tuple[float, float]:
    """Return a difference and its standard uncertainty in the unit of the quantity, at its typical value."""
    if not crossover.relative:
        return crossover.offset, crossover.uncertainty
    difference = as_part(crossover.offset) * crossover.typical
    return difference, float(np.exp(crossover.offset)) * crossover.uncertainty * crossover.typical


def _table(names: Sequence[str], rows: Sequence[dict[str, Any]]) -> pa.Table:
    if not rows:
        return empty(names)
    table = empty(()).from_pylist([{} for _ in rows])
    return with_columns(table, {name: [row[name] for row in rows] for name in names})
