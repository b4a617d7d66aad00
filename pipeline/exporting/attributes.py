"""What a NetCDF variable says of itself: CF attributes of a column, from its field metadata and the registry."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa

from pipeline.reading.schemes import FLAGS, WHP_MEANINGS, Scheme
from pipeline.variables import (
    BASE,
    CHECKED,
    MEASURED,
    REGISTRY,
    RESIDUAL_PREFIX,
    FlagScheme,
    check_name,
    flag_name,
)

if TYPE_CHECKING:
    from collections.abc import Collection, Mapping

    from numpy.typing import NDArray

CONVENTIONS = "CF-1.11, ACDD-1.3"
COORDINATES = "time latitude longitude pressure"
UNCERTAINTY = "_uncertainty"
# Field metadata that names scales and units which the values no longer have: told in a global attribute, so that nobody
# takes them for those of the variable.
OF_THE_DELIVERY = ("delivered_name", "delivered_units", "delivered_flags", "conversion")
_REFERENCE_PRESSURE = {"sigma0": 0.0, "sigma2": 2000.0, "sigma4": 4000.0}  # dbar
# UDUNITS does not know the tritium unit: one tritium atom in 1e18 of hydrogen, by definition.
_UNITS = {"tritium_unit": "1e-18"}
_KNOWN_UNITS = frozenset(one.unit for one in BASE if one.unit)
_OF_MEASURED = frozenset(name for one in MEASURED if (name := REGISTRY[one].standard_name))
_FLAGGED = {flag_name(one.name): one.flags for one in BASE if one.flags is not None}
_CHECKS = frozenset(check_name(name) for name in CHECKED)
# A meaning of these that no reader of flags by their meanings would know is left out while it is not used.
_RARE = {FlagScheme.BOTTLE: frozenset({6})}


def reference_pressures(names: Collection[str]) -> dict[str, float]:
    """Return the scalar coordinates that potential densities among columns need: name to dbar."""
    return {reference_name(name): value for name, value in _REFERENCE_PRESSURE.items() if name in names}


def reference_name(name: str) -> str:
    """Return the scalar coordinate that says what a potential density is referred to."""
    return f"reference_pressure_of_{name}"


def variable_name(column: str, taken: Collection[str]) -> str:
    """Return the name of a column's variable: letters, digits and underscores, a letter first (CF 2.3).

    It is the column's own, but for measured quantities that CF has no name for: these are known by the name that the
    exchange format has for them. What passed through under its delivered name is marked, lest it be taken for a
    quantity in its usual unit.
    """
    variable = REGISTRY.get(column)
    if variable is None:
        column = f"delivered_{column}"
    elif column in MEASURED and variable.standard_name is None and variable.exchange:
        column = variable.exchange[0]
    name = re.sub(r"[^A-Za-z0-9_]", "_", column)
    while name in taken:
        name += "_"
    return name


def attributes_of(
    field: pa.Field, columns: Collection[str], used_flags: NDArray[np.int16] | None
) -> dict[str, Any]:
    """Return the attributes of a column's variable, without those of its coordinates.

    Parameters
    ----------
    field
        The column.
    columns
        Names of all columns of the table.
    used_flags
        The values of a column of flags, None for others.

    """
    told = {key.decode(): text.decode() for key, text in (field.metadata or {}).items()}
    attributes: dict[str, Any] = {"long_name": told.pop("long_name", field.name)}
    units, standard = told.pop("units", ""), told.pop("standard_name", "")
    references = told.pop("source", "")
    if not standard and field.name.endswith(UNCERTAINTY):
        standard = _error_of(field.name.removesuffix(UNCERTAINTY))
    elif standard in _OF_MEASURED and field.name not in MEASURED:
        standard = (
            ""  # who reads by standard names would take for measured what was chosen, corrected or computed
        )
    if standard:
        attributes["standard_name"] = standard
    if units in _KNOWN_UNITS:
        attributes["units"] = _UNITS.get(units, units)
    elif units:  # as delivered; UDUNITS may not know it
        attributes["delivered_units"] = units
    if units == "degree_C":
        apart = field.name.startswith(RESIDUAL_PREFIX) or field.name.endswith(UNCERTAINTY)
        attributes["units_metadata"] = f"temperature: {'difference' if apart else 'on_scale'}"
    attributes["coverage_content_type"] = _content(field)
    if references:
        attributes["references"] = references
    if used_flags is not None:
        attributes |= flag_attributes(field.name, used_flags)
    beside = (flag_name(field.name), check_name(field.name), f"{field.name}{UNCERTAINTY}")
    if present := [variable_name(name, ()) for name in beside if name in columns]:
        attributes["ancillary_variables"] = " ".join(present)
    for key, text in told.items():  # how it was corrected, and in which form it was computed
        if key in OF_THE_DELIVERY:
            continue
        attributes[f"seawhence_{re.sub(r'[^A-Za-z0-9_]', '_', key)}"] = text
    return attributes


def _error_of(name: str) -> str:
    standard = REGISTRY[name].standard_name if name in REGISTRY else None
    return f"{standard} standard_error" if standard and standard not in _OF_MEASURED else ""


def _content(field: pa.Field) -> str:
    """Return what kind of thing a column holds, in the words of ACDD (ISO 19115-1)."""
    if field.type == pa.int16() or field.name.endswith((UNCERTAINTY, "_error")):
        return "qualityInformation"
    if field.name in MEASURED:
        return "physicalMeasurement"
    if field.name in {"latitude", "longitude", "time", "date"}:
        return "coordinate"
    if pa.types.is_string(field.type) or field.name not in REGISTRY:
        return "auxiliaryInformation"
    return "modelResult"


def flag_attributes(name: str, used: NDArray[np.int16]) -> dict[str, Any]:
    """Return ``flag_values`` and ``flag_meanings`` of a column of flags; none where it is of no scheme we know."""
    if name in _CHECKS:
        meanings: Mapping[int, str] = {number: flag.meaning for number, flag in FLAGS[Scheme.IODE].items()}
        rare: frozenset[int] = frozenset()
    elif (scheme := _FLAGGED.get(name)) is not None:
        meanings, rare = WHP_MEANINGS[scheme], _RARE.get(scheme, frozenset())
    else:
        return {}
    listed = {number: words for number, words in meanings.items() if number not in rare or number in used}
    return {
        "flag_values": np.array(list(listed), dtype=np.int16),
        "flag_meanings": " ".join(re.sub(r"[^A-Za-z0-9]+", "_", words) for words in listed.values()),
    }
