"""The tag of a sample: its leading source, or one of a few plain reasons why it has none."""

from __future__ import annotations

from enum import StrEnum
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.status import MixingStatus

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from pipeline.settings import MixingSettings


class Tag(StrEnum):
    """Why a sample has no leading source for a tag. No source may have one of these as its code."""

    MIXED = "mixed"
    UNEXPLAINED = "unexplained"
    UNDETERMINED = "undetermined"
    INCOMPLETE = "incomplete"
    OUTSIDE = "outside"


TAG_WORDS: Mapping[Tag, str] = MappingProxyType(
    {
        Tag.MIXED: "no source has the share that `mixing.tag_share` asks of a leading one",
        Tag.UNEXPLAINED: (
            "the sources do not explain the values: the reduced chi-square is above "
            "`mixing.unexplained_chi_square`, or a value is absurd"
        ),
        Tag.UNDETERMINED: (
            "the values that are there cannot tell which source leads: the condition number is above "
            "`mixing.condition_limit`, or the source with the largest share leads in a smaller part of the ensemble "
            "than `mixing.tag_probability`"
        ),
        Tag.INCOMPLETE: (
            "so many values are missing that there are fewer equations than unknowns, or that no domain can be judged"
        ),
        Tag.OUTSIDE: "no set of the catalogue is valid where the sample was taken, or it lies in the mixed layer",
    }
)

LEADING_WORDS = (
    "the source with the largest share, which is at least `mixing.tag_share` of the settings; it leads in at least "
    "`mixing.tag_probability` of the ensemble, and the sources explain the sample"
)

# The tag of a sample that was not solved.
UNSOLVED: Mapping[MixingStatus, Tag] = MappingProxyType(
    {
        MixingStatus.INCOMPLETE: Tag.INCOMPLETE,
        MixingStatus.UNDETERMINED: Tag.UNDETERMINED,
        MixingStatus.ABSURD: Tag.UNEXPLAINED,
        MixingStatus.NOT_OPTIMAL: Tag.UNDETERMINED,
        MixingStatus.OUTSIDE: Tag.OUTSIDE,
    }
)


def tag_table() -> tuple[tuple[str, str], ...]:
    """Return every tag and what it means, a source's code first."""
    return (
        ("a source's code", LEADING_WORDS),
        *((tag.value, words) for tag, words in TAG_WORDS.items()),
    )


def tags(
    status: NDArray[np.int8],
    leading_source: NDArray[np.object_],
    leading_share: NDArray[np.float64],
    leading_probability: NDArray[np.float64],
    reduced_chi_square: NDArray[np.float64],
    settings: MixingSettings,
) -> NDArray[np.object_]:
    """Return the tag of every sample, (n_sample,), from columns of that shape.

    A fit without degrees of freedom has no chi-square that could speak against it, and without an ensemble no
    probability speaks against the leading source.
    """
    solved = status == MixingStatus.SOLVED
    explained = ~(reduced_chi_square > settings.unexplained_chi_square)
    tag = np.full(len(status), Tag.MIXED.value, dtype=object)
    for code, reason in UNSOLVED.items():
        tag[status == code] = reason.value
    tag[solved & ~explained] = Tag.UNEXPLAINED.value
    leads = solved & explained & (leading_share >= settings.tag_share)
    tag[leads] = leading_source[leads]
    tag[leads & (leading_probability < settings.tag_probability)] = Tag.UNDETERMINED.value
    return tag
