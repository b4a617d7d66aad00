from __future__ import annotations

import re
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.mixing import robust
from pipeline.mixing.accounts import LONGEST_NOTE, Account, note
from pipeline.mixing.catalogue import parse_catalogue
from pipeline.mixing.deriving import derive_sources, derived_catalogue
from pipeline.mixing.entries import CatalogueFile
from pipeline.mixing.rules import parse_rules
from pipeline.mixing.writing import catalogue_text, is_sealed, sealed
from pipeline.problems import CatalogueProblem
from pipeline.settings import Settings
from pipeline.tables import empty, with_columns
from tests.mixing.catalogues import TEXT as CATALOGUE

if TYPE_CHECKING:
    import pyarrow as pa

    from pipeline.mixing.deriving import Derivation, DerivedSource
    from pipeline.mixing.entries import Source

TEXT = """\
[rules]
title = "Found"
properties = ["conservative_temperature", "oxygen", "po4_star"]

[[source]]
code = "NOR"
name = "Northern water"
[source.where]
sigma2 = [36.0, 37.0]
latitude = [-40.0, 60.0]
mixed_layer = "include"

[[set]]
name = "all"
sources = ["NOR"]
properties = ["conservative_temperature", "oxygen"]
"""
EXTREMUM = '[source.extremum]\nproperty = "aou"\nkind = "maximum"\n\n[[set]]'
PROPERTIES = ("conservative_temperature", "oxygen", "po4_star")
N = 40


def changed(*changes: tuple[str, str]) -> str:
    text = TEXT
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new, 1)
    return text


def cruise(expocode: str = "AAAA", count: int = N, seed: int = 0, **columns: object) -> pa.Table:
    """Return invented samples, each at its own place, all of which the rule finds."""
    random = np.random.default_rng(seed)
    values: dict[str, object] = {
        "expocode": [expocode] * count,
        "station": [str(row) for row in range(count)],
        "cast": [1] * count,
        "sample": ["1"] * count,
        "latitude": random.uniform(-30, 50, count),
        "longitude": random.uniform(-180, 180, count),
        "pressure": random.uniform(1000, 2000, count),
        "temperature": random.normal(2.0, 0.3, count),
        "conservative_temperature": random.normal(2.0, 0.3, count),
        "oxygen": random.normal(200.0, 20.0, count),
        "po4_star": random.normal(1.0, 0.1, count),
        "sigma2": np.full(count, 36.5),
    }
    return with_columns(empty([]), {**values, **columns})


def derived(*tables: pa.Table, changes: tuple[tuple[str, str], ...] = ()) -> Derivation:
    return derive_sources(tables, parse_rules(changed(*changes), "rules.toml").rules, Settings())


def only(derivation: Derivation) -> DerivedSource:
    assert not derivation.faults, derivation.faults
    (one,) = derivation.sources
    return one


def values(source: Source) -> dict[str, tuple[float, float]]:
    return {name: (one.value, one.uncertainty) for name, one in source.properties.items()}


def sentence(*tables: pa.Table, changes: tuple[tuple[str, str], ...] = ()) -> str:
    (fault,) = derived(*tables, changes=changes).faults
    assert fault.location == ("source", 0, "where")
    return fault.sentence


def test_a_source_is_the_median_of_what_is_found_and_its_spread() -> None:
    oxygen = np.arange(190.0, 231.0)
    one = only(derived(cruise(count=41, oxygen=oxygen)))
    assert one.source.properties["oxygen"].value == 210.0
    assert one.source.properties["oxygen"].uncertainty == pytest.approx(1.4826 * 10, rel=1e-3)
    assert one.account.cruises == {"AAAA": 41}
    assert "41 samples, from 1 cruise: AAAA 41." in one.source.note
    assert one.source.note.startswith(
        "Found where sigma2 is 36 to 37 kg m-3, latitude is -40 to 60 degree_north."
    )


def test_all_conditions_must_hold() -> None:
    table = cruise(sigma2=[36.5] * 20 + [37.5] * 20, latitude=([10.0] * 10 + [-50.0] * 10) * 2)
    assert only(derived(table)).account.samples == 10


