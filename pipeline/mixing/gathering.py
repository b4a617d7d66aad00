"""Which samples of an archive a rule looks at, and which of their records are one and the same water."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, fields
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from pipeline.mixing.domains import validity
from pipeline.mixing.entries import Domain
from pipeline.tables import KEY, floats, texts
from pipeline.usable import usable
from pipeline.variables import REGISTRY, check_name, corrected_name, flag_name

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.mixing.rules import Rules, SourceRule, Where
    from pipeline.settings import Settings

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]
    TextArray = NDArray[np.str_]

# Records of one place, pressure and temperature are one water, delivered twice. To these decimals: a hundred
# metres, and the resolution that files are written with; no second visit repeats all of them.
_SAME = {"latitude": 3, "longitude": 3, "pressure": 1, "temperature": 3}


@dataclass(frozen=True, slots=True)
class Gathered:
    """Records that a rule looks at; arrays are (n_record,) unless said otherwise."""

    values: FloatArray  # (n_record, n_property), NaN where there is none that may be used
    towards: FloatArray  # what the extremum is judged by, higher being nearer; zero without an extremum
    expocode: TextArray
    key: TextArray  # of the sample; empty where it has none
    place: FloatArray  # (n_record, 4): what tells a water that was delivered twice


@dataclass(frozen=True, slots=True)
class Search:
    """What one rule found, and how many samples each of its conditions holds for alone."""

    gathered: Gathered | None
    alone: Mapping[str, int]
    total: int  # samples in all


def columns_used(rules: Rules) -> list[str]:
    """Return the columns of samples that rules need, with their flags and checks."""
    named = {*rules.rules.properties, *_SAME, *Domain.model_fields, "date", "time"}
    for rule in rules.source:
        named |= set(rule.where.ranges)
        if rule.extremum:
            named.add(rule.extremum.property)
    beside = {of(name) for name in named for of in (flag_name, check_name, corrected_name)}
    return [name for name in REGISTRY if name in {*named, *beside, *KEY, "bottle_flag"}]


def search(tables: Iterable[pa.Table], rules: Rules, settings: Settings) -> list[Search]:
    """Return what each rule finds in tables of samples; nothing else is kept of them.

    Parameters
    ----------
    tables
        Tables with the columns of ``columns_used``, each of whole casts, so that mixed layers can be told.
    rules
        The rules.
    settings
        Which values may be used.

    """
    found: list[list[Gathered]] = [[] for _ in rules.source]
    alone: list[Counter[str]] = [Counter() for _ in rules.source]
    total = 0
    for table in tables:
        total += table.num_rows
        for rule, mine, counts in zip(rules.source, found, alone, strict=True):
            holds = np.ones(table.num_rows, dtype=bool)
            for name, mask in _conditions(table, rule.where, settings):
                counts[name] += int(mask.sum())
                holds &= mask
            if holds.any():
                mine.append(_gather(table.filter(pa.array(holds)), rule, rules.rules.properties, settings))
    return [
        Search(_joined(mine) if mine else None, counts, total)
        for mine, counts in zip(found, alone, strict=True)
    ]


def _conditions(table: pa.Table, where: Where, settings: Settings) -> Iterator[tuple[str, BoolArray]]:
    """Yield each condition's name and where it holds, (n_row,); not so where it cannot be told."""
    for name in Domain.model_fields:
        given = getattr(where, name)
        if given is not None:
            only = Domain(**{"mixed_layer": "include", name: given})
            yield name, validity(table, only, settings)[0]
    for name, (low, high) in where.ranges.items():
        values = usable(table, name, settings.use)
        yield name, np.asarray((values >= low) & (values <= high))


def _gather(table: pa.Table, rule: SourceRule, properties: Sequence[str], settings: Settings) -> Gathered:
    towards = np.zeros(table.num_rows)
    if rule.extremum:
        values = _finite(table, rule.extremum.property, settings)
        towards = values if rule.extremum.kind == "maximum" else -values
    keys = list(zip(*(texts(table, name) for name in KEY), strict=True))
    return Gathered(
        values=np.column_stack([_finite(table, name, settings) for name in properties]),
        towards=towards,
        expocode=np.array([key[0] or "" for key in keys]),
        key=np.array(["\x1f".join(part or "" for part in key) if all(key) else "" for key in keys]),
        place=np.column_stack([np.round(floats(table, name), digits) for name, digits in _SAME.items()]),
    )


def _finite(table: pa.Table, name: str, settings: Settings) -> FloatArray:
    values = usable(table, name, settings.use)
    return np.where(np.isfinite(values), values, np.nan)


def _joined(parts: Sequence[Gathered]) -> Gathered:
    return Gathered(*(np.concatenate([getattr(part, f.name) for part in parts]) for f in fields(Gathered)))


def waters(gathered: Gathered) -> tuple[IntArray, IntArray, TextArray]:
    """Return every record's water and cruise, numbers from 0, (n_record,) each, and the cruises' expocodes.

    One water is one sample number of a cast, or one place, pressure and temperature. Where several cruises
    deliver it, it counts with the first of them by name.
    """
    n_record = len(gathered.expocode)
    record = np.arange(n_record)
    _, key = np.unique(gathered.key, return_inverse=True)
    _, place = np.unique(gathered.place, axis=0, return_inverse=True)
    # What is not known is like nothing else.
    key = np.where(gathered.key == "", n_record + record, key)
    place = np.where(np.isnan(gathered.place).any(axis=1), n_record + record, place.reshape(-1))
    shared = n_record + np.concatenate([key, 2 * n_record + place])
    links = coo_array(
        (np.ones(2 * n_record), (np.tile(record, 2), shared)), shape=(5 * n_record, 5 * n_record)
    )
    _, water = np.unique(connected_components(links, directed=False)[1][:n_record], return_inverse=True)
    names, cruise = np.unique(gathered.expocode, return_inverse=True)
    first = np.full(water.max() + 1, len(names))
    np.minimum.at(first, water, cruise)
    return water, first[water], names
