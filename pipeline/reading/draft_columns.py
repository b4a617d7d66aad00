"""A guess at what the columns of a table are, with the reasons and the doubts. For drafts only: no run uses it."""

from __future__ import annotations

import re
from collections import Counter
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from pipeline.reading.composed import as_text
from pipeline.reading.numbers import missing_codes, to_floats
from pipeline.reading.schemes import guess_scheme
from pipeline.reading.spellings import QUANTITIES, in_words, meant, name_and_unit
from pipeline.units import conversion
from pipeline.variables import IDENTITY, MEASURED, REGISTRY

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from pipeline.reading.headings import TableCells

_FLAG = re.compile(r"(?i)(^|[\s_.\-])(q?flags?|qc|qf|quality|qual|flag_w|qv)([\s_.\-]|$|\s*\(\d+\)$)")
_FEW = 4  # different words that may stand for missing
_DATED = {"date", "time", "date_and_time"}
_BOTH = re.compile(r"^(?!1899-|190[0-4]-)\d+[-/.]\d.*[T ]\d{1,2}:\d\d|^(19|20)\d{6}T?\d{4}(\d\d)?$")
_CLOCK = re.compile(r"\d:\d\d")
_DAY = re.compile(r"\d[-/.]\d+[-/.]\d|^(19|20)\d{6}$")
_SLASHED = re.compile(r"(\d{1,2})([/.])(\d{1,2})[/.](\d{4}|\d{2})(\s+\d{1,2}:\d{2}(:\d{2})?)?$")
_SHORT_CODES = (-9.0, -99.0)
# What else a column may be, where the name alone does not tell.
_OTHERS = {
    "ctd_salinity": ("bottle_salinity",), "bottle_salinity": ("ctd_salinity",), "bottle_oxygen": ("ctd_oxygen",),
    "ctd_oxygen": ("bottle_oxygen",), "nitrate": ("nitrate_plus_nitrite",), "depth": ("bottom_depth", "pressure"),
    "temperature": ("reversing_temperature", "laboratory_temperature"), "sample": ("bottle",), "cast": ("station",),
    "bottle": ("sample",), "ph_total": ("ph_seawater",), "date": ("date_and_time",),
}  # fmt: skip


@dataclass
class ColumnGuess:
    """What one column may be."""

    column: str
    quantity: str | None
    entries: dict[str, str] = field(default_factory=dict)  # more keys of the entry, as TOML
    remarks: list[str] = field(default_factory=list)
    decided: bool = True  # else it is written as a comment


@dataclass(frozen=True, slots=True)
class _Seen:
    """What is seen of a column's cells."""

    texts: tuple[str, ...]  # that are not blank
    numbers: NDArray[np.float64]  # of those that are numbers
    words: tuple[tuple[str, int], ...]  # that are no numbers, with how often

    @property
    def is_numeric(self) -> bool:
        return len(self.numbers) > 0 and len(self.numbers) >= sum(count for _, count in self.words)


def guess_columns(table: TableCells, *, decimal_comma: bool) -> tuple[ColumnGuess, ...]:
    """Return a guess for every column of a table, in their order."""
    seen = [_look(column, decimal_comma=decimal_comma) for column in table.cells.columns]
    guesses: list[ColumnGuess] = []
    flags: dict[int, int] = {}  # position of a column of flags to that of what it speaks of
    for position, name in enumerate(table.names):
        of = _flag_of(position, table.names, seen) if _FLAG.search(name) else None
        if of is not None:
            flags[position] = of
            guesses.append(ColumnGuess(name, None, decided=False))
            continue
        guesses.append(_guess(name, table.units[position], seen[position]))
    for position, of in flags.items():
        _tell_flags(guesses[position], guesses[of], seen[position])
    _leave_dates(guesses)
    _leave_one_each(guesses)
    return tuple(guesses)


def _look(column: pa.Array, *, decimal_comma: bool) -> _Seen:
    texts = [text for text in as_text(column).to_pylist() if text.strip()]
    numbers, bad = to_floats(pa.array(texts, pa.string()), decimal_comma=decimal_comma)
    words = Counter(texts[row] for row in bad.tolist())
    known = ~np.isnan(numbers) & ~missing_codes(numbers, None, None)
    return _Seen(tuple(texts), numbers[known], tuple(words.most_common()))


