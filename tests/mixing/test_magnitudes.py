"""Values of sources that no sea water has, and properties that a set must not list."""

from __future__ import annotations

import pytest

from pipeline.mixing.catalogue import parse_catalogue
from pipeline.mixing.magnitudes import doubtful, impossible
from pipeline.mixing.properties import PROPERTIES
from pipeline.problems import CatalogueProblem
from pipeline.variables import REGISTRY

from .catalogues import NAME, catalogue, changed

# Passages replaced, and the sentences that follow.
REFUSED: list[tuple[list[tuple[str, str]], list[str]]] = [
    (
        [
            ("value = 2.0,", "value = -300,"),
            ("value = 34.7,", "value = 0.0347e3,"),
            ("value = 1.0,", "value = 1000,"),
        ],
        [
            "line 9: source 'NOR': found conservative_temperature -300; expected -3 to 36 degree_C; correct it.",
            "line 12: source 'NOR': found phosphate 1000; expected 0 to 5 umol kg-1; is it in nmol/kg? Convert it.",
        ],
    ),
    (
        [("value = -0.5,", "value = 272.65,"), ("value = 35.0,", "value = -1,")],
        [
            "line 10: source 'NOR': found preformed_salinity -1; expected 0 to 43 g kg-1; correct it.",
            "line 19: source 'SOU': found conservative_temperature 272.65; expected -3 to 36 degree_C; is it in K? "
            "Convert it.",
        ],
    ),
    (
        [
            (nitrate, nitrate.replace("nitrate", "dic"))
            for nitrate in ("nitrate = { value = 14.0", "nitrate = { value = 32.0")
        ]
        + [("value = 14.0", "value = 2.15"), ("value = 32.0", "value = 0.00225"), ('"nitrate"', '"dic"')],
        [
            "line 13: source 'NOR': found dic 2.15; expected 1100 to 2600 umol kg-1; is it in mmol/kg? Convert it.",
            "line 23: source 'SOU': found dic 0.00225; expected 1100 to 2600 umol kg-1; is it in mol/kg? Convert it.",
        ],
    ),
    *(
        (
            [
                (f"{made} = {{ value = {one}", f"{given} = {{ value = {one}"),
                (f"{made} = {{ value = {other}", f"{given} = {{ value = {other}"),
                (f'"{made}"', f'"{given}"'),
            ],
            [
                f"line 28: set 'deep': found the property '{given}'; expected {made}, which mixes in proportion; list "
                f"that one: sources may go on giving {given}, which is converted at [catalogue.reference_state]."
            ],
        )
        for made, given, one, other in (
            ("conservative_temperature", "potential_temperature", 2.0, -0.5),
            ("preformed_salinity", "practical_salinity", 35.0, 34.7),
        )
    ),
]


@pytest.mark.parametrize(("changes", "sentences"), REFUSED, ids=[str(i) for i in range(len(REFUSED))])
def test_what_cannot_be_is_refused_in_one_sentence_with_its_line(
    changes: list[tuple[str, str]], sentences: list[str]
) -> None:
    with pytest.raises(CatalogueProblem) as refusal:
        parse_catalogue(changed(*changes), NAME)
    assert str(refusal.value).splitlines() == [f"{NAME}, {sentence}" for sentence in sentences]


def test_the_ends_of_a_range_are_within_it() -> None:
    judged = [name for name in PROPERTIES if REGISTRY[name].plausible]
    assert {"conservative_temperature", "preformed_salinity", "oxygen", "phosphate", "dic"} <= set(judged)
    for name in judged:
        low, high = REGISTRY[name].plausible or (0.0, 0.0)
        assert impossible(name, low) is None
        assert impossible(name, high) is None
        assert impossible(name, low - 0.01) is not None
        assert impossible(name, high + 0.01) is not None
    assert impossible("po4_star", -1e5) is None, "no range, no judgement"


@pytest.mark.parametrize(
    ("oxygen", "expected"),
    [
        ("14.9", True),
        ("15.1", False),
        ("0.0", False),  # anoxic water is no question of units
    ],
)
def test_little_oxygen_is_asked_about(oxygen: str, expected: bool) -> None:
    read = catalogue(("value = 290.0", f"value = {oxygen}"))
    told = list(doubtful(read, read.set[0]))
    assert bool(told) == expected
    assert all("where the others have 250; expected more" in sentence for sentence in told)


def test_fresh_water_is_a_source_of_its_own() -> None:
    """Melt and rivers have no salt, and are not in kg/kg."""
    read = catalogue(("value = 35.0,", "value = 0.1,"), ("value = 34.7", "value = 0.0"))
    assert list(doubtful(read, read.set[0])) == []
