"""Tracers made of nutrients and oxygen: preformed nutrients, NO, PO, PO4*, N*, Si*. Arrays in, arrays out.

All concentrations are in umol/kg and broadcast; NaN in gives NaN out. Every constant stands with the
publication that set it; all those here are from memory, except where it says verified.
"""

from __future__ import annotations

from enum import StrEnum
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from pipeline.tables import FloatArray
    from pipeline.tracers.stoichiometry import Stoichiometry

# Broecker 1974, EPSL 23:100-107: moles of oxygen taken up per mole of nitrate, and of phosphate, freed.
OXYGEN_PER_NITRATE_BROECKER_1974 = 9.0
OXYGEN_PER_PHOSPHATE_BROECKER_1974 = 135.0

# Broecker et al. 1991, GBC 5:87, and 1998, JGR 103:15833. The ratio is that of Broecker, Takahashi
# and Takahashi 1985; its use in PO4* is verified. The offset is arbitrary, and
# that it equals the value of southern bottom water is a coincidence: never subtract it again.
OXYGEN_PER_PHOSPHATE_BROECKER_1985 = 175.0
PO4_STAR_OFFSET_BROECKER_1991 = 1.95

# Gruber and Sarmiento 1997, GBC 11:235.
NITRATE_PER_PHOSPHATE_GRUBER_SARMIENTO_1997 = 16.0
N_STAR_OFFSET_GRUBER_SARMIENTO_1997 = 2.90
N_STAR_SCALE_GRUBER_SARMIENTO_1997 = 0.87
# Deutsch et al. 2001, and most later work: the same without the scale.
NITRATE_PER_PHOSPHATE_DEUTSCH_2001 = 16.0
N_STAR_OFFSET_DEUTSCH_2001 = 2.9


class NStarForm(StrEnum):
    """Published forms of N*, by citation."""

    DEUTSCH_2001 = "deutsch_2001"
    GRUBER_SARMIENTO_1997 = "gruber_sarmiento_1997"


def preformed_phosphate_redfield_1942(
    phosphate: FloatArray, aou: FloatArray, ratios: Stoichiometry
) -> FloatArray:
    """Return the phosphate that the water left the surface with: phosphate less what respiration freed.

    Redfield 1942; the uptake of oxygen per phosphate is that of ``ratios``.
    """
    return phosphate - aou / ratios.oxygen.value


def preformed_nitrate_redfield_1942(
    nitrate: FloatArray, aou: FloatArray, ratios: Stoichiometry
) -> FloatArray:
    """Return the nitrate that the water left the surface with: nitrate less what respiration freed.

    Redfield 1942; the nitrate freed per oxygen taken up is that of ``ratios``.
    """
    return nitrate - aou * ratios.nitrogen_per_oxygen


def no_broecker_1974(oxygen: FloatArray, nitrate: FloatArray) -> FloatArray:
    """Return NO, O2 + 9 NO3. Broecker 1974."""
    return oxygen + OXYGEN_PER_NITRATE_BROECKER_1974 * nitrate


def po_broecker_1974(oxygen: FloatArray, phosphate: FloatArray) -> FloatArray:
    """Return PO, O2 + 135 PO4. Broecker 1974."""
    return oxygen + OXYGEN_PER_PHOSPHATE_BROECKER_1974 * phosphate


def po4_star_broecker_1991(oxygen: FloatArray, phosphate: FloatArray) -> FloatArray:
    """Return PO4*, PO4 + O2/175 - 1.95. Broecker et al. 1991."""
    return phosphate + oxygen / OXYGEN_PER_PHOSPHATE_BROECKER_1985 - PO4_STAR_OFFSET_BROECKER_1991


def n_star_deutsch_2001(nitrate: FloatArray, phosphate: FloatArray) -> FloatArray:
    """Return N*, NO3 - 16 PO4 + 2.9. Deutsch et al. 2001."""
    return nitrate - NITRATE_PER_PHOSPHATE_DEUTSCH_2001 * phosphate + N_STAR_OFFSET_DEUTSCH_2001


def n_star_gruber_sarmiento_1997(nitrate: FloatArray, phosphate: FloatArray) -> FloatArray:
    """Return N*, 0.87 (NO3 - 16 PO4 + 2.90). Gruber and Sarmiento 1997."""
    excess = nitrate - NITRATE_PER_PHOSPHATE_GRUBER_SARMIENTO_1997 * phosphate
    return N_STAR_SCALE_GRUBER_SARMIENTO_1997 * (excess + N_STAR_OFFSET_GRUBER_SARMIENTO_1997)


def si_star_sarmiento_2004(silicate: FloatArray, nitrate: FloatArray) -> FloatArray:
    """Return Si*, Si(OH)4 - NO3. Sarmiento et al. 2004, Nature 427:56."""
    return silicate - nitrate


N_STAR = {
    NStarForm.DEUTSCH_2001: n_star_deutsch_2001,
    NStarForm.GRUBER_SARMIENTO_1997: n_star_gruber_sarmiento_1997,
}
