"""Sources derived from tables of samples by rules: what the samples that a rule finds say together."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import combinations
from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing import entries, robust
from pipeline.mixing.accounts import Account, note
from pipeline.mixing.entries import LARGEST, SMALLEST, CatalogueFile, Covariance, Source, SourceValue
from pipeline.mixing.form import Fault
from pipeline.mixing.gathering import search, waters
from pipeline.mixing.rules import LEAST_SAMPLES
from pipeline.mixing.weights import measurement_uncertainty
from pipeline.version import VERSION

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping

    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.mixing.gathering import Gathered, Search
    from pipeline.mixing.rules import Header, Rules, SourceRule, Where
    from pipeline.settings import Settings

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

RELATIVE = (
    "The sources are samples of the archive and may be mixtures themselves: shares and respiration are relative to "
    "these samples."
)
_DIGITS = 4  # of an uncertainty; a value is given to a thousandth of its uncertainty or finer
_COVARIANCE_DIGITS = 6


@dataclass(frozen=True, slots=True)
class DerivedSource:
    """A source and what it was found from."""

    source: Source
    account: Account


@dataclass(frozen=True, slots=True)
class Derivation:
    """The sources that could be found, and why the others could not; faults are located in the rules."""

    sources: tuple[DerivedSource, ...]
    faults: tuple[Fault, ...]
    cruises: tuple[str, ...]  # those with a sample that a rule looked at


def derive_sources(tables: Iterable[pa.Table], rules: Rules, settings: Settings) -> Derivation:
    """Derive the sources of rules from tables of samples, in any order.

    Parameters
    ----------
    tables, rules, settings
        As ``search`` takes them; of the settings also measurement uncertainties in place of the registry's.

    """
    derived: list[DerivedSource] = []
    faults: list[Fault] = []
    cruises: set[str] = set()
    for index, (rule, found) in enumerate(zip(rules.source, search(tables, rules, settings), strict=True)):
        if found.gathered is None:
            one: DerivedSource | list[str] = [_nothing(found, rule.where)]
        else:
            cruises.update(map(str, np.unique(found.gathered.expocode)))
            one = _derived(found.gathered, rule, rules.rules, settings)
        if isinstance(one, DerivedSource):
            derived.append(one)
        else:
            faults += [Fault(("source", index, "where"), f"source '{rule.code}': {words}") for words in one]
    return Derivation(tuple(derived), tuple(faults), tuple(sorted(cruises)))


def derived_catalogue(
    rules: Rules, derivation: Derivation, archive_sha256: str, choices_sha256: str
) -> CatalogueFile:
    """Return the catalogue of derived sources.

    Parameters
    ----------
    rules, derivation
        The rules, and what they found.
    archive_sha256
        Hash over what the cruises of the derivation were made from.
    choices_sha256
        Hash over the settings that decide which values were used.

    """
    reference = (
        f"Derived by seawhence {VERSION} from {len(derivation.cruises)} cruise"
        f"{'s' if len(derivation.cruises) != 1 else ''} of an archive (SHA-256 of their deliveries and settings "
        f"{archive_sha256}) by rules (SHA-256 {rules.sha256}) and settings (SHA-256 {choices_sha256}). "
        "A value is the median of the samples, an uncertainty 1.4826 times their median absolute deviation "
        "(Rousseeuw and Croux 1993) and no less than that of measurements, both weighted by cruise"
        + (
            "; covariances are from rank correlations, shrunk (Schaefer and Strimmer 2005)."
            if rules.rules.covariance
            else "."
        )
        + f" {RELATIVE}"
    )
    return CatalogueFile(
        catalogue=entries.Header(title=rules.rules.title, reference=reference),
        source=tuple(one.source for one in derivation.sources),
        set=rules.set,
    )


def _nothing(found: Search, where: Where) -> str:
    each = ", ".join(_alone(found, where))
    return (
        f"found no sample for which all of its conditions hold; of {found.total} samples each alone holds: "
        f"{each or 'none is given'}; expected at least {LEAST_SAMPLES} samples; widen the narrowest."
    )


def _alone(found: Search, where: Where) -> Iterator[str]:
    """Yield for each condition that the rule has, written or not, how many samples it holds for."""
    for name, count in found.alone.items():
        if name != "mixed_layer":
            yield f"{name} for {count}"
        elif where.mixed_layer == "exclude":
            unwritten = " (which holds unless mixed_layer = 'include' is written)"
            yield f"being below the mixed layer{'' if name in where.model_fields_set else unwritten} for {count}"


@dataclass(frozen=True, slots=True)
class _Kept:
    """The records that a source is made of, each (n_record,) unless said otherwise."""

    values: FloatArray  # (n_record, n_property)
    water: IntArray
    cruise: IntArray
    most_per_cruise: int

    def weights(self, present: BoolArray) -> FloatArray:
        """Return the weights of the records that are present, (n_record,)."""
        return robust.sample_weights(self.cruise, self.water, present, self.most_per_cruise)

    def count(self, present: BoolArray) -> int:
        """Return how many waters are present."""
        return len(np.unique(self.water[present]))


def _derived(
    gathered: Gathered, rule: SourceRule, header: Header, settings: Settings
) -> DerivedSource | list[str]:
    """Return the source that records make, or in words why they make none."""
    water, cruise, expocodes = waters(gathered)
    seen = _Kept(gathered.values, water, cruise, header.most_per_cruise)
    looked_at, judged = len(np.unique(water)), ~np.isnan(gathered.towards)
    if words := _too_few(rule, looked_at, seen.count(judged)):
        return [words]
    nearest = _nearest(gathered, rule, seen, judged)
    kept = _Kept(gathered.values[nearest], water[nearest], cruise[nearest], header.most_per_cruise)
    every = kept.count(np.ones(len(kept.water), dtype=bool))
    having = {
        name: kept.count(~np.isnan(column))
        for name, column in zip(header.properties, kept.values.T, strict=True)
    }
    if lacking := list(_lacking(having, every)):
        return lacking
    centre, spread = _centre_and_spread(kept)
    measured = measurement_uncertainty(header.properties, centre, settings.mixing.uncertainty)
    uncertainty = np.maximum(spread, measured)
    if unusable := list(_unusable(header, centre, uncertainty)):
        return unusable
    account = Account(
        cruises=_by_cruise(kept, expocodes),
        looked_at=looked_at,
        copies=len(kept.water) - every,
        unjudged=looked_at - seen.count(judged),
        without={name: every - count for name, count in having.items() if count < every},
        measured=tuple(
            name for name, least in zip(header.properties, measured > spread, strict=True) if least
        ),
    )
    stated = np.array([_rounded(doubt, _DIGITS) for doubt in uncertainty])
    covariance = None
    if header.covariance and len(header.properties) > 1:
        covariance = _covariance(header, _correlation(kept), stated, stated * spread / uncertainty)
    properties = {
        name: SourceValue(value=_to_place_of(doubt, value), uncertainty=doubt)
        for name, value, doubt in zip(header.properties, centre.tolist(), stated.tolist(), strict=True)
    }
    source = Source(
        code=rule.code,
        name=rule.name,
        note=note(rule, header, account),
        properties=properties,
        covariance=covariance,
    )
    return DerivedSource(source, account)


def _too_few(rule: SourceRule, looked_at: int, judged: int) -> str | None:
    if looked_at < LEAST_SAMPLES:
        return f"found {_samples(looked_at)}; expected at least {LEAST_SAMPLES}; widen a range of its conditions."
    if rule.extremum and judged < LEAST_SAMPLES:
        return (
            f"found {_samples(judged)} of {looked_at} with {rule.extremum.property} that may be used, to judge the "
            f"extremum by; expected at least {LEAST_SAMPLES}; name another property, or widen a range."
        )
    return None


def _samples(count: int) -> str:
    return {0: "no sample", 1: "1 sample"}.get(count, f"{count} samples")


def _nearest(gathered: Gathered, rule: SourceRule, seen: _Kept, judged: BoolArray) -> BoolArray:
    """Return the records that are kept of those looked at, (n_record,)."""
    if rule.extremum is None:
        return judged
    parts = robust.parts_of_waters(seen.water, judged)
    return robust.most_extreme(
        gathered.towards, seen.weights(judged), parts, rule.extremum.fraction, LEAST_SAMPLES
    )


def _lacking(having: Mapping[str, int], every: int) -> Iterator[str]:
    for name, count in having.items():
        if count < LEAST_SAMPLES:
            yield (
                f"found {_samples(count)} of {every} with {name} that may be used; expected at least "
                f"{LEAST_SAMPLES}; widen a range, or take {name} from the properties."
            )


def _unusable(header: Header, centre: FloatArray, uncertainty: FloatArray) -> Iterator[str]:
    for name, value, doubt in zip(header.properties, centre, uncertainty, strict=True):
        if doubt < SMALLEST:
            yield (
                f"found the same {name}, {value:g}, in most samples, and no usual uncertainty of its measurement; "
                f"expected a source that is uncertain; set mixing.uncertainty.{name} in the settings."
            )
        elif max(abs(value), doubt) > LARGEST:
            yield (
                f"found {name} {value:g} with a spread of {doubt:g}; expected at most {LARGEST:.0f}; look at the "
                f"values in the archive, or give a range of {name}."
            )


def _centre_and_spread(kept: _Kept) -> tuple[FloatArray, FloatArray]:
    """Return median and robust standard deviation of every property, (n_property,) each."""
    centre, spread = [], []
    for column in kept.values.T:
        present = ~np.isnan(column)
        weights = kept.weights(present)[present]
        centre.append(robust.weighted_median(column[present], weights))
        spread.append(robust.weighted_spread(column[present], weights, centre[-1]))
    return np.array(centre), np.array(spread)


def _by_cruise(kept: _Kept, expocodes: NDArray[np.str_]) -> dict[str, int]:
    """Return how many waters every cruise gave, by expocode, of those that gave any."""
    _, one = np.unique(kept.water, return_index=True)
    counts = np.bincount(kept.cruise[one], minlength=len(expocodes))
    return {str(name): int(count) for name, count in zip(expocodes, counts, strict=True) if count}


def _correlation(kept: _Kept) -> FloatArray:
    """Return robust correlations of the properties, (n_property, n_property), positive definite."""
    n_property = kept.values.shape[1]
    correlation, count = np.eye(n_property), np.ones((n_property, n_property))
    for one, other in combinations(range(n_property), 2):
        pair = kept.values[:, [one, other]].T
        both = ~np.isnan(pair[0]) & ~np.isnan(pair[1])
        if kept.count(both) < LEAST_SAMPLES:
            continue  # independent, for want of samples that have both
        weights = kept.weights(both)[both]
        parts = robust.parts_of_waters(kept.water, both)[both]
        correlation[[one, other], [other, one]] = robust.rank_correlation(
            pair[0, both], pair[1, both], weights
        )
        count[[one, other], [other, one]] = robust.effective_count(weights, parts)
    return robust.shrunk(correlation, count)


def _covariance(
    header: Header, correlation: FloatArray, stated: FloatArray, spread: FloatArray
) -> Covariance:
    """Return the covariance of stated uncertainties, (n_property,), of which ``spread`` is what samples vary.

    What measurements add to the spread is independent, so it stands on the diagonal alone.
    """
    matrix = correlation * np.outer(spread, spread)
    np.fill_diagonal(matrix, stated**2)
    rows = tuple(tuple(_rounded(entry, _COVARIANCE_DIGITS) for entry in row) for row in matrix)
    return Covariance(properties=header.properties, matrix=rows)


def _rounded(value: float, digits: int) -> float:
    """Return a number to so many significant digits."""
    return float(f"{value:.{digits - 1}e}")


def _to_place_of(doubt: float, value: float) -> float:
    """Return a value to the last decimal of its uncertainty."""
    return round(value, _DIGITS - 1 - math.floor(math.log10(doubt)))
