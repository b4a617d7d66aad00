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
from pipeline.reading.schemes import Scheme, mapping_words, odd_flag_findings, to_whp
from pipeline.variables import REGISTRY, FlagScheme, flag_name

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from numpy.typing import NDArray

    from pipeline.reading.cf_names import Recognised
    from pipeline.reading.description import Description
    from pipeline.reading.netcdf_bytes import StoredFile, StoredVariable

    FloatArray = NDArray[np.float64]

QUESTIONABLE, MISSING = 3.0, 9.0  # WHP
UNREAD_WORDS = "flags whose meaning is not known: every value counts as questionable"

_GOOD = r"good(_data|_value)?|pass(ed)?|acceptable|ok|no_problems?_noted|passed_required_qc_test"
_UNKNOWN = (
    r"not_evaluated|unknown|not_available|no_qc(_performed)?|not_checked|no_quality_control|unevaluated"
)
_DOUBTFUL = r"questionable|suspect|doubtful|questionable_suspect|questionable_or_suspect|of_high_interest"
_BAD = r"bad(_data|_value)?|fail(ed)?|known_bad"
_MISSING = r"missing(_data|_value)?|not_sampled.*|not_drawn|samples?_not_drawn"
_IODE = {
    1: _GOOD, 2: f".*({_UNKNOWN}).*", 3: f".*({_DOUBTFUL}).*", 4: _BAD, 9: _MISSING,
}  # fmt: skip
_ARGO = {
    0: f".*({_UNKNOWN}).*", 1: _GOOD, 2: r"probably_good(_data|_value)?",
    3: r"(probably_bad|bad_data_that_are_potentially_correctable|potentially_correctable|bad_.*correctable).*",
    4: _BAD, 5: r"(value_)?changed(_value)?", 8: r"(estimated|interpolated).*", 9: _MISSING,
}  # fmt: skip
_WATER = {
    1: r".*(not_received|unavailable|not_yet).*", 2: _GOOD, 3: f"{_DOUBTFUL}|leaking", 4: rf"{_BAD}|did_not_trip.*",
    5: r"not_reported", 6: r".*(mean|median|replicate|average).*", 7: r".*(chromatograph|unknown_problem).*",
    8: r".*(chromatograph|did_not_trip).*", 9: _MISSING,
}  # fmt: skip
_CTD = {
    1: r".*(calibrat|not_received).*", 2: _GOOD, 3: _DOUBTFUL, 4: _BAD, 5: r"not_reported", 6: r"interpolated.*",
    7: r"despiked.*", 9: _MISSING,
}  # fmt: skip
_NAMED = (
    (re.compile(r"\b(WOCE|WHP)\b", re.IGNORECASE), Scheme.WHP),
    (re.compile(r"\bQARTOD\b", re.IGNORECASE), Scheme.QARTOD),
    (re.compile(r"\bIODE\b", re.IGNORECASE), Scheme.IODE),
    (re.compile(r"\b(Argo|SeaDataNet|OceanSITES)\b", re.IGNORECASE), Scheme.ARGO),
)
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
    findings: tuple[Finding, ...] = ()


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
    values = np.ravel(variable.attributes.get("flag_values", np.empty(0)))
    meanings = [_plain(word) for word in variable.text("flag_meanings").split()]
    if meanings:
        if values.dtype.kind not in "iuf" or len(values) != len(meanings):
            return None
        return _by_meanings(dict(zip(values.tolist(), meanings, strict=True)), table)
    said = " ".join(variable.text(key) for key in ("conventions", "Conventions", "flag_scheme", "references"))
    named = next((scheme for pattern, scheme in _NAMED if pattern.search(said)), None)
    return named or (Scheme.WHP if exchange else None)


def _plain(word: str) -> str:
    return re.sub(r"[^a-z0-9]+", "_", word.lower()).strip("_")


def _by_meanings(given: Mapping[float, str], table: FlagScheme) -> Scheme | None:
    """Return the first scheme in which every flag means what is said, and that tells good from not good."""
    whp = _CTD if table is FlagScheme.CTD else _WATER
    for scheme, known in ((Scheme.IODE, _IODE), (Scheme.ARGO, _ARGO), (Scheme.WHP, whp)):
        if all(
            number in known and re.fullmatch(known[int(number)], words) for number, words in given.items()
        ):
            return scheme
    return None


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
    flag = found.variable.name
    meanings = found.variable.text("flag_meanings")
    why = (
        f"its flag_meanings are '{meanings[:80]}'"
        if meanings
        else "nothing in the file says what its values mean"
    )
    return Finding(
        "unknown-flag-scheme", Severity.DOUBT,
        f"{name}: {flag} holds the flags of {title}, but {why}; expected the flags of a scheme that is known"
        f" ({', '.join(Scheme)}); every value of {title} counts as questionable, and {flag} is kept as delivered; say"
        f' in cruise.toml what they are: "{title}" = {{ quantity = "{found.quantity}", flag = "{flag}", flags ='
        ' "iode" }, or leave flag and flags out to use the values without flags.',
        variable=found.quantity, value=meanings[:200] or flag, limit=", ".join(Scheme), file=name,
    )  # fmt: skip