def test_any_numeric_column_region_and_months_can_be_conditions() -> None:
    table = cruise(
        aou=[50.0] * 20 + [150.0] * 20,
        longitude=([179.0] * 10 + [-179.0] * 5 + [0.0] * 5) * 2,
        date=np.array(["2020-01-15", "2020-06-15"] * 20, dtype="datetime64[D]"),
    )
    extra = (
        'mixed_layer = "include"',
        'mixed_layer = "include"\naou = [100.0, 200.0]\nregion = [[170.0, -90.0], [-170.0, -90.0], [-170.0, 90.0], '
        "[170.0, 90.0]]\nmonths = [1, 2]",
    )
    one = only(derived(table, changes=(extra,)))
    assert one.account.samples == 8
    assert "in a region of 4 vertices, in the months 1, 2, aou is 100 to 200 umol kg-1." in one.source.note


def test_only_good_values_count() -> None:
    columns: dict[str, Any] = {
        "silicate": [10.0 + 0.1 * row for row in range(30)] + [1000.0] * 10,
        "silicate_flag": [2] * 30 + [4] * 10,
        "silicate_check": [1] * 25 + [3] * 5 + [1] * 10,
    }
    one = only(derived(cruise(**columns), changes=(('"po4_star"', '"silicate"'),)))
    assert one.source.properties["silicate"].value == pytest.approx(11.2)
    assert one.account.without == {"silicate": 15}
    assert "without a good value, in that property alone, silicate 15" in one.source.note


def test_an_extremum_keeps_the_most_extreme_samples_and_at_least_five() -> None:
    table = cruise(oxygen=np.arange(1.0, 41.0), po4_star=np.r_[np.nan, np.linspace(0.9, 1.1, 39)])
    extremum = '[source.extremum]\nproperty = "oxygen"\nkind = "{}"\nfraction = {}\n\n[[set]]'
    kinds = {("maximum", 0.25): (31, 40), ("minimum", 0.25): (1, 10), ("maximum", 0.01): (36, 40)}
    for (kind, fraction), (low, high) in kinds.items():
        one = only(derived(table, changes=(("[[set]]", extremum.format(kind, fraction)),)))
        assert one.account.samples == high - low + 1
        assert one.source.properties["oxygen"].value == (low + high) / 2
    assert "of these the 1 % with the highest oxygen. 5 samples of 40" in one.source.note


def test_a_large_cruise_does_not_outweigh_a_small_one_and_a_single_sample_does_not_lead() -> None:
    small, large = cruise("AAAA", 10, 1), cruise("BBBB", 1000, 2, oxygen=np.full(1000, 260.0))
    lone = cruise("CCCC", 1, 3, oxygen=[150.0])
    # Ten of 200 +- 20 and a thousand of 260 weigh alike: the median lies between the two.
    parted = only(derived(small, large)).source.properties["oxygen"].value
    assert 200.0 < parted < 260.0
    outweighed = derived(small, large, changes=(("[[source]]", "most_per_cruise = 100000\n[[source]]"),))
    assert only(outweighed).source.properties["oxygen"].value == 260.0
    assert only(derived(lone, large)).source.properties["oxygen"].value == 260.0


def test_what_several_cruises_deliver_counts_once() -> None:
    own = cruise("BBBB", 30, 5)
    copy = with_columns(own, {"expocode": ["CCCC"] * 30, "station": [f"x{row}" for row in range(30)]})
    alone, doubled = only(derived(own)), only(derived(own, copy))
    assert doubled.source.properties == alone.source.properties
    assert doubled.source.covariance == alone.source.covariance
    assert doubled.account == replace(alone.account, copies=30)
    assert "Left out: 30 further records of the same samples." in doubled.source.note
    again = only(derived(own, own))  # a sample number twice in one cast
    assert again.source == doubled.source


def test_the_order_of_tables_and_rows_changes_nothing() -> None:
    tables = [cruise("AAAA", 30, 1), cruise("BBBB", 50, 2), cruise("CCCC", 7, 3)]
    shuffled = [table.take(np.random.default_rng(0).permutation(table.num_rows)) for table in tables[::-1]]
    assert derived(*tables) == derived(*shuffled)


