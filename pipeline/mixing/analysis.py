"""Optimum multiparameter analysis of a table of samples: every set where it is valid, the best one kept."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa

from pipeline.mixing import notices
from pipeline.mixing.answers import Attempt, answer_of
from pipeline.mixing.domains import validity
from pipeline.mixing.members import sample_keys
from pipeline.mixing.products import rows_of
from pipeline.mixing.properties import calcium_carbonate_ratios, respiration_ratios
from pipeline.mixing.solver import solve
from pipeline.mixing.status import MixingStatus
from pipeline.mixing.tags import tags
from pipeline.mixing.weights import mixing_problem
from pipeline.problems import BrokenPromise
from pipeline.tables import MIXTURES, as_arrow, registry_field, with_columns
from pipeline.usable import usable

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.findings import Finding
    from pipeline.mixing.answers import Answer
    from pipeline.mixing.entries import Catalogue, SourceSet
    from pipeline.settings import Settings

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

# Of several reasons why a sample is not solved, one per set, the one that came furthest is told.
_FURTHEST = (
    MixingStatus.OUTSIDE,
    MixingStatus.INCOMPLETE,
    MixingStatus.UNDETERMINED,
    MixingStatus.NOT_OPTIMAL,
    MixingStatus.ABSURD,
    MixingStatus.SOLVED,
)
_HOW_FAR = np.argsort(_FURTHEST)  # by status
_LABELS = np.array([MixingStatus(code).label for code in range(len(MixingStatus))], dtype=object)


@dataclass(frozen=True, eq=False)
class Resolution:
    """What the mixing analysis adds to a table of samples."""

    columns: Mapping[str, Any]  # registry name to n_sample values; NaN or None where missing
    mixtures: pa.Table  # a row is a solved sample and a source of the set it was solved with
    findings: tuple[Finding, ...]  # samples not resolved, or outside what their sources can mix to


def resolve(samples: pa.Table, catalogue: Catalogue, settings: Settings) -> Resolution:
    """Resolve every sample of a table into the source waters of a catalogue.

    A sample for which several sets are valid keeps the one with the lowest reduced chi-square; of equal
    ones, and of those without degrees of freedom, the first of the catalogue.

    Parameters
    ----------
    samples
        Table of registry columns, n_sample rows of one cruise.
    catalogue
        The source waters and the sets.
    settings
        Which values may be used, the stoichiometry, uncertainties of measurements, and the limits of the tags.

    """
    expocode = _cruise(samples)
    unused = notices.unused_uncertainties(expocode, catalogue, settings.mixing)
    settings = settings.model_copy(update={"mixing": settings.mixing.of_cruise(expocode)})
    attempts = [_attempt(samples, catalogue, chosen, settings) for chosen in catalogue.set]
    status, picked, told_of = _pick(attempts, samples.num_rows)
    keys = (  # asked for by members alone
        sample_keys(samples, settings.mixing.seed)
        if settings.mixing.members
        else np.zeros(samples.num_rows, dtype=np.uint64)
    )
    answers = [
        answer_of(catalogue, attempt, picked[attempt.rows] == index, keys, settings.mixing)
        for index, attempt in enumerate(attempts)
    ]
    columns: dict[str, Any] = {"tag": None, **_columns(answers, samples.num_rows)}
    columns["tag"] = tags(
        status,
        columns["leading_source"],
        columns["leading_share"],
        columns["leading_probability"],
        columns["reduced_chi_square"],
        settings.mixing,
    )
    columns["condition_number"] = _condition_numbers(attempts, told_of)
    columns["mixing_status"] = _LABELS[status]
    told = with_columns(samples, {name: columns[name] for name in ("tag", "reduced_chi_square")})
    findings = (*unused, *notices.unresolved(status), *notices.of_fits(answers, settings.mixing))
    return Resolution(columns, _mixtures(told, answers), findings)


def _cruise(samples: pa.Table) -> str | None:
    """Return the cruise of a table of samples, None where it has no samples."""
    if "expocode" not in samples.schema.names:
        return None
    cruises = [name for name in samples.column("expocode").unique().to_pylist() if name]
    if len(cruises) > 1:
        raise BrokenPromise(f"samples of the cruises {', '.join(sorted(cruises))} are resolved together")
    return cruises[0] if cruises else None


def prepare(catalogue: Catalogue, settings: Settings) -> None:
    """Have the kernels compiled, by resolving one sample that is the first set's first source.

    A fresh installation takes half a minute for it, once, which is no time of any cruise.
    """
    chosen = catalogue.set[0]
    first = next(source for source in catalogue.source if source.code == chosen.sources[0])
    listed = first.values_of(chosen.properties)[np.newaxis]
    attempt = _solved(
        catalogue, chosen, settings, listed, np.zeros(1, dtype=np.int64), np.zeros(1, dtype=bool)
    )
    kept = attempt.solution.status == MixingStatus.SOLVED
    answer_of(catalogue, attempt, kept, np.zeros(1, dtype=np.uint64), settings.mixing)


def _attempt(samples: pa.Table, catalogue: Catalogue, chosen: SourceSet, settings: Settings) -> Attempt:
    inside, unknown = validity(samples, chosen.valid, settings)
    rows = np.flatnonzero(inside)
    listed = np.stack([usable(samples, name, settings.use)[rows] for name in chosen.properties], axis=1)
    return _solved(catalogue, chosen, settings, listed, rows, unknown)


def _solved(
    catalogue: Catalogue,
    chosen: SourceSet,
    settings: Settings,
    listed: FloatArray,
    rows: IntArray,
    unknown: BoolArray,
) -> Attempt:
    """Return what a set says of the samples ``rows``, whose properties are ``listed``, (n_row, n_property)."""
    ratios = respiration_ratios(settings.tracers, chosen.silicate_per_phosphate)
    dissolution = calcium_carbonate_ratios(settings.tracers)
    problem = mixing_problem(catalogue, chosen, ratios, settings.mixing.uncertainty, dissolution)
    observed = rows_of(chosen.properties, listed)
    solution = solve(problem, observed, condition_limit=settings.mixing.condition_limit)
    return Attempt(chosen, ratios, dissolution, problem, rows, unknown, observed, solution)


def _pick(attempts: Sequence[Attempt], n_sample: int) -> tuple[NDArray[np.int8], IntArray, IntArray]:
    """Return every sample's status, the attempt it keeps and the one its status is of, -1 for none; all (n_sample,)."""
    status = np.full(n_sample, MixingStatus.OUTSIDE, dtype=np.int8)
    picked, told_of = np.full(n_sample, -1), np.full(n_sample, -1)
    lowest = np.full(n_sample, np.inf)
    for index, attempt in enumerate(attempts):
        own = np.full(n_sample, MixingStatus.OUTSIDE, dtype=np.int8)
        own[attempt.unknown] = MixingStatus.INCOMPLETE
        own[attempt.rows] = attempt.solution.status
        further = _HOW_FAR[own] > _HOW_FAR[status]
        status[further], told_of[further] = own[further], index
        chi_square = np.full(n_sample, np.inf)
        chi_square[attempt.rows] = np.nan_to_num(attempt.solution.reduced_chi_square, nan=np.inf)
        better = (own == MixingStatus.SOLVED) & ((picked < 0) | (chi_square < lowest))
        picked[better] = told_of[better] = index
        lowest[better] = chi_square[better]
    return status, picked, told_of


