"""Plain sentences about what a source set cannot tell, what would help, and what may be meant so."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.determinacy import determinacy, with_another
from pipeline.mixing.magnitudes import doubtful
from pipeline.mixing.properties import (
    AMOUNT_OF,
    LISTED_AS,
    PROPERTIES,
    ratios_of,
    respiration_ratios,
    same_quantity,
)
from pipeline.variables import TRACERS

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence

    from numpy.typing import NDArray

    from pipeline.mixing.determinacy import Determinacy, Propagation
    from pipeline.mixing.entries import Catalogue
    from pipeline.settings import Settings

    FloatArray = NDArray[np.float64]

# Two standard uncertainties to either side of a share then span the whole range from none to all: it is not
# known at all.
TOO_UNCERTAIN = 0.25

_SMALL_PART = 0.05  # of a mixture that is not worth naming
_BETTER = 0.8  # of an uncertainty: a property that leaves more of it is no help
_MOST_ADVISED = 3

_UNTOLD_RESPIRATION = (
    "respiration changes none of these properties, so that every sample would be left undetermined; add oxygen, "
    "phosphate, nitrate or dic, or set respiration = 'none'."
)


def problems(told: Determinacy, catalogue: Catalogue, settings: Settings) -> list[str]:
    """Return a sentence for everything that keeps a set from being determined, none where it is."""
    if told.n_unknown > told.n_equation:
        return [_too_few(told)]
    ratios = respiration_ratios(settings.tracers, told.chosen.silicate_per_phosphate)
    if told.chosen.respiration != "none" and not any(ratios_of(told.chosen.properties, ratios)):
        return [_UNTOLD_RESPIRATION]
    sentences = [*_alike(told, catalogue, settings)]
    joined = _with_pairs_joined(told, catalogue, settings)
    sentences += _mixtures(joined, catalogue, settings, after_joining=joined is not told)
    limit = settings.mixing.condition_limit
    if told.condition_number > limit:
        found = f"{told.condition_number:.0f}" if np.isfinite(told.condition_number) else "infinite"
        sentences.append(
            f"the condition number of the weighted system is {found}, above the {limit:g} of the settings, so that "
            f"every sample would be left undetermined; add properties or take sources away."
        )
    return sentences


def warnings(told: Determinacy, catalogue: Catalogue) -> list[str]:
    """Return a sentence for everything in a set that may be meant so and is likely not, none where nothing is."""
    one = (
        "there is one source: its share will be 1 in every sample, and only the reduced chi-square tells whether the "
        "sample is of it; add sources to resolve mixtures."
    )
    return [*([one] if len(told.chosen.sources) == 1 else []), *doubtful(catalogue, told.chosen)]


def _with_pairs_joined(told: Determinacy, catalogue: Catalogue, settings: Settings) -> Determinacy:
    """Return what a set could tell with the second of every pair that is alike taken away.

    Such a pair makes other shares uncertain too. That is told with the pair; what is uncertain without it
    has reasons of its own.
    """
    codes = told.chosen.sources
    second = {codes[other] for _, other in _pairs_alike(told.propagation)}
    if not second:
        return told
    left = tuple(code for code in codes if code not in second)
    return determinacy(catalogue, told.chosen.model_copy(update={"sources": left}), settings)


def _too_few(told: Determinacy) -> str:
    n_property = len(told.chosen.properties)
    shares = told.chosen.unknowns
    properties = "property" if n_property == 1 else "properties"
    return (
        f"there are {told.n_unknown} unknowns ({shares}) for {told.n_equation} equations ({n_property} {properties} "
        f"and the sum of the shares), so that no sample can be solved; add properties or take sources away."
    )


def _alike(told: Determinacy, catalogue: Catalogue, settings: Settings) -> Iterator[str]:
    """Tell of pairs that are alike by themselves, whatever the other sources are."""
    codes = told.chosen.sources
    for i, j in _pairs_alike(told.propagation):
        one, other = codes[i], codes[j]
        reached = told.propagation.exchange[i, j]
        if np.isinf(told.propagation.alone[i, j]):
            found = f"none of these properties tells {one} from {other}"
        elif reached >= 1:
            found = (
                f"{one} and {other} cannot be told apart with these properties and uncertainties: share moved from one "
                f"to the other is uncertain by more than the whole sample"
            )
        else:
            found = (
                f"{one} and {other} can be told apart only to {reached:.2f} of the sample with these properties and "
                f"uncertainties"
            )
        helpful = _helpful(told, catalogue, settings, reached, lambda p, i=i, j=j: float(p.exchange[i, j]))  # type: ignore[misc]
        yield f"{found}; {helpful}, or join them."


def _mixtures(
    told: Determinacy, catalogue: Catalogue, settings: Settings, *, after_joining: bool
) -> Iterator[str]:
    """Tell of shares that are uncertain though no single other source is like theirs."""
    codes, propagation = told.chosen.sources, told.propagation
    explained = {index for pair in _pairs_alike(propagation) for index in pair}
    spread = told.share_uncertainty
    uncertain = [i for i in range(len(codes)) if spread[i] > TOO_UNCERTAIN and i not in explained]
    if not uncertain:
        return
    worst = max(uncertain, key=lambda i: spread[i])
    vague = [i for i in uncertain if spread[i] < 1]
    lost = [i for i in uncertain if i not in vague]
    found = []
    if vague:
        known = _joined([f"{spread[i]:.2f}" for i in vague])
        found.append(f"{_shares(codes, vague)} known only to {known} of the sample")
    if lost:
        found.append(f"{_shares(codes, lost)} not known at all")
    helpful = _helpful(told, catalogue, settings, spread[worst], lambda p: float(p.unknown[worst]))
    also = "once those alike are joined, " if after_joining else ""
    yield (
        f"{also}{_joined(found)}, since {_looks_like(told, worst)}; {helpful}, or take one of these sources away."
    )


def _shares(codes: Sequence[str], which: Sequence[int]) -> str:
    called = _joined([codes[i] for i in which])
    return f"the shares of {called} are" if len(which) > 1 else f"the share of {called} is"


def _looks_like(told: Determinacy, index: int) -> str:
    """Return in words what the data hardly tell a source from, of which the share is uncertain."""
    codes = told.chosen.sources
    shares = told.propagation.company[index, : len(codes)]
    shares = shares / np.clip(shares, 0, None).sum()
    sides = [
        [f"{part:.2f} {code}" for code, part in zip(codes, side, strict=True) if part > _SMALL_PART]
        for side in (shares, -shares)
    ]
    sides.sort(key=len)  # a single source first
    words = [side[0].removeprefix("1.00 ") if len(side) == 1 else _joined(side) for side in sides if side]
    words.append("nothing")  # where a weighted sum may miss one
    respired = ", respiration aside" if told.chosen.respiration != "none" else ""
    return f"{words[0]} can look like {words[1]}{respired}"


def _pairs_alike(propagation: Propagation) -> list[tuple[int, int]]:
    least = np.minimum(propagation.alone, propagation.exchange)
    one, other = np.nonzero(np.triu(least, k=1) > TOO_UNCERTAIN)
    return list(zip(one.tolist(), other.tolist(), strict=True))


def _helpful(
    told: Determinacy,
    catalogue: Catalogue,
    settings: Settings,
    now: float,
    reached: Callable[[Propagation], float],
) -> str:
    """Return which properties that all the sources give would lower an uncertainty, and to what."""
    chosen = told.chosen
    sources = [catalogue.sources[code] for code in chosen.sources]
    candidates = [
        name
        for name in PROPERTIES
        if name not in TRACERS
        and name not in LISTED_AS
        and AMOUNT_OF.get(name, name) in {name, *chosen.properties}
        and all(name in source.properties for source in sources)
        and not any(same_quantity(name, other) for other in chosen.properties)
    ]
    after = {name: reached(with_another(catalogue, chosen, name, settings)) for name in candidates}
    best = sorted((value, name) for name, value in after.items() if value <= _BETTER * now and value < np.inf)
    if not best:
        return "add a property in which they differ"
    offers = [f"{name} (then {value:.2f})" for value, name in best[:_MOST_ADVISED]]
    return f"add {_joined(offers, last=' or ')}"


def _joined(words: Sequence[str], last: str = " and ") -> str:
    return last.join([", ".join(words[:-1]), words[-1]]) if len(words) > 1 else "".join(words)
