from __future__ import annotations

import json
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pipeline.problems import BrokenPromise
from pipeline.reporting.embedding import numbers, safe_json, script_hash


@given(st.text())
def test_any_text_comes_back_and_cannot_end_the_script(text: str) -> None:
    text = text.encode("utf-16", "surrogatepass").decode("utf-16", "replace")
    made = safe_json({text: [text]})
    assert json.loads(made) == {text: [text]}
    assert not {"<", ">", "&", "\u2028", "\u2029"} & set(made)


def test_what_is_not_finite_is_missing() -> None:
    assert numbers([1.0, math.nan, math.inf, 0.1 + 0.2, 34.6920011]) == [1, None, None, 0.3, 34.692]
    with pytest.raises(BrokenPromise, match="not finite"):
        safe_json([math.nan])


def test_hash_of_a_script_is_that_of_the_standard() -> None:
    # the example of Content Security Policy Level 3, W3C, section 8.5 "alert('Hello, world.');" (from memory)
    assert script_hash("alert('Hello, world.');") == "'sha256-qznLcsROx4GACP2dm0UCKCzCG+HiZ1guq6ZZDob/Tng='"
