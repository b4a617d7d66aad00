"""Which columns of the samples a page can draw, in which group, and with which scale."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.reporting.wording import quantity_words, unit_words
from pipeline.variables import (
    ANOMALIES,
    CARBONATE,
    CHECKED,
    ISOTOPES,
    MEASURED,
    REGISTRY,
    RESIDUAL_PREFIX,
    SEAWATER,
    TRACERS,
    Kind,
)

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from pipeline.reporting.gathered import Gathered

SHARE, SHARE_UNCERTAINTY = "share", "share_uncertainty"
_MIXING = (
    "leading_share", "leading_probability", "respiration", "reduced_chi_square", "hull_distance", "condition_number",
)  # fmt: skip
AXES = ("pressure", "depth", "sigma0", "sigma2")  # what a section's vertical may be, and always there
# What a CTD profile shows, where the CTD has it.
PROFILED = (
    "conservative_temperature",
    "absolute_salinity",
    "oxygen",
    "sigma0",
    "fluorescence",
    "transmission",
)
SPLIT = ("oxygen", "phosphate", "nitrate", "silicate", "dic", "alkalinity")  # between sources and respiration
SURE = 0.9  # part of the ensemble from which on a leader is called sure (our choice, no source)
PRESENT = 0.05  # share from which on a source counts as present (our choice, no source)
_UNCERTAIN = ("_uncertainty", "_error")


@dataclass(frozen=True, slots=True)
class Quantity:
    """Something that has a value for each sample."""

    key: str
    group: str
    words: str
    unit: str  # as printed
    values: NDArray[np.float64]  # (n_sample,), those that may be used, NaN elsewhere
    refused: NDArray[np.float64] | None = None  # those that may not be used, NaN elsewhere

    @property
    def label(self) -> str:
        """Words and unit, for an axis."""
        return f"{self.words}, {self.unit}" if self.unit else self.words


def drawable(cruise: Gathered) -> list[Quantity]:
    """Return everything of a cruise that can be drawn: each quantity that has a value, in groups."""
    groups = (
        ("Measured", [name for name in MEASURED if name in CHECKED]),
        ("Sea water", SEAWATER),
        ("Tracers", TRACERS),
        ("Carbon", [v.name for v in (*CARBONATE, *ISOTOPES, *ANOMALIES)]),
        ("Mixing", [*_MIXING, *(n for n in REGISTRY if n.endswith(("_from_sources", "_from_respiration")))]),
        ("Residuals", [name for name in REGISTRY if name.startswith(RESIDUAL_PREFIX)]),
    )
    made = [*_shares(cruise)]
    for group, names in groups:
        made += [
            quantity
            for name in names
            if name in cruise.bottles.names
            and REGISTRY[name].kind is Kind.NUMBER
            and not name.endswith(_UNCERTAIN)
            and (quantity := _column(cruise, name, group)) is not None
        ]
    return made


def _column(cruise: Gathered, name: str, group: str) -> Quantity | None:
    values = cruise.bottles.usable(name)
    refused = None
    if name in MEASURED:
        delivered = cruise.bottles.floats(name)
        refused = np.where(np.isnan(values), delivered, np.nan)
        refused = None if np.isnan(refused).all() else refused
    if np.isnan(values).all() and refused is None and name not in AXES:
        return None
    return Quantity(name, group, quantity_words(name), unit_words(REGISTRY[name].unit), values, refused)


def _shares(cruise: Gathered) -> Iterator[Quantity]:
    for column, group, words in (
        (SHARE, "Shares", "Share of {}"),
        (SHARE_UNCERTAINTY, "Uncertainties of shares", "Standard uncertainty of the share of {}"),
    ):
        values = cruise.shares.share if column == SHARE else cruise.shares.uncertainty
        for number, look in enumerate(cruise.sources):
            if not np.isnan(values[:, number]).all():
                yield Quantity(
                    f"{column}:{look.code}", group, words.format(look.code), "", values[:, number].copy()
                )
