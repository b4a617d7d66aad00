"""What the registry says of the components of carbon-13, of carbon anomalies, and of carbon in mixtures."""

from __future__ import annotations

from pipeline.variable import Variable

_ZHANG = "Zhang, Quay and Wilbur 1995, GCA 59:107-114; form and atmosphere: see 'form'"
_BROECKER = (
    "Broecker and Maier-Reimer 1992, GBC 6:315; Lynch-Stieglitz et al. 1995, GBC 9:653; line: see 'form'"
)
_FIRST_ORDER = "first order; what it holds: see 'uncertainty'"
_GRUBER = "Gruber, Sarmiento and Stocker 1996, GBC 10:809; ratios: see 'form'"
_FRIIS = "X less its value without salt, times reference over salinity, and that value; Friis et al. 2003"


def _components() -> tuple[Variable, ...]:
    rows = (
        ("equilibrium", "Carbon-13 of DIC at equilibrium with the air, at potential temperature", _ZHANG),
        ("biological", "Carbon-13 of DIC by phosphate alone", _BROECKER),
        ("air_sea", "Air-sea component of carbon-13 of DIC: measured less biological", _BROECKER),
        ("disequilibrium", "Carbon-13 of DIC, measured less that at equilibrium with the air", _ZHANG),
    )
    return tuple(
        variable
        for part, words, source in rows
        for variable in (
            Variable(f"delta_carbon_13_{part}", words, "1e-3", source=source),
            Variable(f"delta_carbon_13_{part}_uncertainty", f"{words}: standard uncertainty", "1e-3",
                     source=_FIRST_ORDER),
        )
    )  # fmt: skip


ISOTOPES: tuple[Variable, ...] = _components()


def _anomalies() -> tuple[Variable, ...]:
    rows = (
        ("dic_normalised", "DIC normalised to a salinity", _FRIIS),
        ("alkalinity_normalised", "Alkalinity normalised to a salinity", _FRIIS),
        (
            "potential_alkalinity",
            "Alkalinity as if its nitrate were not there, normalised to a salinity",
            "Brewer et al. 1975, or Carter et al. 2014, BG 11:7349: see 'form'",
        ),
        ("c_star", "C*: DIC less what respiration and calcium carbonate change, up to a constant", _GRUBER),
        ("dic_soft_tissue", "DIC that respiration freed since the water left the surface", _GRUBER),
        (
            "preformed_alkalinity",
            "Alkalinity that the water left the surface with",
            "a relation of the settings: see 'form'",
        ),
        (
            "dic_calcium_carbonate",
            "DIC that dissolving calcium carbonate added since the water left the surface",
            _GRUBER,
        ),
        (
            "preformed_dic",
            "DIC that the water left the surface with, by the preformed alkalinity taken",
            _GRUBER,
        ),
    )
    return tuple(
        variable
        for name, words, source in rows
        for variable in (
            Variable(name, words, "umol kg-1", source=source),
            Variable(f"{name}_uncertainty", f"{words}: standard uncertainty", "umol kg-1", source=_FIRST_ORDER),
        )
    )  # fmt: skip


ANOMALIES: tuple[Variable, ...] = _anomalies()

SAMPLE_CARBON: tuple[Variable, ...] = (*ISOTOPES, *ANOMALIES)

_MIXING = "Karstensen and Tomczak 1998, with a further unknown"
_DISSOLVED = "calcium carbonate that dissolved since the sources mixed"


def _with_uncertainty(name: str, words: str, unit: str) -> tuple[Variable, Variable]:
    return (
        Variable(name, words, unit, source=_MIXING),
        Variable(f"{name}_uncertainty", f"{words}: standard uncertainty", unit, source=_MIXING),
    )


MIXED_CARBON: tuple[Variable, ...] = (
    *_with_uncertainty("calcium_carbonate", f"{_DISSOLVED.capitalize()} (negative: was made)", "umol kg-1"),
    *_with_uncertainty("dic_from_calcium_carbonate", f"Dissolved inorganic carbon of {_DISSOLVED}", "umol kg-1"),
    *_with_uncertainty("alkalinity_from_calcium_carbonate", f"Alkalinity of {_DISSOLVED}", "umol kg-1"),
    *_with_uncertainty("delta_carbon_13_from_sources", "Carbon-13 of the DIC that came with the source waters", "1e-3"),
    *_with_uncertainty("delta_carbon_13_from_respiration", "By how much respiration changed carbon-13 of DIC", "1e-3"),
    *_with_uncertainty("delta_carbon_13_from_calcium_carbonate",
                       "By how much calcium carbonate, after respiration, changed carbon-13 of DIC", "1e-3"),
)  # fmt: skip