def _guess(name: str, unit_below: str, seen: _Seen) -> ColumnGuess:
    bare, unit_in_name = name_and_unit(name)
    unit = unit_below or unit_in_name
    quantity = meant(name)
    guess = ColumnGuess(name, quantity)
    if not seen.texts:
        guess.decided = False
        guess.remarks.append("it holds nothing")
        return guess
    if quantity is None:
        guess.decided = False
        guess.remarks.append(f"not known by its name; {_told(seen)}")
        guess.remarks += _by_unit(unit, seen)
        return guess
    guess.remarks.append(f"by its name {bare!r}: {in_words(quantity)}; {_told(seen)}")
    if quantity in _DATED:
        _guess_date(guess, seen)
    elif quantity in REGISTRY and quantity not in IDENTITY:
        _guess_unit(guess, quantity, unit, seen)
        _guess_missing(guess, quantity, seen)
    others = [other for other in _OTHERS.get(guess.quantity or "", ()) if other in QUANTITIES]
    if others:
        guess.remarks.append(f"or is it {' or '.join(others)}?")
    return guess


def _told(seen: _Seen) -> str:
    """Return what the cells are in a few words."""
    if seen.is_numeric:
        low, high = float(seen.numbers.min()), float(seen.numbers.max())
        return f"{len(seen.numbers)} numbers from {low:.6g} to {high:.6g}"
    return f"{len(seen.texts)} texts such as {seen.texts[0][:40]!r}"


def _by_unit(unit: str, seen: _Seen) -> list[str]:
    """Return which quantities have this unit and such a range."""
    if not unit or not seen.is_numeric:
        return []
    fitting = []
    for name in MEASURED:
        variable = REGISTRY[name]
        if variable.unit in {"", "1"} or variable.plausible is None or conversion(variable, unit) is None:
            continue
        low, high = variable.plausible
        if low <= seen.numbers.min() and seen.numbers.max() <= high:
            fitting.append(name)
    return [f"by its unit {unit!r} and range it could be {', '.join(fitting[:6])}"] if fitting else []


def _guess_unit(guess: ColumnGuess, quantity: str, unit: str, seen: _Seen) -> None:
    variable = REGISTRY[quantity]
    if variable.unit == "1":
        pass
    elif not unit:
        guess.remarks.append(
            f"doubt: no unit is given; {variable.exchange_unit or variable.unit} is assumed without one"
        )
    elif conversion(variable, unit) is None:
        guess.remarks.append(
            f"doubt: the unit {unit!r} cannot be read; write one that can, or leave the column out"
        )
        guess.decided = False
    else:
        guess.entries["unit"] = toml(unit)
        guess.remarks.append(f"unit {unit!r} from the heading")
    if not seen.is_numeric:
        guess.remarks.append("doubt: most cells are no numbers")
    elif variable.plausible is not None:
        low, high = variable.plausible
        outside = int(np.count_nonzero((seen.numbers < low) | (seen.numbers > high)))
        if outside:
            said = f"{outside} of them outside the usual {low:g} to {high:g}"
            guess.remarks.append(f"doubt: {said}" if outside > len(seen.numbers) / 2 else said)


def _guess_missing(guess: ColumnGuess, quantity: str, seen: _Seen) -> None:
    plausible = REGISTRY[quantity].plausible
    codes: list[str] = []
    for code in _SHORT_CODES:
        count = int(np.count_nonzero(seen.numbers == code))
        if count > 1 and plausible is not None and code < plausible[0]:
            codes.append(f"{code:g}")
    words = [word for word, _ in seen.words]
    if seen.is_numeric and 0 < len(words) <= _FEW:
        below = [word for word in words if word.lstrip().startswith(("<", ">"))]
        codes += [toml(word) for word in words if word not in below]
        if below:
            guess.remarks.append(
                f"doubt: {', '.join(below)} is no number; it will count as missing and be told"
            )
    if codes:
        guess.entries["missing"] = f"[{', '.join(codes)}]"
        guess.remarks.append("doubt: is that what stands for a missing value?")