def test_an_uncertainty_is_never_less_than_that_of_measurements() -> None:
    one = only(derived(cruise(oxygen=np.full(N, 200.0))))
    assert one.source.properties["oxygen"].uncertainty == pytest.approx(
        2.0
    )  # one per cent, Lauvset et al. 2024
    assert one.account.measured == ("oxygen",)
    assert one.source.covariance is not None
    assert one.source.covariance.matrix[0][1] == 0.0
    own = Settings.model_validate({"mixing": {"uncertainty": {"oxygen": 7.5}}})
    given_own = derive_sources([cruise(oxygen=np.full(N, 200.0))], parse_rules(TEXT, "r").rules, own)
    assert only(given_own).source.properties["oxygen"].uncertainty == 7.5


@pytest.mark.parametrize("count", [5, 6, 60])
def test_a_covariance_is_positive_definite_and_repeats_the_uncertainties(count: int) -> None:
    table = cruise(count=count, seed=count)
    heat = table.column("conservative_temperature").to_numpy()
    table = with_columns(table, {"oxygen": 200 - 30 * heat, "po4_star": 1 + heat})  # as dependent as can be
    source = only(derived(table)).source
    assert source.covariance is not None
    matrix = np.array(source.covariance.matrix)
    spread = np.array([source.properties[name].uncertainty for name in source.covariance.properties])
    np.testing.assert_allclose(np.diag(matrix), spread**2, rtol=1e-5)
    assert np.linalg.eigvalsh(matrix / np.outer(spread, spread))[0] > 5e-4
    assert matrix[0, 1] < 0 < matrix[0, 2]


def test_a_covariance_is_that_of_the_ocean() -> None:
    random = np.random.default_rng(8)
    truth = np.array([[0.09, -3.0, 0.02], [-3.0, 400.0, 0.3], [0.02, 0.3, 0.01]])
    drawn = random.multivariate_normal([2.0, 200.0, 1.0], truth, 4000)
    drawn[::40] = [9.0, 10.0, 5.0]  # and a few wild ones
    one = only(derived(cruise(count=4000, **dict(zip(PROPERTIES, drawn.T, strict=True)))))
    assert one.source.covariance is not None
    spread = np.sqrt(np.diag(truth))
    matrix = np.array(one.source.covariance.matrix) / np.outer(spread, spread)
    np.testing.assert_allclose(matrix, truth / np.outer(spread, spread), atol=0.08)


def test_no_covariance_when_none_is_wanted() -> None:
    one = only(derived(cruise(), changes=(('title = "Found"', 'title = "Found"\ncovariance = false'),)))
    assert one.source.covariance is None


def test_faults_of_what_is_found() -> None:
    assert sentence(cruise(sigma2=np.full(N, 30.0))) == (
        "source 'NOR': found no sample for which all of its conditions hold; of 40 samples each alone holds: sigma2 "
        "for 0, latitude for 40; expected at least 5 samples; widen the narrowest."
    )
    for written, told in (
        ("", "being below the mixed layer (which holds unless mixed_layer = 'include' is written) for 40"),
        ('mixed_layer = "exclude"', "being below the mixed layer for 40"),
    ):
        without = (('mixed_layer = "include"', written),)
        assert f"latitude for 40, {told}; expected" in sentence(
            cruise(sigma2=np.full(N, 30.0)), changes=without
        )
    assert "found 4 samples; expected at least 5; widen" in sentence(cruise(count=4))
    assert "found no sample of 40 with po4_star that may be used" in sentence(cruise(po4_star=[None] * N))
    few = [1.0, 1.1, 1.2, 1.3] + [None] * 36
    assert "found 4 samples of 40 with po4_star" in sentence(cruise(po4_star=few))
    assert "no sample of 40 with aou that may be used" in sentence(cruise(), changes=(("[[set]]", EXTREMUM),))
    assert "set mixing.uncertainty.po4_star in the settings" in sentence(cruise(po4_star=np.ones(N)))
    assert "found oxygen 1e+30" in sentence(cruise(oxygen=np.full(N, 1e30)))
    assert derived().faults[0].sentence.startswith("source 'NOR': found no sample")


