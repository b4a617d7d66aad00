"""Carbon-13 of DIC and carbon anomalies: published fits, components, rules of thumb."""

from __future__ import annotations

import numpy as np

from pipeline.settings import TracerSettings
from pipeline.tracers import anomalies, isotopes
from pipeline.tracers.stoichiometry import stoichiometry

from .check import Check, Status

Inputs = dict[str, float | str]

EXACT, VERIFIED, MEMORY, COMMON = Status.EXACT, Status.VERIFIED, Status.FROM_MEMORY, Status.COMMON
ZHANG = "Zhang, Quay and Wilbur 1995, GCA 59:107-114"
ABSTRACT = f"{ZHANG}, form of the abstract"
MOOK = "Mook, Bommerson and Staverman 1974, EPSL 22:169"
VOGEL = "Vogel et al. 1970"
LYNCH = "Lynch-Stieglitz et al. 1995, GBC 9:653"
CHARLES = "Charles et al. 1993; Lynch-Stieglitz and Fairbanks 1994"
BROECKER = "Broecker and Maier-Reimer 1992, GBC 6:315"
GRUBER = "Gruber, Sarmiento and Stocker 1996, GBC 10:809"
CRUISE = "sample of a public bottle file, I08S 2007, station 1, 3 dbar"

_SPECIES = {
    "aqueous CO2": isotopes.AQUEOUS_CO2,
    "bicarbonate": isotopes.BICARBONATE,
    "carbonate": isotopes.CARBONATE,
}
_FITS = {"0.105": isotopes.DIC_ZHANG_1995, "0.107": isotopes.DIC_ZHANG_1995_ABSTRACT}


def species(name: str, temperature: float) -> float:
    return float(_SPECIES[name].at(np.array(temperature)))


def dic(form: str, temperature: float, carbonate: float) -> float:
    return float(isotopes.dic_enrichment_zhang_1995(np.array(temperature), np.array(carbonate), _FITS[form]))


def difference_of_forms(temperature: float, carbonate: float) -> float:
    return dic("0.105", temperature, carbonate) - dic("0.107", temperature, carbonate)


def surface_delta(atmosphere: float, temperature: float, carbonate: float) -> float:
    enrichment = np.array(dic("0.105", temperature, carbonate))
    return float(isotopes.enriched(np.array(atmosphere), enrichment))


def dic_by_species(temperature: float, aqueous_co2: float, carbonate: float) -> float:
    bicarbonate = 1.0 - aqueous_co2 - carbonate
    found = isotopes.dic_enrichment_by_species_zhang_1995(
        np.array(temperature), np.array(aqueous_co2), np.array(bicarbonate), np.array(carbonate)
    )
    return float(found)


def kinetic(warm: float, cold: float) -> float:
    """Return what the named constant differs by from the mean of the two measured ones."""
    return isotopes.KINETIC_ZHANG_1995 - 0.5 * (warm + cold)


def _mook(numerator: float, constant: float, temperature: float) -> float:
    return -numerator * 1e3 / (temperature + 273.15) + constant


def gas_against_bicarbonate(temperature: float) -> float:
    return _mook(9.483, 23.89, temperature)


def aqueous_against_bicarbonate(temperature: float) -> float:
    return _mook(9.866, 24.12, temperature)


def aqueous_against_gas(temperature: float) -> float:
    return _mook(0.373, 0.19, temperature)


def inverted(enrichment: float) -> float:
    """Return the enrichment of the one against the other, per mil, from that of the other against the one."""
    return 1000.0 / (1.0 + enrichment / 1000.0) - 1000.0


def zhang_gas_against_bicarbonate(temperature: float) -> float:
    return inverted(species("bicarbonate", temperature))


def zhang_aqueous_against_bicarbonate(temperature: float) -> float:
    bicarbonate, aqueous = species("bicarbonate", temperature), species("aqueous CO2", temperature)
    return 1000.0 * (1.0 + aqueous / 1000.0) / (1.0 + bicarbonate / 1000.0) - 1000.0


def line(constant: str, slope: str, ratios: str = "anderson_sarmiento_1994") -> isotopes.BiologicalLine:
    chosen = {"biological_constant": constant, "biological_slope": slope, "stoichiometry": ratios}
    return isotopes.biological_line(TracerSettings.model_validate(chosen))


def air_sea(
    phosphate: float, delta: float, constant: str, slope: str, ratios: str = "anderson_sarmiento_1994"
) -> float:
    return delta - float(line(constant, slope, ratios).at(np.array(phosphate)))


def slope(name: str, ratios: str = "anderson_sarmiento_1994") -> float:
    return line("lynch_stieglitz_1995", name, ratios).slope


def constant(name: str) -> float:
    return line("lynch_stieglitz_1995", name).constant


