"""Tracer definitions: their ratios, their invariance under respiration, and what a wrong ratio costs."""

from __future__ import annotations

import numpy as np

from pipeline.tracers import nutrients, oxygen
from pipeline.tracers.stoichiometry import STOICHIOMETRIES, StoichiometryName, stoichiometry

from .check import Check, Status

EXACT, VERIFIED, MEMORY = Status.EXACT, Status.VERIFIED, Status.FROM_MEMORY
PO4_STAR = "Broecker et al. 1991, GBC 5:87; 1998, JGR 103:15833"
N_STAR = "Deutsch et al. 2001"
ANDERSON = "Anderson and Sarmiento 1994, GBC 8:65-80"


def po4_star(phosphate: float, o2: float, freed: float, o2_per_p: float) -> float:
    """Return PO4* after respiration freed some phosphate."""
    return float(
        nutrients.po4_star_broecker_1991(np.array(o2 - o2_per_p * freed), np.array(phosphate + freed))
    )


def po4_star_drift(phosphate: float, o2: float, freed: float, o2_per_p: float) -> float:
    before = po4_star(phosphate, o2, 0.0, o2_per_p)
    return po4_star(phosphate, o2, freed, o2_per_p) - before


def n_star(nitrate: float, phosphate: float, freed: float) -> float:
    return float(nutrients.n_star_deutsch_2001(np.array(nitrate + 16 * freed), np.array(phosphate + freed)))


def n_star_1997(nitrate: float, phosphate: float, freed: float) -> float:
    after = np.array(nitrate + 16 * freed), np.array(phosphate + freed)
    return float(nutrients.n_star_gruber_sarmiento_1997(*after))


def no_drift(o2: float, nitrate: float, freed: float) -> float:
    respired = nutrients.no_broecker_1974(np.array(o2 - 9 * freed), np.array(nitrate + freed))
    return float(respired - nutrients.no_broecker_1974(np.array(o2), np.array(nitrate)))


def po_drift(o2: float, phosphate: float, freed: float) -> float:
    respired = nutrients.po_broecker_1974(np.array(o2 - 135 * freed), np.array(phosphate + freed))
    return float(respired - nutrients.po_broecker_1974(np.array(o2), np.array(phosphate)))


def aou(solubility: float, o2: float) -> float:
    return float(oxygen.apparent_oxygen_utilization(np.array(solubility), np.array(o2)))


def saturation(solubility: float, o2: float) -> float:
    return float(oxygen.oxygen_saturation(np.array(solubility), np.array(o2)))


def preformed_phosphate(phosphate: float, aou: float, ratios: str) -> float:
    found = nutrients.preformed_phosphate_redfield_1942(
        np.array(phosphate), np.array(aou), stoichiometry(ratios)
    )
    return float(found)


def preformed_nitrate(nitrate: float, aou: float, ratios: str) -> float:
    found = nutrients.preformed_nitrate_redfield_1942(np.array(nitrate), np.array(aou), stoichiometry(ratios))
    return float(found)


def ratio(name: str, element: str) -> float:
    return float(getattr(stoichiometry(name), element).value)


def oxygen_per_carbon(name: str) -> float:
    return ratio(name, "oxygen") / ratio(name, "carbon")


def carbon_per_oxygen(name: str) -> float:
    return 1.0 / oxygen_per_carbon(name)


def nitrogen_per_oxygen(name: str) -> float:
    return stoichiometry(name).nitrogen_per_oxygen


def southern_share(deep: float, north: float, south: float) -> float:
    """Return the southern share of a deep water from PO4* of two end members."""
    return (deep - north) / (south - north)


def southern_end_member(deep: float, north: float, share: float) -> float:
    """Return the southern PO4* that gives ``share`` of a deep water."""
    return north + (deep - north) / share


_WATER = {"phosphate": 1.3, "o2": 250.0}
_NORTH_SOUTH = {"north": 0.73, "south": 1.95}
_RATIOS = {
    # nitrogen, carbon, oxygen per phosphate
    StoichiometryName.REDFIELD_1963: (("16", VERIFIED), ("106", VERIFIED), ("138", MEMORY)),
    StoichiometryName.TAKAHASHI_1985: (("16", MEMORY), ("103", MEMORY), ("172", MEMORY)),
    StoichiometryName.ANDERSON_SARMIENTO_1994: (("16", VERIFIED), ("117", VERIFIED), ("170", VERIFIED)),
    StoichiometryName.ANDERSON_1995: (("16", MEMORY), ("106", MEMORY), ("150", MEMORY)),
    StoichiometryName.KORTZINGER_2001: (("17.5", MEMORY), ("123", MEMORY), ("165", MEMORY)),
}

