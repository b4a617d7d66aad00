"""The flags of a CF file: which variable holds whose, by which scheme, and what they are as WHP flags.

A scheme is recognised where every flag value means in it what the file's ``flag_meanings`` say. Flags that cannot be
read are no licence to use the values: these count as questionable until a ``cruise.toml`` says what the flags are.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.findings import Finding, Severity
from pipeline.reading.cf_decoding import decode_numbers
from pipeline.reading.cf_names import is_flag
from pipeline.reading.flag_words import agrees, fitting_meanings, named_scheme, plain, scheme_of_meanings
from pipeline.reading.schemes import Scheme, fitting_scheme, mapping_words, odd_flag_findings, to_whp
from pipeline.variables import REGISTRY, FlagScheme, flag_name

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from pipeline.reading.cf_names import Recognised
    from pipeline.reading.description import Description
    from pipeline.reading.netcdf_bytes import StoredFile, StoredVariable
    from pipeline.reading.spread import Spread

    FloatArray = NDArray[np.float64]

QUESTIONABLE, MISSING = 3.0, 9.0  # WHP
# Attributes of a flag variable that may name a scheme.
_NAMING = ("conventions", "Conventions", "flag_scheme", "references", "long_name", "comment")
UNREAD_WORDS = "flags whose meaning is not known: every value counts as questionable"

# What is left of a flag variable's name behind the name of what it speaks of.
_FLAG_ENDING = re.compile(
    r"_?(qc|qf|flags?|flag_w|qc_?flags?|quality|quality_?(flag|code)|status_flag)$", re.IGNORECASE
)


@dataclass(frozen=True, slots=True)
class FlagColumn:
    """The flags of one quantity: the variable that holds them, and whose they are; None where nobody can tell."""

    variable: StoredVariable
    quantity: str
    scheme: Scheme | None


@dataclass(frozen=True, slots=True)
class ReadFlags:
    """WHP flags of n_row rows, how they were made, and what was odd among them."""

    whp: FloatArray
    words: str
    findings: tuple[Finding | Spread, ...] = ()


def flag_columns(
    name: str, file: StoredFile, recognised: Recognised, description: Description | None
) -> tuple[list[FlagColumn], list[Finding]]:
    """Return the flags of every quantity that has some, and what about them has to be told."""
    columns, findings = [], []
    entries = {entry.column: entry for entry in description.columns} if description else {}
    for title, variable in recognised.values.items():
        if flag_name(variable.name) not in REGISTRY:
            continue
        entry = entries.get(title)
        if entry is not None and entry.flag is not None:
            continue  # read as described
        found = _flags_of(file, title, variable.name, recognised)
        if found is None:
            continue
        if found.scheme is None and entry is not None:
            continue  # the description speaks of the column and of no flags: there are none to it
        if found.scheme is None:
            findings.append(_unread(name, title, found))
        columns.append(found)
    return columns, findings


def _flags_of(file: StoredFile, title: str, quantity: str, recognised: Recognised) -> FlagColumn | None:
    """Return the flags of one variable, as linked by CF, by the exchange names, or by its name."""
    table = REGISTRY[quantity].flags or FlagScheme.WATER
    linked = file.variables[title].text("ancillary_variables").split()
    for flag in linked:
        variable = file.variables.get(flag)
        if variable is not None and (is_flag(variable) or _FLAG_ENDING.search(flag)):
            return FlagColumn(
                variable, quantity, scheme_of(variable, table, recognised.flags.get(flag) == quantity)
            )
    for flag, of in recognised.flags.items():
        if of == quantity:
            return FlagColumn(
                file.variables[flag], quantity, scheme_of(file.variables[flag], table, exchange=True)
            )
    for variable in _alike(file, title):
        return FlagColumn(variable, quantity, scheme_of(variable, table))
    return None


def _alike(file: StoredFile, title: str) -> Iterator[StoredVariable]:
    """Return variables of whole numbers that are named as flags of another, and lie as it does."""
    of = file.variables[title]
    for name, variable in file.variables.items():
        whole = variable.values.dtype.kind in "iuS" and variable.dimensions == of.dimensions
        if whole and name.startswith(title) and _FLAG_ENDING.fullmatch(name[len(title) :]):
            yield variable


def scheme_of(variable: StoredVariable, table: FlagScheme, exchange: bool = False) -> Scheme | None:
    """Return whose flags a variable holds, None where nothing tells, or where it tells of no scheme that is known.

    Parameters
    ----------
    variable
        The flags.
    table
        Which of the WHP tables the quantity is flagged with.
    exchange
        Whether the variable is named as the exchange format names flags, which are WHP.

    """
    if "flag_masks" in variable.attributes:
        return None
    given = _meanings(variable)
    said = " ".join(variable.text(key) for key in _NAMING)
    named = named_scheme(said)
    if given is None:
        return None
    if not given:
        return named or (Scheme.WHP if exchange else None)
    known = scheme_of_meanings(given, table)
    return known or (named if named is not None and agrees(named, given, table) else None)


def _meanings(variable: StoredVariable) -> dict[float, str] | None:
    """Return what the file says that flag values mean, in plain words; None where the two do not add up."""
    values = np.ravel(variable.attributes.get("flag_values", np.empty(0)))
    words = [plain(word) for word in variable.text("flag_meanings").split()]
    if words and (values.dtype.kind not in "iuf" or len(values) != len(words)):
        return None
    return dict(zip(values.tolist(), words, strict=True)) if words else {}


def read_flags(name: str, column: FlagColumn, delivered: FloatArray, present: NDArray[np.bool_]) -> ReadFlags:
    """Return delivered flags as WHP flags.

    Parameters
    ----------
    name
        The file, for sentences.
    column
        Whose flags they are.
    delivered
        Flags as delivered, NaN where there is none, (n_row,).
    present
        Where the quantity has a value, (n_row,).

    """
    if column.scheme is None:
        return ReadFlags(np.where(present, QUESTIONABLE, MISSING), UNREAD_WORDS)
    table = REGISTRY[column.quantity].flags or FlagScheme.WATER
    mapped = to_whp(column.scheme, delivered, table)
    if column.scheme is Scheme.WHP:
        return ReadFlags(mapped.whp, "")
    texts = [f"{number:g}" for number in delivered[mapped.odd].tolist()]
    findings = odd_flag_findings(
        name, column.variable.name, column.quantity, column.scheme, texts, (mapped.odd + 1).tolist()
    )
    return ReadFlags(mapped.whp, mapping_words(column.scheme, table), tuple(findings))


def flag_numbers(variable: StoredVariable, dimensions: tuple[str, ...]) -> NDArray[Any]:
    """Return flags as numbers, NaN where there is none; a character each where they lie as their values do."""
    if variable.values.dtype.kind != "S":
        return decode_numbers(variable).values
    if variable.dimensions != dimensions:
        return np.full(variable.values.shape, np.nan)
    letters = variable.values.astype("U1")
    return np.where(np.char.isdigit(letters), np.char.rjust(letters, 1, "0"), "nan").astype(np.float64)


def _unread(name: str, title: str, found: FlagColumn) -> Finding:
    """Tell of flags that cannot be read, with the line of a description that says what they seem to be."""
    flag = found.variable.name
    meanings = found.variable.text("flag_meanings")
    why = (
        f"its flag_meanings are '{meanings[:80]}'"
        if meanings
        else "nothing in the file says what its values mean"
    )
    fact = (
        f"{name}: {flag} holds the flags of {title}, but {why}; expected the flags of a scheme that is known"
        f" ({', '.join(Scheme)}); every value of {title} counts as questionable, and {flag} is kept as delivered"
    )
    scheme = _advised(found.variable)
    choice = "" if scheme else f", with one of {', '.join(Scheme)} in place of the dots"
    return Finding(
        "unknown-flag-scheme", Severity.DOUBT,
        f'{fact}; say in cruise.toml what they are: "{title}" = {{ quantity = "{found.quantity}", flag = "{flag}",'
        f' flags = "{scheme or "..."}" }}{choice}, or leave flag and flags out to use the values without flags.',
        variable=found.quantity, value=meanings[:200] or flag, limit=", ".join(Scheme), file=name,
        to_group=f"{fact}; what do its values mean?",
    )  # fmt: skip


def _advised(variable: StoredVariable) -> Scheme | None:
    """Return the scheme that the meanings or, where these tell nothing, the flags speak for."""
    given = _meanings(variable) or {}
    if "flag_masks" in variable.attributes:
        return None
    numbers = flag_numbers(variable, variable.dimensions)
    numbers = numbers[~np.isnan(numbers)]
    told = bool(np.isin(numbers, (1, 2)).any())  # what is good in one scheme or another
    return fitting_meanings(given) or (fitting_scheme(numbers) if told else None)