@pytest.mark.parametrize(
    ("old", "new", "expected"),
    [
        ("[36.0, 37.0]", "[37.0, 36.0]", "line 9: source 'NOR': found the empty range [37, 36] of sigma2"),
        ("sigma2", "sigmatwo", "line 9: source 'NOR': found the column 'sigmatwo' in where"),
        ("sigma2", "leading_share", "line 9: source 'NOR': found the column 'leading_share' in where"),
        ("sigma2 = [36.0, 37.0]", "aou = [3.0, 2.0]", "line 9: source 'NOR': found the empty range [3, 2] of aou"),
        ("sigma2 = [36.0, 37.0]", "sigma2 = 36.0", "line 9: found 36.0 as 'sigma2' of source 'NOR', where; expected"),
        ("sigma2 = [36.0, 37.0]", 'aou = ["a", 2.0]', "line 9: found ['a', 2.0] as 'aou' of source 'NOR', where; exp"),
        ("sigma2 = [36.0, 37.0]", "aou = []", "line 9: found [] as 'aou' of source 'NOR', where; expected two numbers"),
        ("[source.where]", "[source.wher]", "found the unknown key 'wher' in source 'NOR'; expected one of code, name"),
        ('title = "Found"', "", "line 1: found no 'title' in [rules]; expected text; add it."),
        ('code = "NOR"', 'cod = "NOR"', "line 5: found no 'code' in source 1; expected 1 to 12 of the characters"),
        ("po4_star", "sigma0", "line 3: found the property 'sigma0', which does not mix in proportion"),
        ("po4_star", "po4_stir", "line 3: found the property 'po4_stir', which is no name of the registry"),
        ("po4_star", "oxygen", "line 3: found the property 'oxygen' twice"),
        ('sources = ["NOR"]', 'sources = ["SOU"]', "line 15: set 'all': found the unknown source 'SOU'"),
        ('"oxygen"]\n', '"oxygen", "nitrate"]\n', "found no nitrate; expected every property of the set 'all'"),
        ('code = "NOR"', 'code = "mixed"', "found a code that is a tag"),
        ("[[set]]", EXTREMUM.replace("aou", "tag"), "found the column 'tag' in extremum"),
        ("[[set]]", EXTREMUM.replace("maximum", "most"), "found 'most' as 'kind' of source 'NOR', extremum"),
        ('["NOR"]', "[]", "line 15: found [] as 'sources' of set 'all'; expected a list of 1 to 12 source codes;"),
        ("[[set]]", "[[sett]]", "found no 'set' in the rules; expected at least one table [[set]]; add it."),
        ("[rules]", "[rules", "found text that is not TOML"),
    ],
)  # fmt: skip
def test_rules_that_cannot_be_used_are_told_in_a_sentence(old: str, new: str, expected: str) -> None:
    with pytest.raises(CatalogueProblem) as told:
        parse_rules(changed((old, new)), "rules.toml")
    assert all(line.startswith("rules.toml") for line in str(told.value).splitlines())
    assert expected in str(told.value)


def test_a_note_is_never_too_long() -> None:
    rule, header = (rules := parse_rules(TEXT, "r").rules).source[0], rules.rules
    cruises = {f"CRUISE{number:06}": number for number in range(1, 900)}
    words = note(rule, header, Account(cruises, 10**6, 5, 5, {"oxygen": 3}, ("oxygen",)))
    assert LONGEST_NOTE - 40 < len(words) <= LONGEST_NOTE
    assert "CRUISE000899 899, CRUISE000898 898, " in words
    named = sum(int(count) for count in re.findall(r"CRUISE\d{6} (\d+)", words))
    left = re.search(r"and (\d+) more with (\d+)\.", words)
    assert left is not None
    assert named + int(left[2]) == sum(cruises.values())


def content(catalogue: CatalogueFile) -> dict[str, object]:
    return {name: getattr(catalogue, name) for name in CatalogueFile.model_fields}


