"""The flag schemes of delivered files, and what their flags are in the WHP scheme that all else is judged by.

Meanings: WHP from Joyce and Corry 1994, WHP 90-1; IODE from IOC Manuals and Guides 54, vol. 3, 2013; QARTOD from
the manual for real-time flags, version 1.2, 2020, doi 10.25923/w8y6-d298; Argo as quoted in public flag tables of
Argo data centres. No one-to-one table between these and WHP was found in print: the mappings are our own, made so
that what one scheme calls good, and nothing else, is good in the other.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from enum import StrEnum
from functools import partial
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from pipeline.findings import Finding, Severity, at
from pipeline.reading.spread import Spread
from pipeline.variables import FlagScheme

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.reading.spread import LineArray

    FloatArray = NDArray[np.float64]


class Scheme(StrEnum):
    """Whose flags a file carries."""

    WHP = "whp"
    IODE = "iode"
    QARTOD = "qartod"
    ARGO = "argo"


@dataclass(frozen=True, slots=True)
class Flag:
    """One flag: its meaning, and the WHP flag that says the same; None where WHP has no word for it."""

    number: int
    meaning: str
    bottle: int | None
    water: int | None
    ctd: int | None

    def whp(self, table: FlagScheme) -> int | None:
        """Return the WHP flag of one of its three tables."""
        return {FlagScheme.BOTTLE: self.bottle, FlagScheme.WATER: self.water, FlagScheme.CTD: self.ctd}[table]


def _alike(number: int, meaning: str, whp: int | None) -> Flag:
    """Return a flag that is the same in all three WHP tables."""
    return Flag(number, meaning, whp, whp, whp)


# A value that nobody has judged has no flag in WHP: 1 there means that the analysis was not received (water)
# or that the sensor was not calibrated (CTD).
_IODE = (
    _alike(1, "good", 2),
    _alike(2, "not evaluated, not available or unknown", None),
    _alike(3, "questionable or suspect", 3),
    _alike(4, "bad", 4),
    _alike(9, "missing", 9),
)
FLAGS: Mapping[Scheme, Mapping[int, Flag]] = MappingProxyType(
    {
        scheme: MappingProxyType({flag.number: flag for flag in flags})
        for scheme, flags in (
            (Scheme.IODE, _IODE),
            (Scheme.QARTOD, _IODE),  # the same numbers, named pass, not evaluated, suspect, fail, missing
            (
                Scheme.ARGO,
                (
                    _alike(0, "no quality control", None),
                    _alike(1, "good", 2),
                    _alike(2, "probably good", 2),
                    _alike(3, "bad, potentially correctable", 3),
                    _alike(4, "bad", 4),
                    _alike(5, "changed", 3),  # no longer what was measured
                    Flag(8, "estimated or interpolated", 3, 3, 6),  # of water, WHP knows no such sample
                    _alike(9, "missing", 9),
                ),
            ),
        )
    }
)

# Meanings of the WHP flags, table by table: the same number is not the same thing.
WHP_MEANINGS: Mapping[FlagScheme, Mapping[int, str]] = MappingProxyType(
    {
        FlagScheme.BOTTLE: MappingProxyType({
            1: "bottle information unavailable", 2: "no problems noted", 3: "leaking", 4: "did not trip correctly",
            5: "not reported", 6: "discrepancy between a pair of bottles", 7: "unknown problem",
            8: "a pair of bottles did not trip correctly", 9: "samples not drawn",
        }),
        FlagScheme.WATER: MappingProxyType({
            1: "drawn, analysis not received", 2: "acceptable", 3: "questionable", 4: "bad", 5: "not reported",
            6: "mean of replicates", 7: "manual chromatographic peak", 8: "irregular digital chromatographic peak",
            9: "not sampled from this bottle",
        }),
        FlagScheme.CTD: MappingProxyType({
            1: "not calibrated", 2: "acceptable", 3: "questionable", 4: "bad", 5: "not reported",
            6: "interpolated over more than 2 dbar", 7: "despiked", 9: "not sampled",
        }),
    }
)  # fmt: skip

_NOT_GOOD = 3  # questionable: what a flag outside its scheme counts as
_MOST_TOLD = 50


@dataclass(frozen=True, slots=True)
class MappedFlags:
    """WHP flags of n_row rows, NaN where none, and the rows whose delivered flag the scheme does not have."""

    whp: FloatArray
    odd: NDArray[np.int64]


def to_whp(
    scheme: Scheme, flags: FloatArray, table: FlagScheme, unreadable: NDArray[np.int64] | None = None
) -> MappedFlags:
    """Return delivered flags as WHP flags.

    WHP flags come back as they are, whatever they are. In the other schemes a flag that the scheme does not have
    becomes 3, questionable: it counts as not good.

    Parameters
    ----------
    scheme
        Whose flags they are.
    flags
        Delivered numbers, NaN where there is no flag, (n_row,).
    table
        Which of the WHP tables the quantity is flagged with.
    unreadable
        Rows whose flag is no whole number at all, (n_unreadable,); they count as outside the scheme.

    """
    if scheme is Scheme.WHP:
        return MappedFlags(flags, np.empty(0, dtype=np.int64))
    whp = np.full(flags.shape, np.nan)
    given = ~np.isnan(flags)
    known = ~given
    for number, flag in FLAGS[scheme].items():
        same = given & (flags == number)
        known |= same
        number_whp = flag.whp(table)
        if number_whp is not None:
            whp[same] = number_whp
    odd = np.flatnonzero(~known)
    if unreadable is not None:
        odd = np.union1d(odd, np.asarray(unreadable, dtype=np.int64))
    whp[odd] = _NOT_GOOD
    return MappedFlags(whp, odd)


def fitting_scheme(flags: FloatArray) -> Scheme | None:
    """Return which scheme flags, (n_flag,), seem to be of, None where they fit none; good is 2 in WHP, 1 elsewhere."""
    counts = Counter(flags.tolist())
    if not counts:
        return None
    most = counts.most_common(1)[0][0]
    if (most == 2 or counts[2.0] > counts[1.0]) and set(counts) <= {0, *WHP_MEANINGS[FlagScheme.WATER]}:
        return Scheme.WHP
    return next((scheme for scheme in (Scheme.IODE, Scheme.ARGO) if set(counts) <= set(FLAGS[scheme])), None)


def guess_scheme(flags: FloatArray) -> tuple[Scheme, str]:
    """Return which scheme flags, (n_flag,), seem to be of, and why, for a draft."""
    counts = Counter(flags.tolist())
    if not counts:
        return Scheme.WHP, "there are none; WHP is the scheme of the exchange format"
    found = ", ".join(f"{flag:g}" for flag, _ in sorted(counts.items())[:10])
    why = f"found {found}, most often {counts.most_common(1)[0][0]:g}"
    match fitting_scheme(flags):
        case Scheme.WHP:
            return Scheme.WHP, f"{why}; in WHP 2 is good, in IODE, QARTOD and Argo 1"
        case Scheme.IODE:
            return Scheme.IODE, f"{why}; IODE and QARTOD have the same numbers; in WHP 2 is good"
        case Scheme.ARGO:
            return Scheme.ARGO, f"{why}; 0, 5 and 8 are of Argo"
        case _:
            return Scheme.WHP, f"{why}, which fits no scheme"


def doubted_scheme(scheme: Scheme, flags: FloatArray, table: FlagScheme) -> str:
    """Return in words why flags seem to be of another scheme than is said, "" where they do not.

    Parameters
    ----------
    scheme
        Whose flags they are said to be.
    flags
        Delivered numbers, NaN where there is no flag, (n_row,).
    table
        Which of the WHP tables the quantity is flagged with.

    """
    given = flags[~np.isnan(flags)]
    ones, twos = int(np.count_nonzero(given == 1)), int(np.count_nonzero(given == 2))
    if scheme is Scheme.WHP and ones > max(twos, len(given) / 2):
        meaning = WHP_MEANINGS[table][1]
        return (
            f"most often are 1 ({ones} of {len(given)}), which in WHP is '{meaning}', and such values are not used; in"
            ' IODE, QARTOD and Argo 1 is good; if they are of one of these, write flags = "iode", "qartod" or "argo"'
        )
    if scheme in {Scheme.IODE, Scheme.QARTOD} and twos > ones:
        return (
            f"most often are 2 ({twos} of {len(given)}), which in {scheme.upper()} is 'not evaluated', and such values"
            ' count as having no flag; in WHP 2 is acceptable; if they are WHP flags, write flags = "whp"'
        )
    return ""


def mapping_words(scheme: Scheme, table: FlagScheme) -> str:
    """Return in words how the flags of a scheme became WHP flags."""
    parts = []
    for number, flag in FLAGS[scheme].items():
        whp = flag.whp(table)
        parts.append(f"{number} as {'no flag' if whp is None else whp}")
    name = scheme.value if scheme is Scheme.ARGO else scheme.value.upper()
    return f"{name.capitalize() if scheme is Scheme.ARGO else name} flags as WHP {table} flags: {', '.join(parts)}"


def odd_flag_findings(
    file: str,
    column: str,
    variable: str,
    scheme: Scheme,
    texts: Sequence[str],
    lines: Sequence[int],
) -> list[Spread]:
    """Tell which delivered flags the scheme does not have, each different one once.

    Parameters
    ----------
    file, column, variable
        The delivered file, the delivered column of flags, and the quantity these speak of.
    scheme
        Whose flags they are said to be.
    texts, lines
        The flags as delivered, and the line of each, (n_odd,).

    """
    wanted = ", ".join(str(number) for number in FLAGS[scheme])
    places: dict[str, list[int]] = {}
    for text, line in zip(texts, lines, strict=True):
        places.setdefault(text, []).append(line)

    def tell(text: str, mine: LineArray) -> Finding:
        more = f" (and in {len(mine) - 1} more rows)" if len(mine) > 1 else ""
        return Finding(
            "unknown-flag", Severity.FAULT,
            f"{at(file, int(mine[0]))}: the flag {column} is '{text[:30]}'{more}; expected one of {wanted} ({scheme});"
            " it counts as not good.",
            variable=variable, value=text[:200], limit=wanted, file=file, line=int(mine[0]), count=len(mine),
        )  # fmt: skip

    return [
        Spread(np.array(where, dtype=np.int64), partial(tell, text))
        for text, where in list(places.items())[:_MOST_TOLD]
    ]
