"""The words that files have for what their flags mean, and which scheme has these meanings under these numbers.

Common practice, no source: as found in files. What the schemes themselves say is in `schemes.py`.
"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from pipeline.reading.schemes import FLAGS, WHP_MEANINGS, Scheme
from pipeline.variables import FlagScheme

if TYPE_CHECKING:
    from collections.abc import Mapping

_GOOD = r"good|pass(ed)?|acceptable|accepted|ok|valid|no_problems?_(noted|found)|passed_required_qc_test"
_UNKNOWN = (
    r"not_evaluated|unknown|not_available|no_qc(_performed)?|not_checked|no_quality_control|unevaluated"
)
_DOUBTFUL = r"questionable|suspect|doubtful|questionable_suspect|questionable_or_suspect|of_high_interest"
_BAD = r"bad|fail(ed)?|known_bad|erroneous"
_MISSING = r"missing|no_data|not_sampled.*|not_drawn|samples?_not_drawn|not_drawn.*"
_NOT_REPORTED = r"(not_|un)reported"
_IODE = {
    1: _GOOD, 2: f".*({_UNKNOWN}).*", 3: f".*({_DOUBTFUL}).*", 4: _BAD, 9: _MISSING,
}  # fmt: skip
_ARGO = {
    0: f".*({_UNKNOWN}).*", 1: _GOOD, 2: r"probably_good",
    3: r"(probably_bad|bad_data_that_are_potentially_correctable|potentially_correctable|bad_.*correctable).*",
    4: _BAD, 5: r"(value_)?changed", 8: r"(estimated|interpolated).*", 9: _MISSING,
}  # fmt: skip
_WHP: Mapping[FlagScheme, Mapping[int, str]] = {
    FlagScheme.WATER: {
        1: r".*(not_received|unavailable|not_yet|not_analy[sz]ed|pending).*", 2: _GOOD, 3: f"{_DOUBTFUL}|leaking",
        4: rf"{_BAD}|did_not_trip.*", 5: _NOT_REPORTED, 6: r".*(mean|median|replicate|average).*",
        7: r".*(chromatograph|unknown_problem).*", 8: r".*(chromatograph|did_not_trip).*", 9: _MISSING,
    },
    FlagScheme.CTD: {
        1: r".*(uncalibrated|not_(yet_)?calibrated|not_received).*", 2: _GOOD, 3: _DOUBTFUL, 4: _BAD, 5: _NOT_REPORTED,
        6: r"interpolated.*", 7: r"despiked.*", 9: _MISSING,
    },
    FlagScheme.BOTTLE: {
        1: r".*unavailable.*", 2: _GOOD, 3: f"{_DOUBTFUL}|leaking", 4: rf"{_BAD}|did_not_trip.*", 5: _NOT_REPORTED,
        6: r".*discrepancy.*", 7: r".*unknown_problem.*", 8: r".*did_not_trip.*", 9: _MISSING,
    },
}  # fmt: skip
# The three WHP tables mean different things by these; by the others they mean the same or near enough.
_OF_ONE_TABLE = frozenset({6, 7, 8})
# What may make a value usable: of a scheme that is only named, these have to mean what the words say.
_USED = {Scheme.WHP: (2, 6), Scheme.IODE: (1,), Scheme.QARTOD: (1,), Scheme.ARGO: (1, 2)}
_NAMED = (
    (re.compile(r"\b(WOCE|WHP)\b", re.IGNORECASE), Scheme.WHP),
    (re.compile(r"\bQARTOD\b", re.IGNORECASE), Scheme.QARTOD),
    (re.compile(r"\bIODE\b", re.IGNORECASE), Scheme.IODE),
    (re.compile(r"\b(Argo|SeaDataNet|OceanSITES)\b", re.IGNORECASE), Scheme.ARGO),
)
# What such a word may end with and mean the same.
_ENDING = re.compile(r"(?<!^no)_(data|values?|measurements?|observations?)$")


def plain(word: str) -> str:
    """Return a word of ``flag_meanings`` in small letters, without what changes nothing of its meaning."""
    return _ENDING.sub("", re.sub(r"[^a-z0-9]+", "_", word.lower()).strip("_"))


def scheme_of_meanings(given: Mapping[float, str], table: FlagScheme) -> Scheme | None:
    """Return the first scheme in which every flag means what is said, and that tells good from not good.

    Parameters
    ----------
    given
        What each number means, in plain words.
    table
        Which of the WHP tables the quantity is flagged with.

    """
    for scheme in (Scheme.IODE, Scheme.ARGO, Scheme.WHP):
        if all(_means(scheme, table, number, words) for number, words in given.items()):
            return scheme
    return None


def _means(scheme: Scheme, table: FlagScheme, number: float, words: str) -> bool:
    """Return whether a number of a scheme means what the words say."""
    known = {Scheme.IODE: _IODE, Scheme.QARTOD: _IODE, Scheme.ARGO: _ARGO}.get(scheme)
    tables = (known,) if known else (_WHP[table],) if number in _OF_ONE_TABLE else _WHP.values()
    return any(number in one and re.fullmatch(one[int(number)], words) is not None for one in tables)


def named_scheme(said: str) -> Scheme | None:
    """Return the scheme that a text names."""
    return next((scheme for pattern, scheme in _NAMED if pattern.search(said)), None)


def agrees(scheme: Scheme, given: Mapping[float, str], table: FlagScheme) -> bool:
    """Return whether a scheme calls good what the words call good, and nothing else."""
    good = _good(given)
    used = {number: given[number] for number in _USED[scheme] if number in given}
    return bool(good) and good <= set(used) and all(_means(scheme, table, n, w) for n, w in used.items())


def fitting_meanings(given: Mapping[float, str]) -> Scheme | None:
    """Return the scheme whose numbers these are and whose good flag the words call good, None where none is."""
    good, numbers = _good(given), set(given)
    for scheme in (Scheme.WHP, Scheme.IODE, Scheme.ARGO):
        known = set(WHP_MEANINGS[FlagScheme.WATER]) if scheme is Scheme.WHP else set(FLAGS[scheme])
        if good == {_USED[scheme][0]} and numbers <= known:
            return scheme
    return None


def _good(given: Mapping[float, str]) -> set[float]:
    return {number for number, words in given.items() if re.fullmatch(_GOOD, words)}
