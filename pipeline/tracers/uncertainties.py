"""How uncertain a measured quantity is taken to be: the settings' standard uncertainty, else the registry's."""

from __future__ import annotations

from typing import TYPE_CHECKING, cast

import numpy as np

from pipeline.checking.figures import unit_of
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from pipeline.carbonate_settings import CarbonateSettings
    from pipeline.tables import FloatArray

_LIKE = {"ph_seawater": "ph_total"}


def usual_uncertainty(name: str, values: FloatArray) -> FloatArray:
    """Return the registry's standard uncertainty of values, in their unit and shape; 0 where it has none."""
    usual = REGISTRY[name].uncertainty
    if usual is None:
        return np.where(np.isnan(values), np.nan, 0.0)
    return np.hypot(usual.absolute, usual.relative * values)


def carbon_uncertainty(column: str, values: FloatArray, settings: CarbonateSettings) -> FloatArray:
    """Return the standard uncertainty of values of a carbon column, in its unit and their shape."""
    chosen = cast("Mapping[str, float]", settings.uncertainty)
    if column in chosen:
        return np.full(np.shape(values), chosen[column])
    if _relative(column):
        return settings.gas_uncertainty * values
    return usual_uncertainty(_LIKE.get(column, column), values)


def usual_words(name: str) -> str:
    """Return the registry's standard uncertainty in words, such as ``2 %`` or ``0.03 per mil``."""
    usual = REGISTRY[name].uncertainty
    if usual is None:
        return "taken as exact"
    absolute = f"{usual.absolute:g} {unit_of(name)}".rstrip() if usual.absolute else ""
    relative = f"{usual.relative:.3g}" if usual.relative else ""
    return " and ".join(
        words for words in (absolute, f"{float(relative) * 100:g} %" if relative else "") if words
    )


def carbon_words(columns: Iterable[str], settings: CarbonateSettings) -> str:
    """Return the standard uncertainties of carbon columns in words: ``dic 4 umol/kg, ph_total 0.01``."""
    return ", ".join(f"{column} {_carbon_words(column, settings)}" for column in columns)


def _carbon_words(column: str, settings: CarbonateSettings) -> str:
    chosen = cast("Mapping[str, float]", settings.uncertainty)
    if column in chosen:
        return f"{chosen[column]:g} {unit_of(column)}".rstrip()
    if _relative(column):
        return f"{settings.gas_uncertainty * 100:g} %"
    return usual_words(_LIKE.get(column, column))


def _relative(column: str) -> bool:
    return REGISTRY[_LIKE.get(column, column)].uncertainty is None
