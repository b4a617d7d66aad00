"""Data and scripts inside a page: nothing in them can end the element they stand in, and only ours may run."""

from __future__ import annotations

import base64
import hashlib
import json
import math
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.problems import BrokenPromise

if TYPE_CHECKING:
    from collections.abc import Iterable

    from numpy.typing import NDArray

DIGITS = 7  # of the numbers in a page; the tables and the CSV files have all

# Inside <script> only "</script", "<!--" and "<script" matter; the others keep the text harmless wherever it is
# copied to. U+2028 and U+2029 end a line of script.
_UNSAFE = {ord(character): f"\\u{ord(character):04x}" for character in "<>&\u2028\u2029"}


def safe_json(values: Any) -> str:
    """Return values as JSON that may stand inside a ``<script>`` element.

    Raises
    ------
    BrokenPromise
        If a number in it is not finite, which JSON cannot hold: missing is None.

    """
    try:
        text = json.dumps(values, ensure_ascii=False, separators=(",", ":"), allow_nan=False)
    except ValueError as error:
        raise BrokenPromise(f"a number of the page's data is not finite ({error})") from error
    return text.translate(_UNSAFE)


def numbers(values: NDArray[np.float64] | Iterable[float], digits: int = DIGITS) -> list[float | int | None]:
    """Return numbers for JSON, each as short as so many digits allow, None where missing."""
    return [_number(value, digits) for value in np.asarray(values, dtype=np.float64).tolist()]


def _number(value: float, digits: int) -> float | int | None:
    if not math.isfinite(value):
        return None
    short = float(f"{value:.{digits}g}")
    return int(short) if short.is_integer() and abs(short) < 2**53 else short


def script_hash(script: str) -> str:
    """Return the source expression that lets exactly this script run (Content Security Policy, level 2)."""
    digest = hashlib.sha256(script.encode()).digest()
    return f"'sha256-{base64.b64encode(digest).decode()}'"


def security_policy(scripts: Iterable[str]) -> str:
    """Return the policy of a page that runs these scripts and fetches nothing from anywhere."""
    allowed = " ".join(script_hash(script) for script in scripts)
    return f"default-src 'none'; script-src {allowed}; style-src 'unsafe-inline'; img-src data: blob:; base-uri 'none'"
