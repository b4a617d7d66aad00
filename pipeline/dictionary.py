"""The data dictionary: what every column of every table is, and what flags, tags and reasons mean.

Nothing is said here that is not said elsewhere in the code: all of it is put together from the registry, the lists of
the tables and the tables of meanings.
"""

from __future__ import annotations

import csv
import io
import json
from dataclasses import asdict, dataclass, fields
from typing import TYPE_CHECKING, Any

from pipeline import tables
from pipeline.mixing.status import STATUS_WORDS
from pipeline.mixing.tags import tag_table
from pipeline.reading.schemes import FLAGS, WHP_MEANINGS, Scheme
from pipeline.variables import (
    BASE,
    CHECKED,
    MEASURED,
    REGISTRY,
    SEAWATER,
    TRACERS,
    FlagScheme,
    check_name,
    corrected_name,
    flag_name,
)

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from pipeline.variables import Variable

# Tables that are lists of columns, and nothing else ever in them.
LISTED: Mapping[str, tuple[str, ...]] = {
    "mixtures": tables.MIXTURES,
    "findings": tables.FINDINGS,
    "rejects": tables.REJECTS,
    "changes": tables.CHANGES,
    "offsets": tables.OFFSETS,
    "proposals": tables.PROPOSALS,
    "census": tables.CENSUS,
}
PASSED_ON = (
    "A delivered column that is no quantity of these is in samples or casts under the name it came with, and the"
    " delivered numbers of a converted one beside it."
)


@dataclass(frozen=True, slots=True)
class Entry:
    """One column of one table."""

    table: str
    name: str
    long_name: str
    units: str
    kind: str
    standard_name: str  # of CF, "" where it has none
    source: str  # the formula's reference, or whose flags these are
    flags: str  # which table of meanings a column of flags has, "" for others
    exchange_names: tuple[str, ...]
    exchange_units: str
    plausible_from: float | None
    plausible_to: float | None
    uncertainty: str  # usual standard uncertainty, "" where none is known
    uncertainty_source: str


def columns_of(table: str) -> tuple[str, ...]:
    """Return the registry columns that a table can have, in the registry's order."""
    if table in LISTED:
        return LISTED[table]
    if table == "samples":
        # What no list of another table has for itself.
        known = {*tables.SAMPLES_CORE, *tables.MIXING, *MEASURED}
        others = {name for listed in LISTED.values() for name in listed} - known
        return tuple(name for name in REGISTRY if name not in others)
    own = {*tables.CASTS_CORE, *MEASURED, *SEAWATER, *TRACERS}
    beside = {of(name) for name in MEASURED for of in (flag_name, check_name, corrected_name)}
    return tuple(name for name in REGISTRY if name in own | beside)


def entries() -> tuple[Entry, ...]:
    """Return every column of every table: those of the archive first, then those that commands write."""
    names = (*tables.TABLE_NAMES, *(name for name in LISTED if name not in tables.TABLE_NAMES))
    return tuple(_entry(table, REGISTRY[name]) for table in names for name in columns_of(table))


def meanings() -> dict[str, dict[str, str]]:
    """Return what the values of flags, tags and statuses mean, by the name of the table of meanings."""
    whp = {
        f"WHP, {scheme}": {str(flag): words for flag, words in each.items()}
        for scheme, each in WHP_MEANINGS.items()
    }
    iode = {str(number): flag.meaning for number, flag in FLAGS[Scheme.IODE].items()}
    statuses = {status.label: words for status, words in STATUS_WORDS.items()}
    return {**whp, "IODE": iode, "tag": dict(tag_table()), "mixing_status": statuses}


def flag_meanings(name: str) -> tuple[str, Mapping[int, str]] | None:
    """Return whose flags a column holds and what they mean, None where it holds no flags."""
    if name in _CHECKS:
        return "IODE", {number: flag.meaning for number, flag in FLAGS[Scheme.IODE].items()}
    scheme = _DELIVERED.get(name)
    return None if scheme is None else (f"WHP, {scheme}", WHP_MEANINGS[scheme])


_CHECKS = frozenset(check_name(name) for name in CHECKED)
_DELIVERED: Mapping[str, FlagScheme] = {
    flag_name(variable.name): variable.flags for variable in BASE if variable.flags is not None
}


def _entry(table: str, variable: Variable) -> Entry:
    low, high = variable.plausible or (None, None)
    flags = flag_meanings(variable.name)
    usual = variable.uncertainty
    return Entry(
        table, variable.name, variable.long_name, variable.unit, variable.kind.value, variable.standard_name or "",
        variable.source, flags[0] if flags else "", variable.exchange, variable.exchange_unit, low, high,
        _uncertainty(usual.absolute, usual.relative, variable.unit) if usual else "", usual.source if usual else "",
    )  # fmt: skip


def _uncertainty(absolute: float, relative: float, unit: str) -> str:
    parts = [f"{absolute:g} {unit}".removesuffix(" 1")] if absolute else []
    parts += [f"{100 * relative:g} % of the value"] if relative else []
    return " and ".join(parts)


def as_json() -> str:
    """Return the dictionary as JSON."""
    told: dict[str, Any] = {
        "columns": [asdict(one) for one in entries()],
        "meanings": meanings(),
        "note": PASSED_ON,
    }
    return json.dumps(told, indent=1, ensure_ascii=False) + "\n"


def as_csv() -> str:
    """Return the columns as CSV, a row each."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow([field.name for field in fields(Entry)])
    for one in entries():
        writer.writerow([_cell(getattr(one, field.name)) for field in fields(Entry)])
    return text.getvalue()


def _cell(value: Any) -> str:
    if value is None:
        return ""
    return (
        " ".join(value)
        if isinstance(value, tuple)
        else f"{value:g}"
        if isinstance(value, float)
        else str(value)
    )


def as_markdown() -> str:
    """Return the dictionary as a page: a table of columns for each table, and one for each table of meanings."""
    return "\n".join(_page())


def _page() -> Iterator[str]:
    yield "# Columns of the tables\n"
    yield f"{PASSED_ON}\n"
    every = entries()
    for table in dict.fromkeys(one.table for one in every):
        yield f"## {table}\n"
        rows = [one for one in every if one.table == table]
        yield from _grid(
            (
                "column", "is", "unit", "CF standard name", "source", "in exchange files", "plausible",
                "usual uncertainty",
            ),
            [
                (
                    f"`{one.name}`", one.long_name, one.units or one.kind, one.standard_name, one.source,
                    " ".join((*one.exchange_names, *([f"({one.exchange_units})"] if one.exchange_units else []))),
                    "" if one.plausible_from is None else f"{one.plausible_from:g} to {one.plausible_to:g}",
                    f"{one.uncertainty}; {one.uncertainty_source}" if one.uncertainty else "",
                )
                for one in rows
            ],
        )  # fmt: skip
    for name, each in meanings().items():
        yield f"## Meanings: {name}\n"
        yield from _grid(("value", "means"), list(each.items()))


def _grid(heading: Sequence[str], rows: Sequence[Sequence[str]]) -> Iterator[str]:
    for row in (heading, ["---"] * len(heading), *rows):
        yield f"| {' | '.join(cell.replace('|', '/') for cell in row)} |"
    yield ""
