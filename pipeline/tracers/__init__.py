"""Tracers of a table of samples: oxygen against its solubility, preformed nutrients and the star tracers."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.tracers import nutrients, oxygen
from pipeline.tracers.samples import SampleTracers, sample_tracers
from pipeline.tracers.stoichiometry import stoichiometry

if TYPE_CHECKING:
    from collections.abc import Callable

    from pipeline.settings import TracerSettings
    from pipeline.tables import FloatArray

__all__ = ["SampleTracers", "columns", "forms", "sample_tracers"]

# A kilogram of pure water holds 5.55e7 umol of it. What claims to be more of a solute than that is no
# concentration, and is kept out before its products overflow.
_WATER_UMOL_KG = 5.55e7


def columns(usable: Callable[[str], FloatArray], settings: TracerSettings) -> dict[str, FloatArray]:
    """Return the tracer columns of a table that has its TEOS-10 columns.

    Parameters
    ----------
    usable
        From a registry name to the values that may be used, (n_row,), NaN for the others. Asked for
        ``practical_salinity``, ``potential_temperature``, ``sigma0``, ``oxygen``, ``nitrate``, ``phosphate``
        and ``silicate``.
    settings
        Which published forms to take.

    Returns
    -------
    dict
        From registry name to values, each (n_row,), NaN where something that is needed is missing.

    Raises
    ------
    SettingsProblem
        If a setting names a form that does not exist.

    """
    ratios = stoichiometry(settings.stoichiometry)
    fit = oxygen.solubility_fit(settings.oxygen_solubility)
    n_star = nutrients.N_STAR[nutrients.NStarForm(settings.n_star)]
    solutes = (_concentration(usable(name)) for name in ("oxygen", "nitrate", "phosphate", "silicate"))
    dissolved_oxygen, nitrate, phosphate, silicate = solutes

    solubility = oxygen.oxygen_solubility(
        usable("practical_salinity"), usable("potential_temperature"), usable("sigma0"), fit
    )
    aou = oxygen.apparent_oxygen_utilization(solubility, dissolved_oxygen)
    return {
        "oxygen_solubility": solubility,
        "aou": aou,
        "oxygen_saturation": oxygen.oxygen_saturation(solubility, dissolved_oxygen),
        "preformed_phosphate": nutrients.preformed_phosphate_redfield_1942(phosphate, aou, ratios),
        "preformed_nitrate": nutrients.preformed_nitrate_redfield_1942(nitrate, aou, ratios),
        "broecker_no": nutrients.no_broecker_1974(dissolved_oxygen, nitrate),
        "broecker_po": nutrients.po_broecker_1974(dissolved_oxygen, phosphate),
        "po4_star": nutrients.po4_star_broecker_1991(dissolved_oxygen, phosphate),
        "n_star": n_star(nitrate, phosphate),
        "si_star": nutrients.si_star_sarmiento_2004(silicate, nitrate),
    }


def forms(settings: TracerSettings) -> dict[str, dict[str, str]]:
    """Return, by tracer, which of several published forms the settings chose: metadata of its column."""
    solubility = {"form": f"fit {settings.oxygen_solubility}"}
    preformed = {"form": f"{stoichiometry(settings.stoichiometry).words}; fit {settings.oxygen_solubility}"}
    return {
        "oxygen_solubility": solubility,
        "aou": solubility,
        "oxygen_saturation": solubility,
        "preformed_phosphate": preformed,
        "preformed_nitrate": preformed,
        "n_star": {"form": settings.n_star},
    }


def _concentration(values: FloatArray) -> FloatArray:
    """Return ``values`` (umol/kg), NaN where they can be no concentration."""
    return np.where(np.abs(values) < _WATER_UMOL_KG, values, np.nan)