ROWS = (
    *(
        Check(f"{element} per phosphate", {"name": name.value, "element": element}, ratio, printed,
              STOICHIOMETRIES[name].citation, status, within=0.0)
        for name, printed_ratios in _RATIOS.items()
        for element, (printed, status) in zip(("nitrogen", "carbon", "oxygen"), printed_ratios, strict=True)
    ),
    Check("oxygen per carbon", {"name": "anderson_sarmiento_1994"}, oxygen_per_carbon, "1.453", ANDERSON, VERIFIED),
    Check("carbon per oxygen", {"name": "anderson_sarmiento_1994"}, carbon_per_oxygen, "0.688",
          "Humphreys et al. 2016, GBC 30, after Anderson and Sarmiento 1994", VERIFIED),
    Check("nitrogen per oxygen", {"name": "anderson_sarmiento_1994"}, nitrogen_per_oxygen, "0.0941",
          "Humphreys et al. 2016, GBC 30, after Anderson and Sarmiento 1994", VERIFIED),
    # Water that lacks oxygen has a positive AOU, and one that the sun has filled over the brim a negative.
    Check("AOU of water that lacks oxygen, umol/kg", {"solubility": 280.0, "o2": 250.0}, aou, "30",
          "CF definition of apparent_oxygen_utilization; sign from memory", MEMORY, within=0.0),
    Check("AOU of oversaturated water, umol/kg", {"solubility": 280.0, "o2": 290.0}, aou, "-10",
          "CF definition of apparent_oxygen_utilization; sign from memory", MEMORY, within=0.0),
    Check("saturation, a fraction and not a percentage", {"solubility": 280.0, "o2": 210.0}, saturation, "0.75",
          "CF definition of fractional_saturation_of_oxygen_in_sea_water", EXACT, within=0.0),
    Check("preformed phosphate, umol/kg", {"phosphate": 2.0, "aou": 170.0, "ratios": "anderson_sarmiento_1994"},
          preformed_phosphate, "1", f"Redfield 1942; {ANDERSON}", EXACT, within=0.0),
    Check("preformed phosphate, umol/kg", {"phosphate": 2.0, "aou": 138.0, "ratios": "redfield_1963"},
          preformed_phosphate, "1", "Redfield 1942; Redfield, Ketchum and Richards 1963", EXACT, within=0.0),
    Check("preformed nitrate, umol/kg", {"nitrate": 30.0, "aou": 170.0, "ratios": "anderson_sarmiento_1994"},
          preformed_nitrate, "14", f"Redfield 1942; {ANDERSON}", EXACT, within=1e-14),
    Check("PO4*, umol/kg", {**_WATER, "freed": 0.0, "o2_per_p": 175.0}, po4_star, "0.7785714286", PO4_STAR,
          MEMORY),
    Check("PO4* after respiration, umol/kg", {**_WATER, "freed": 0.4, "o2_per_p": 175.0}, po4_star,
          "0.7785714286", PO4_STAR, EXACT),
    # Two ratios in one analysis: respiration at 170 moves a tracer made for 175.
    Check("drift of PO4* under another ratio, umol/kg", {**_WATER, "freed": 0.4, "o2_per_p": 170.0},
          po4_star_drift, "0.01143", PO4_STAR, EXACT),
    Check("drift of PO4* per phosphate freed", {**_WATER, "freed": 1.0, "o2_per_p": 170.0}, po4_star_drift,
          "0.029", PO4_STAR, EXACT),
    Check("N*, umol/kg", {"nitrate": 20.0, "phosphate": 1.3, "freed": 0.0}, n_star, "2.1", N_STAR, MEMORY,
          within=1e-14),
    Check("N* after respiration, umol/kg", {"nitrate": 20.0, "phosphate": 1.3, "freed": 0.4}, n_star, "2.1",
          N_STAR, EXACT, within=1e-14),
    Check("N* of 1997, umol/kg", {"nitrate": 20.0, "phosphate": 1.3, "freed": 0.4}, n_star_1997, "1.827",
          "Gruber and Sarmiento 1997, GBC 11:235", EXACT, within=1e-14),
    Check("drift of NO, umol/kg", {"o2": 250.0, "nitrate": 20.0, "freed": 2.0}, no_drift, "0",
          "Broecker 1974, EPSL 23:100-107", EXACT, within=0.0),
    Check("drift of PO, umol/kg", {"o2": 250.0, "phosphate": 1.5, "freed": 0.5}, po_drift, "0",
          "Broecker 1974, EPSL 23:100-107", EXACT, within=0.0),
    *(
        Check("southern share of deep Pacific and Indian water by PO4*", {"deep": deep, **_NORTH_SOUTH},
              southern_share, printed, "end members of Broecker et al. 1998, JGR 103:15833", MEMORY)
        for deep, printed in ((1.35, "0.508"), (1.39, "0.541"), (1.40, "0.549"))
    ),
    # With ventilated shelf water as the southern end member the halves are alike. The other published
    # answer, 75 percent, needs another end member.
    Check("southern share of deep Indo-Pacific water by PO4*", {"deep": 1.39, **_NORTH_SOUTH}, southern_share,
          "0.50", "Rae and Broecker 2018, Biogeosciences 15:3779: close to 50-50", VERIFIED, within=0.05),
    Check("southern end member that a share of 75 percent needs, umol/kg",
          {"deep": 1.39, "north": 0.73, "share": 0.75}, southern_end_member, "1.61",
          "75 percent: Rae and Broecker 2018, Biogeosciences 15:3779; 1.61 computed here, not published",
          Status.COMPUTED),
)  # fmt: skip