def biological(phosphate: float) -> float:
    return float(isotopes.biological_line(TracerSettings()).at(np.array(phosphate)))


def fractionation() -> float:
    return TracerSettings().photosynthetic_fractionation


def c_star(carbon: float, oxygen: float, alkalinity: float) -> float:
    ratios = stoichiometry("anderson_sarmiento_1994")
    found = anomalies.c_star_gruber_1996(np.array(carbon), np.array(oxygen), np.array(alkalinity), ratios)
    return float(found)


def potential(form: str, alkalinity: float, nitrate: float, salinity: float) -> float:
    per_nitrate = anomalies.alkalinity_per_nitrate(form)
    found = anomalies.potential_alkalinity(
        np.array(alkalinity), np.array(nitrate), np.array(salinity), per_nitrate, 35.0
    )
    return float(found)


_SAMPLE: Inputs = {"alkalinity": 2267.2, "nitrate": 22.66, "salinity": 33.4640}
_TEMPERATURES = (5.0, 10.0, 21.0, 25.0)
_BY_SPECIES = {
    "aqueous CO2": ("-1.2855", "-1.261", "-1.2071", "-1.1875"),
    "bicarbonate": ("10.2095", "9.639", "8.3839", "7.9275"),
    "carbonate": ("6.96", "6.70", "6.128", "5.92"),
}
_BY_FORM = {
    "0.105": (VERIFIED, ZHANG, ("10.0085", "9.4912", "8.3603", "7.9470")),
    "0.107": (MEMORY, ABSTRACT, ("9.9986", "9.4715", "8.3193", "7.8982")),
}
_PARTS = (0.05, 0.08, 0.12, 0.12)
# degC, gas and aqueous against bicarbonate, and what the stated uncertainties of slope and constant make of each
# when they are independent.
_MOOK = (
    (0.0, "-10.8272", "-11.9993"),
    (5.0, "-10.2031", "-11.3501"),
    (15.0, "-9.0199", "-10.1191"),
    (25.0, "-7.9161", "-8.9707"),
)


def _stated(of_slope: float, of_constant: float, temperature: float) -> float:
    return float(np.hypot(of_slope * 1e3 / (temperature + 273.15), of_constant))


