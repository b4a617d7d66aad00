"""Five hundred of the broken files; ``python -m tests.fuzz`` reads twenty thousand."""

from __future__ import annotations

from pipeline.reading import read_delivery
from tests.fuzz.cases import SETTINGS, Outcome, case
from tests.fuzz.running import run_cases
from tests.fuzz.seeds import seeds, slow_seed


def test_the_seeds_are_whole() -> None:
    for seed in (*seeds(), slow_seed()):
        delivery = read_delivery(seed.name, seed.data, SETTINGS.reading, seed.description)
        assert delivery.rows == delivery.table.num_rows > 0


def test_a_case_is_the_same_for_its_number() -> None:
    assert case(17) == case(17)
    assert len({case(number)[1] for number in range(100)}) > 90


def test_no_broken_file_ends_in_anything_but_words() -> None:
    outcomes = list(run_cases(0, 500))
    bad = [outcome for outcome in outcomes if not outcome.good]
    assert [outcome.number for outcome in outcomes] == list(range(500))
    assert not bad, _told(bad[0])
    assert {outcome.result for outcome in outcomes} == {"read", "refused"}


def _told(outcome: Outcome) -> str:
    return f"case {outcome.number} of {outcome.seed}: {outcome.result} {outcome.said}"