def test_a_written_catalogue_is_read_back_exactly() -> None:
    rules = parse_rules(TEXT, "rules.toml").rules
    derivation = derive_sources([cruise()], rules, Settings())
    made = derived_catalogue(rules, derivation, "a" * 64, "b" * 64)
    text = catalogue_text(made)
    assert content(parse_catalogue(text, "sources.toml")) == content(made)
    assert catalogue_text(made) == text
    assert rules.sha256 in made.catalogue.reference


def test_every_part_of_a_catalogue_is_written() -> None:
    text = CATALOGUE.replace('title = "Invented"', r'title = "A \"b\" \\ \u007F \n é ☃ = # ["') + (
        'region = [[170.0, -10.0], [-170.0, -10.0], [180.0, 10.0]]\nmonths = [12, 1]\nmixed_layer = "include"\n'
        '[[set]]\nname = "by hand"\nsources = ["SOU", "NOR"]\nproperties = ["oxygen", "nitrate"]\nmass = "weighted"\n'
        'weights = "given"\nsilicate_per_phosphate = 1e-7\n[set.given_weights]\n'
        "oxygen = 1e5\nnitrate = 0.1\nmass = 3.0\n"
    )
    read = parse_catalogue(text, "sources.toml")
    assert read.catalogue.title == 'A "b" \\ \x7f \n é ☃ = # ['
    again = parse_catalogue(catalogue_text(read), "sources.toml")
    assert again.sha256 == read.sha256
    assert content(again) == content(read)


def test_a_seal_breaks_with_any_change() -> None:
    data = sealed("a = 1\n").encode()
    assert is_sealed(data)
    for other in (b"", b"a = 1\n", data + b"\n", data[1:], data.replace(b"1\n", b"2\n")):
        assert not is_sealed(other)


def slow_median(values: list[float], weights: list[int]) -> float:
    return float(np.median(np.repeat(values, weights)))


numbers = st.floats(-1e3, 1e3).map(lambda number: round(number, 3))


@given(
    st.lists(st.tuples(numbers, st.integers(0, 9)), min_size=1, max_size=12).filter(
        lambda w: sum(b for _, b in w)
    )
)
@settings(deadline=None, derandomize=True)
def test_a_weighted_median_is_that_of_repeated_values(pairs: list[tuple[float, int]]) -> None:
    values, weights = [a for a, _ in pairs], [b for _, b in pairs]
    expected = slow_median(values, weights)
    found = robust.weighted_median(np.array(values), np.array(weights) / 7)
    assert found == pytest.approx(expected, abs=1e-12)


@given(st.integers(1, 12), st.integers(1, 400), st.integers(1, 400))
@settings(deadline=None, derandomize=True)
def test_a_cruise_weighs_as_its_samples_up_to_the_most(most: int, one: int, other: int) -> None:
    group = np.repeat([0, 1], [one, other])
    present = np.ones(one + other, dtype=bool)
    weights = robust.sample_weights(group, np.arange(one + other), present, most)
    np.testing.assert_allclose(np.bincount(group, weights), np.minimum([one, other], most))


def test_rank_correlation_of_normal_samples_is_their_correlation() -> None:
    drawn = np.random.default_rng(3).multivariate_normal([0, 0], [[1, 0.7], [0.7, 1]], 20_000).T
    equal = np.ones(20_000)
    assert robust.rank_correlation(drawn[0], drawn[1], equal) == pytest.approx(0.7, abs=0.02)
    assert robust.rank_correlation(drawn[0], -np.exp(drawn[1]), equal) == pytest.approx(-0.7, abs=0.02)
    assert robust.rank_correlation(drawn[0], equal, equal) == 0.0


def test_few_samples_draw_a_correlation_towards_none_and_many_do_not() -> None:
    found = np.array([[1.0, 0.6], [0.6, 1.0]])
    few, many = (robust.shrunk(found, np.full((2, 2), count))[0, 1] for count in (5, 5000))
    assert 0.2 < few < 0.5
    assert many == pytest.approx(0.6, abs=1e-3)
    impossible = np.array([[1.0, 0.9, -0.9], [0.9, 1.0, 0.9], [-0.9, 0.9, 1.0]])
    mended = robust.shrunk(impossible, np.full((3, 3), 1e6))
    assert np.linalg.eigvalsh(mended)[0] >= 0.999 * robust.LEAST_EIGENVALUE