def _guess_date(guess: ColumnGuess, seen: _Seen) -> None:
    """Decide by the cells whether a column holds the date, the time of day or both."""
    both = all(_BOTH.search(text) for text in seen.texts)
    has_clock, has_day = (any(pattern.search(text) for text in seen.texts) for pattern in (_CLOCK, _DAY))
    if guess.quantity != "date_and_time" and both:
        held = "time of day" if guess.quantity == "date" else "date"
        guess.quantity = "date_and_time"
        guess.remarks[0] = (
            guess.remarks[0].partition(":")[0] + f": {in_words('date_and_time')}; {_told(seen)}"
        )
        guess.remarks.append(f"its cells hold the {held} too")
    elif guess.quantity != "date" and has_day and not has_clock and not both:
        guess.quantity = "date"
        guess.remarks.append("its cells hold no time of day")
    elif guess.quantity == "date_and_time" and has_clock and not has_day:
        guess.quantity = "time"
        guess.remarks.append("its cells hold no date")
    slashed = [match for text in seen.texts if (match := _SLASHED.match(text))]
    if not slashed:
        return
    firsts, seconds = ([int(match[part]) for match in slashed] for part in (1, 3))
    mark = slashed[0][2]
    year = "YYYY" if len(slashed[0][4]) == 4 else "YY"
    clock = "" if slashed[0][5] is None else " hh:mm:ss" if slashed[0][6] else " hh:mm"
    if (guess.quantity == "date") == bool(clock) or guess.quantity == "time":
        return
    if max(firsts) > 12 >= max(seconds):
        guess.entries["format"] = toml(f"DD{mark}MM{mark}{year}{clock}")
    elif max(seconds) > 12 >= max(firsts):
        guess.entries["format"] = toml(f"MM{mark}DD{mark}{year}{clock}")
    else:
        guess.remarks.append(
            "doubt: day first or month first? nothing tells; say format ="
            f' "DD{mark}MM{mark}{year}{clock}" or "MM{mark}DD{mark}{year}{clock}"'
        )


def _flag_of(position: int, names: Sequence[str], seen: Sequence[_Seen]) -> int | None:
    """Return the position of the column that a column of flags speaks of: the one it names, else the one before."""
    if seen[position].texts and not seen[position].is_numeric:
        return None
    rest = _FLAG.sub(" ", names[position]).strip(" _-.")
    quantity = meant(rest) if rest else None
    if quantity is not None:
        for other, name in enumerate(names):
            if other != position and not _FLAG.search(name) and meant(name) == quantity:
                return other
    before = position - 1
    return before if before >= 0 and not _FLAG.search(names[before]) else None


def _tell_flags(guess: ColumnGuess, of: ColumnGuess, seen: _Seen) -> None:
    if of.quantity is None or of.quantity not in REGISTRY or REGISTRY[of.quantity].flags is None:
        guess.remarks.append(f"flags of '{of.column}'? it passes through")
        return
    scheme, why = guess_scheme(seen.numbers)
    of.entries["flag"] = toml(guess.column)
    of.entries["flags"] = toml(scheme.value)
    of.remarks.append(f"doubt: flags of the scheme {scheme}? {why}")
    guess.remarks.append(f"the flags of '{of.column}', above")
    guess.quantity = None


def _leave_dates(guesses: Sequence[ColumnGuess]) -> None:
    """Take a column of times that hold the date too for the time of day where another column gives the date."""
    dated = next((g for g in guesses if g.quantity in {"date", "year"} and g.decided), None)
    for guess in guesses if dated else ():
        if guess.quantity == "date_and_time" and guess.decided and dated is not None:
            guess.quantity = "time"
            guess.entries.pop("format", None)
            guess.remarks.append(f"doubt: the date of '{dated.column}' is taken, not the one in its cells")


def _leave_one_each(guesses: Sequence[ColumnGuess]) -> None:
    """Leave each quantity to the first column that can give it."""
    giver: dict[str, str] = {}
    for guess in guesses:
        if guess.quantity is None or not guess.decided:
            continue
        if guess.quantity in giver:
            guess.decided = False
            guess.remarks.append(f"'{giver[guess.quantity]}' gives {guess.quantity} already")
        giver.setdefault(guess.quantity, guess.column)


def toml(text: str) -> str:
    """Return a text as TOML writes it."""
    out = []
    for letter in text:
        if letter in '"\\':
            out.append(f"\\{letter}")
        elif letter < " " or letter == "\x7f":
            out.append(f"\\u{ord(letter):04x}")
        else:
            out.append(letter)
    return f'"{"".join(out)}"'
