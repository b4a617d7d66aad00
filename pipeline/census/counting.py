"""The census of a cruise, and of two: samples, source waters and settings in, areas with their uncertainty out."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from pipeline.census.comparing import change_of, find_common
from pipeline.census.section import in_order, make_section
from pipeline.census.taking import lay_out, shares_of
from pipeline.mixing.member_sums import member_sums
from pipeline.problems import ArchiveProblem, UsageProblem

if TYPE_CHECKING:
    from collections.abc import Sequence

    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.census.comparing import Change, Common
    from pipeline.census.section import Section
    from pipeline.census.taking import Layout, Shares
    from pipeline.mixing import Catalogue
    from pipeline.mixing.member_sums import MemberSums
    from pipeline.settings import Settings

    FloatArray = NDArray[np.float64]

MEMBERS = 100  # where the archive was made without an ensemble
_ROUNDING = 1e-6  # of a share


@dataclass(frozen=True, eq=False)
class Resolved:
    """A cruise's samples with what their shares were made with."""

    expocode: str
    samples: pa.Table
    catalogue: Catalogue
    settings: Settings

    @property
    def members(self) -> int:
        """How many the ensemble has."""
        return self.settings.mixing.members or MEMBERS


@dataclass(frozen=True, eq=False)
class Census:
    """What a section is made of. Rows of classes: the whole, then from the lightest, then what has no density."""

    section: Section
    layout: Layout
    sources: tuple[str, ...]
    shares: Shares
    density: str
    boundaries: FloatArray
    errors: str  # of measurements: common or independent
    members: int

    @property
    def expocode(self) -> str:
        """The cruise."""
        return self.section.expocode


@dataclass(frozen=True, eq=False)
class Comparison:
    """Two censuses, and how what both resolved has changed from the first to the second."""

    one: Census
    other: Census
    common: Common
    change: Change


def boundaries_of(settings: Settings, catalogues: Sequence[Catalogue]) -> tuple[str, FloatArray]:
    """Return by which density sections are divided, and at which values: of the settings, else of the catalogues."""
    asked = settings.census
    if asked.boundaries:
        return asked.density, np.array(asked.boundaries)
    for density in dict.fromkeys((asked.density, "sigma0", "sigma2", "sigma4")):
        ranges = [
            found
            for catalogue in catalogues
            for one in catalogue.set
            if (found := getattr(one.valid, density)) is not None
        ]
        if ranges:
            return density, np.unique(np.array(ranges, dtype=np.float64).ravel())
    return asked.density, np.zeros(0)


def take_census(cruise: Resolved) -> Census:
    """Return the census of a cruise.

    Raises
    ------
    ArchiveProblem
        If the shares in its tables are not those that this version computes.

    """
    cruise = replace(cruise, samples=in_order(cruise.samples))
    (density, boundaries), settings = boundaries_of(cruise.settings, [cruise.catalogue]), cruise.settings
    section = make_section(cruise.expocode, cruise.samples, density, settings)
    layout = lay_out(section, boundaries)
    sums = _sums(cruise, section, layout.weights)
    return Census(
        section, layout, sums.sources, shares_of(sums, layout.resolved), density, boundaries,
        settings.census.measurement_errors, cruise.members,
    )  # fmt: skip


def compare(one: Resolved, other: Resolved) -> Comparison:
    """Return how the parts of the sources have changed from one cruise to another.

    Raises
    ------
    ArchiveProblem
        If the shares in the tables of one are not those that this version computes.
    UsageProblem
        If the two were not resolved into the same source waters, with the same ensemble.

    """
    first, second = (cruise.settings.mixing for cruise in (one, other))
    for what, mine, yours in (
        ("source waters", one.catalogue.sha256, other.catalogue.sha256),
        ("seeds of the ensemble", first.seed, second.seed),
        ("numbers of members", one.members, other.members),
        ("ratios of respiration", one.settings.tracers.stoichiometry, other.settings.tracers.stoichiometry),
    ):
        if mine != yours:
            raise UsageProblem(
                f"{one.expocode} and {other.expocode} were made with different {what}, so that a change of shares is"
                " not one of the water; run again with one catalogue and the same settings for both."
            )
    one, other = (replace(cruise, samples=in_order(cruise.samples)) for cruise in (one, other))
    censuses = take_census(one), take_census(other)
    common = find_common(
        censuses[0].section, censuses[1].section, censuses[0].boundaries, one.settings.census.apart
    )
    sums = [
        _sums(cruise, census.section, weights)
        for cruise, census, weights in zip((one, other), censuses, common.weights, strict=True)
    ]
    return Comparison(*censuses, common, change_of(sums[0], sums[1], common))


def _sums(cruise: Resolved, section: Section, weights: FloatArray) -> MemberSums:
    sums = member_sums(
        cruise.samples, cruise.catalogue, cruise.settings, section.of_samples(weights),
        errors=cruise.settings.census.measurement_errors, members=cruise.members,
    )  # fmt: skip
    if sums.largest_difference > _ROUNDING:
        raise ArchiveProblem(
            f"{cruise.expocode}: the shares in its tables are not those that this version computes (they differ by up"
            f" to {sums.largest_difference:.2g}); run again to make them anew."
        )
    return sums