def _condition_numbers(attempts: Sequence[Attempt], told_of: IntArray) -> FloatArray:
    """Return the condition number of the attempt that a sample's status is of, (n_sample,); NaN where it has none."""
    condition = np.full(len(told_of), np.nan)
    for index, attempt in enumerate(attempts):
        mine = told_of[attempt.rows] == index
        condition[attempt.rows[mine]] = attempt.solution.condition_number[mine]
    return condition


def _columns(answers: Sequence[Answer], n_sample: int) -> dict[str, Any]:
    """Return the columns of the solved samples, (n_sample,) each."""
    columns: dict[str, Any] = {
        name: np.full(n_sample, None, dtype=object) for name in ("leading_source", "mixing_set")
    }
    numbers = dict.fromkeys(name for answer in answers for name in answer.per_sample)
    columns |= {name: np.full(n_sample, np.nan) for name in numbers}
    for answer in answers:
        codes = np.array(answer.chosen.sources, dtype=object)
        columns["leading_source"][answer.rows] = codes[answer.leading]
        columns["mixing_set"][answer.rows] = answer.chosen.name
        for name, values in answer.per_sample.items():
            columns[name][answer.rows] = values
    return columns


def _mixtures(samples: pa.Table, answers: Sequence[Answer]) -> pa.Table:
    """Return a row per solved sample and source of its set, in the order of the samples."""
    n_source = [len(answer.chosen.sources) for answer in answers]
    rows = np.concatenate([np.repeat(one.rows, n) for one, n in zip(answers, n_source, strict=True)])
    order = np.argsort(rows, kind="stable")
    codes = [np.tile(np.array(one.chosen.sources, dtype=object), len(one.rows)) for one in answers]
    names = [
        np.full(len(own), one.chosen.name, dtype=object) for one, own in zip(answers, codes, strict=True)
    ]
    made = {
        "source": codes,
        "mixing_set": names,
        **{name: [one.per_share[name].ravel() for one in answers] for name in answers[0].per_share},
    }
    own = {name: np.concatenate(parts)[order] for name, parts in made.items()}
    taken = pa.array(rows[order])
    fields = [registry_field(name) for name in MIXTURES]
    columns = [
        as_arrow(own[field.name], field.type)
        if field.name in own
        else samples.column(field.name).take(taken).cast(field.type)
        for field in fields
    ]
    return pa.table(columns, schema=pa.schema(fields))
