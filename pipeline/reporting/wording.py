"""Numbers, units and lists of things as they stand on a page."""

from __future__ import annotations

import math
import re
import unicodedata
from typing import TYPE_CHECKING

from pipeline.variables import REGISTRY, RESIDUAL_PREFIX

if TYPE_CHECKING:
    from collections.abc import Sequence

MINUS = "\u2212"
# Shorter than the registry says, where that says too much for an axis.
_SHORT = {
    "pressure": "Pressure", "oxygen": "Dissolved oxygen", "practical_salinity": "Practical salinity",
    "sigma0": "Potential density anomaly, surface", "sigma2": "Potential density anomaly, 2000 dbar",
    "sigma4": "Potential density anomaly, 4000 dbar",
}  # fmt: skip
_UNITS = {"1": "", "degree_C": "°C", "degree_north": "°N", "degree_east": "°E", "percent": "%", "1e-3": "‰"}
_POWERS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def unit_words(unit: str) -> str:
    """Return a unit of the registry as it is printed: 'umol kg-1' as 'µmol kg⁻¹', '1' as nothing."""
    if unit in _UNITS:
        return _UNITS[unit]
    words = re.sub(r"\bu(?=(mol|g|atm)\b)", "µ", unit)
    return re.sub(r"(?<=[a-z])-?\d+\b", lambda power: power[0].translate(_POWERS), words).replace("_", " ")


def quantity_words(name: str) -> str:
    """Return what a registry column is, short: the name of a residual says so, all else ends at ':' or ';'."""
    if name.startswith(RESIDUAL_PREFIX):
        base = quantity_words(name.removeprefix(RESIDUAL_PREFIX))
        return f"{base}, fitted less observed"
    return _SHORT.get(name) or re.split(r"[:;]", REGISTRY[name].long_name)[0]


def with_unit(value: float, unit: str) -> str:
    """Return a number and its unit."""
    words = unit_words(unit)
    return f"{short(value)} {words}" if words else short(value)


def short(value: float) -> str:
    """Return a number in four digits, without needless zeros."""
    if not math.isfinite(value):
        return "unknown"
    text = f"{value:.4g}"
    if "e" in text and 1e-4 <= abs(value) < 1e9:
        text = f"{value:.0f}"
    return text.replace("-", MINUS, 1) if text.startswith("-") else text


def digits(value: float) -> str:
    """Return a share or its uncertainty in three digits, a dash where it is missing."""
    return f"{value:.3f}" if math.isfinite(value) else "–"


def rounded(value: float, uncertainty: float) -> str:
    """Return '-77.3 ± 3.1': both to the second digit of the uncertainty, or the value alone where there is none."""
    if not math.isfinite(uncertainty) or uncertainty <= 0:
        return short(value)
    digits = max(0, 1 - math.floor(math.log10(uncertainty)))
    return f"{value:.{digits}f} ± {uncertainty:.{digits}f}".replace("-", MINUS, 1)


def signed(value: float) -> str:
    """Return '+0.10' or '−0.10'."""
    return f"{value:+.2f}".replace("-", MINUS)


def plus_minus(value: float, uncertainty: float) -> str:
    """Return '0.94 ± 0.05': a share and its standard uncertainty, the latter left away where it is missing."""
    return f"{value:.2f}" if math.isnan(uncertainty) else f"{value:.2f} ± {uncertainty:.2f}"


def many(count: int, one: str, more: str | None = None) -> str:
    """Return '1 sample', '2 samples'."""
    return f"{count} {one if count == 1 else more or one + 's'}"


def listed(words: Sequence[str], most: int = 6) -> str:
    """Return 'a, b and c'; of many the first ones and how many more."""
    if len(words) > most:
        return f"{', '.join(words[: most - 1])} and {len(words) - most + 1} others"
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]}" if words else "none"


def visible(text: object) -> str:
    r"""Return text in which every character shows: line ends, codes that turn the direction of writing, nulls.

    What does not show stands as its code, ``\u202e``.
    """
    words = str(text)
    return words if words.isprintable() else "".join(_shown(character) for character in words)


def _shown(character: str) -> str:
    if character.isprintable() or character in "\u200d\ufe0f\u00a0\u202f":  # joined emoji are one sign
        return character
    if unicodedata.category(character)[0] not in "CZ":
        return character
    return {"\n": "\\n", "\r": "\\r", "\t": "\\t"}.get(character, f"\\u{ord(character):04x}")