ROWS = (
    *(
        Check(f"{name} against CO2 gas, per mil", {"name": name, "temperature": temperature}, species, printed,
              f"{ZHANG}; arithmetic from its line", VERIFIED)
        for name, line_printed in _BY_SPECIES.items()
        for temperature, printed in zip(_TEMPERATURES, line_printed, strict=True)
    ),
    *(
        Check("DIC against CO2 gas, per mil", {"form": form, "temperature": temperature, "carbonate": part}, dic,
              printed, f"{source}; arithmetic from its line", status)
        for form, (status, source, line_printed) in _BY_FORM.items()
        for temperature, part, printed in zip(_TEMPERATURES, _PARTS, line_printed, strict=True)
    ),
    Check("what the two forms differ by at 25 degC, per mil", {"temperature": 25.0, "carbonate": 0.12},
          difference_of_forms, "0.05", f"{ZHANG} and its abstract", EXACT),
    # DIC that is all bicarbonate has its enrichment, and the sum over species stays near the empirical line.
    Check("DIC that is bicarbonate alone, per mil", {"temperature": 25.0, "aqueous_co2": 0.0, "carbonate": 0.0},
          dic_by_species, "7.9275", f"{ZHANG}; mass balance", EXACT),
    Check("DIC by species, per mil", {"temperature": 21.0, "aqueous_co2": 0.006, "carbonate": 0.10}, dic_by_species,
          "8.100764", f"{ZHANG}; mass balance", EXACT),
    Check("kinetic constant less the mean of -0.81 and -0.95, per mil", {"warm": -0.81, "cold": -0.95}, kinetic, "0.00",
          ZHANG, VERIFIED, within=1e-12),
    *(
        Check(f"{what} against bicarbonate, per mil", {"temperature": temperature}, by, printed,
              f"{MOOK}; arithmetic from its line", VERIFIED)
        for temperature, *both in _MOOK
        for what, by, printed in zip(("CO2 gas", "aqueous CO2"),
                                     (gas_against_bicarbonate, aqueous_against_bicarbonate), both, strict=True)
    ),
    *(
        Check(f"{what} against bicarbonate by Zhang et al., per mil", {"temperature": temperature}, by, printed,
              f"{MOOK}; within its stated uncertainty", VERIFIED, within=_stated(*stated, temperature))
        for temperature, *both in _MOOK
        for what, by, printed, stated in zip(
            ("CO2 gas", "aqueous CO2"), (zhang_gas_against_bicarbonate, zhang_aqueous_against_bicarbonate), both,
            ((0.22, 0.75), (0.23, 0.78)), strict=True)
    ),
    Check("aqueous CO2 against gas, per mil", {"temperature": 25.0}, aqueous_against_gas, "-1.0610", VOGEL, VERIFIED),
    # With the other sign of the slope, which public codes have too, this would be -1.4325.
    Check("aqueous CO2 against gas by Zhang et al., per mil", {"name": "aqueous CO2", "temperature": 25.0}, species,
          "-1.0610", f"{VOGEL}, beside Zhang et al. 1995", VERIFIED, within=0.15),
    *(
        Check("air-sea component, per mil",
              {"phosphate": phosphate, "delta": delta, "constant": name, "slope": "lynch_stieglitz_1995"},
              air_sea, printed, source, MEMORY)
        for phosphate, delta, printed_both in ((2.2, 0.5, ("0.22", "0.17")), (1.0, 1.4, ("-0.20", "-0.25")))
        for name, source, printed in zip(("lynch_stieglitz_1995", "charles_1993"), (LYNCH, CHARLES), printed_both,
                                         strict=True)
    ),
    # At the mean phosphate the slope makes no difference.
    Check("air-sea component, per mil", {"phosphate": 2.2, "delta": 0.5, "constant": "lynch_stieglitz_1995",
          "slope": "stoichiometry"}, air_sea, "0.22", LYNCH, MEMORY),
    Check("slope on phosphate, per mil per umol/kg", {"name": "broecker_maier_reimer_1992"}, slope, "-1.1055", BROECKER,
          MEMORY),
    Check("carbon-13 without phosphate, per mil", {"name": "broecker_maier_reimer_1992"}, constant, "2.7", LYNCH,
          MEMORY),
    # Rules of thumb. Where rule and computation differ, the tolerance says by how much.
    Check("DIC against CO2 gas near freezing, per mil: ten to eleven",
          {"form": "0.105", "temperature": -1.8, "carbonate": 0.05}, dic, "10.5", "common practice", COMMON,
          within=0.5),
    Check("DIC against CO2 gas in the tropics, per mil: about eight",
          {"form": "0.105", "temperature": 27.0, "carbonate": 0.12}, dic, "8", "common practice; 0.26 less computed",
          COMMON, within=0.3),
    Check("surface water at equilibrium near freezing, per mil",
          {"atmosphere": -8.5, "temperature": -1.8, "carbonate": 0.05}, surface_delta, "2.2",
          "common practice; 0.07 less computed", COMMON, within=0.1),
    Check("surface water at equilibrium in the tropics, per mil",
          {"atmosphere": -8.5, "temperature": 27.0, "carbonate": 0.12}, surface_delta, "-0.8", "common practice",
          COMMON),
    Check("slope on phosphate, per mil per umol/kg: about -1.1", {"name": "stoichiometry", "ratios": "redfield_1963"},
          slope, "-1.1", "common practice, C:N:P 106:16:1; -0.915 computed", COMMON, within=0.2),
    Check("slope on phosphate, per mil per umol/kg: about -1.1", {"name": "stoichiometry"}, slope, "-1.1",
          "common practice, C:P 117; -1.01 computed", COMMON, within=0.1),
    Check("biological component at the phosphate of the deep North Pacific, per mil: minimum near -0.5",
          {"phosphate": 3.0}, biological, "-0.5", "common practice", COMMON),
    Check("fractionation that the slope takes, per mil: 20 to 25", {}, fractionation, "-22.5",
          "common practice; the -19 of the slope (Broecker and Maier-Reimer 1992, from memory) is 1 below the range",
          COMMON, within=3.5),
    Check("C*, umol/kg", {"carbon": 2100.0, "oxygen": 250.0, "alkalinity": 2320.0}, c_star, "1123.82353", GRUBER,
          MEMORY),
    Check("C* after respiration of half a phosphate, umol/kg",
          {"carbon": 2158.5, "oxygen": 165.0, "alkalinity": 2312.0}, c_star, "1123.82353", GRUBER, EXACT),
    Check("C* after calcium carbonate dissolved, umol/kg",
          {"carbon": 2120.0, "oxygen": 250.0, "alkalinity": 2360.0}, c_star, "1123.82353", GRUBER, EXACT),
    Check("potential alkalinity, umol/kg", {"form": "brewer_1975", **_SAMPLE}, potential, "2394.965",
          f"Brewer et al. 1975; {CRUISE}", MEMORY),
    Check("potential alkalinity, umol/kg", {"form": "carter_2014", **_SAMPLE}, potential, "2401.127",
          f"Carter et al. 2014, BG 11:7349, 1.26 from memory; {CRUISE}", MEMORY),
)  # fmt: skip
