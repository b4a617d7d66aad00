"""A survey finds the cruises that reading finds, from the expocodes alone."""

from __future__ import annotations

import pytest

from pipeline.reading import read_delivery, survey_cruises
from tests.invented import EXPOCODE, LIMITS, NAMES, bottle_file

OTHER = "ZZV220210301"
TWO = bottle_file({}, {"EXPOCODE": OTHER}, {})


@pytest.mark.parametrize(
    "data",
    [
        TWO,
        bottle_file({}, {"EXPOCODE": OTHER}, names=(*NAMES[1:], NAMES[0])),
        TWO.replace(b",", b";"),
        TWO.replace(OTHER.encode(), b' "' + OTHER.lower().encode() + b'" '),
        TWO.replace(b",2.000,2\n", b",2.000,2,,\n"),
    ],
    ids=["first column", "last column", "semicolons", "quoted", "empty cells at the end"],
)
def test_a_survey_finds_what_reading_finds(data: bytes) -> None:
    found = survey_cruises("a_hy1.csv", data, LIMITS)
    assert found == (EXPOCODE, OTHER)
    assert found == tuple(sorted(read_delivery("a_hy1.csv", data, LIMITS).cruises))


def test_rows_of_a_wrong_width_do_not_count() -> None:
    data = bottle_file({}, {"EXPOCODE": f"{OTHER},more"})
    assert survey_cruises("a_hy1.csv", data, LIMITS) == (EXPOCODE,)
