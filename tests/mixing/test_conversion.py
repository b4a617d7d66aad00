from __future__ import annotations

from typing import TYPE_CHECKING

import gsw
import numpy as np
import pytest

from pipeline.mixing.catalogue import parse_catalogue
from pipeline.mixing.entries import Catalogue
from pipeline.problems import CatalogueProblem

from .catalogues import NAME, TEXT, catalogue, changed

if TYPE_CHECKING:
    from numpy.typing import NDArray

HEAD = 'reference = "no real ocean"\n'
PLACE = (-30.0, 40.0, 2000.0)  # longitude, latitude, pressure
STATE = (HEAD, f"{HEAD}[catalogue.reference_state]\nlongitude = -30\nlatitude = 40.0\npressure = 2000.0\n")
HEAT = ("conservative_temperature = { value = 2.0", "potential_temperature = { value = 2.0")
SALT = ("preformed_salinity = { value = 35.0,", "practical_salinity = { value = 35.0,")
NITRATE = "nitrate = { value = 14.0, uncertainty = 0.4 }\n"


def with_covariance(matrix: str, properties: str = '["oxygen", "nitrate"]') -> tuple[str, str]:
    return NITRATE, f"{NITRATE}[source.covariance]\nproperties = {properties}\nmatrix = {matrix}\n"


def refused(*changes: tuple[str, str]) -> list[str]:
    with pytest.raises(CatalogueProblem) as refusal:
        parse_catalogue(changed(*changes), NAME)
    return [line.removeprefix(f"{NAME}, ") for line in str(refusal.value).splitlines()]


def test_published_values_are_made_conservative_through_teos_10() -> None:
    north = catalogue(HEAT, SALT, STATE).sources["NOR"]
    longitude, latitude, pressure = PLACE
    salinity = gsw.SA_from_SP(35.0, pressure, longitude, latitude)
    heat, salt = north.properties["conservative_temperature"], north.properties["preformed_salinity"]
    assert heat.value == pytest.approx(gsw.CT_from_pt(salinity, 2.0), abs=1e-10)
    assert salt.value == pytest.approx(gsw.Sstar_from_SP(35.0, pressure, longitude, latitude), abs=1e-10)
    # The slow obvious way to the uncertainties: the difference that one standard uncertainty makes.
    assert heat.uncertainty == pytest.approx(
        (gsw.CT_from_pt(salinity, 2.1) - gsw.CT_from_pt(salinity, 1.9)) / 2, rel=1e-4
    )
    assert salt.uncertainty == pytest.approx(0.01 * salt.value / 35.0, rel=1e-6)
    assert north.properties["potential_temperature"].value == 2.0, "what was given is kept"


def test_what_was_converted_is_told_and_is_part_of_the_hash() -> None:
    read = catalogue(HEAT, SALT, STATE)
    assert read.conversions == (
        "source 'NOR': conservative_temperature 1.9973 degC is made from potential_temperature 2 at -30 degrees east,"
        " 40 degrees north, 2000 dbar.",
        "source 'NOR': preformed_salinity 35.1639 g/kg is made from practical_salinity 35 at -30 degrees east, 40"
        " degrees north, 2000 dbar.",
    )
    deeper = (STATE[0], STATE[1].replace("2000.0", "2100.0"))
    assert catalogue(HEAT, SALT, deeper).sha256 != read.sha256
    assert Catalogue.model_validate(read.model_dump(mode="json")) == read


def test_nothing_is_converted_that_is_given_or_not_asked_for() -> None:
    assert catalogue().conversions == ()
    assert catalogue(STATE).conversions == ()
    both = catalogue(
        STATE, (NITRATE, f"{NITRATE}practical_salinity = {{ value = 30.0, uncertainty = 1.0 }}\n")
    )
    assert both.conversions == ()
    assert both.sources["NOR"].properties["preformed_salinity"].value == 35.0


def test_a_set_is_of_conservative_properties_whatever_its_sources_give() -> None:
    """Raw, the published ones would be mixed as if they were conservative, and nobody told."""
    text = TEXT
    for old, new in (HEAT, SALT):
        text = text.replace(old.split(" = {")[0], new.split(" = {")[0])
    with pytest.raises(CatalogueProblem) as refusal:
        parse_catalogue(text.replace(*STATE, 1), NAME)
    told = [line.partition(": ")[2] for line in str(refusal.value).splitlines()]
    assert told == [
        f"set 'deep': found the property '{given}'; expected {made}, which mixes in proportion; list that one: sources "
        f"may go on giving {given}, which is converted at [catalogue.reference_state]."
        for given, made in (
            ("potential_temperature", "conservative_temperature"),
            ("practical_salinity", "preformed_salinity"),
        )
    ]


def test_the_salinity_alone_can_be_converted() -> None:
    read = catalogue(SALT, STATE)
    assert len(read.conversions) == 1
    assert read.sources["NOR"].properties["conservative_temperature"].value == 2.0


def test_a_covariance_goes_with_what_was_converted() -> None:
    matrix = "[[0.01, 0.0004, 0.1], [0.0004, 0.0001, 0.0], [0.1, 0.0, 9.0]]"
    properties = '["potential_temperature", "practical_salinity", "oxygen"]'
    plain = catalogue(
        with_covariance(
            matrix, properties.replace("potential", "conservative").replace("practical", "preformed")
        )
    )
    made = catalogue(HEAT, SALT, STATE, with_covariance(matrix, properties)).sources["NOR"]
    names = ["conservative_temperature", "preformed_salinity", "oxygen", "nitrate"]
    found = made.covariance_of(names)
    scale = np.array([made.properties[n].uncertainty for n in names]) / [0.1, 0.01, 3.0, 0.4]
    expected = plain.sources["NOR"].covariance_of(names) * np.outer(scale, scale)
    np.testing.assert_allclose(found, expected, rtol=1e-9)
    assert found[0, 1] == pytest.approx(0.0004 * scale[0] * scale[1])


def correlations(covariance: NDArray[np.float64]) -> NDArray[np.float64]:
    spread = np.sqrt(np.diag(covariance))
    return np.asarray(covariance / np.outer(spread, spread))


def test_the_covariance_of_a_source() -> None:
    north = catalogue(with_covariance("[[9.0, -0.6], [-0.6, 0.16]]")).sources["NOR"]
    found = north.covariance_of(["nitrate", "phosphate", "oxygen"])
    np.testing.assert_allclose(found, [[0.16, 0, -0.6], [0, 0.0009, 0], [-0.6, 0, 9.0]], rtol=1e-12)
    np.testing.assert_allclose(north.covariance_of(["oxygen"]), [[9.0]])
    assert north.covariance_of([]).shape == (0, 0)
    none = catalogue().sources["NOR"].covariance_of(["oxygen", "nitrate"])
    np.testing.assert_allclose(none, [[9.0, 0], [0, 0.16]])
    with pytest.raises(KeyError):
        north.covariance_of(["silicate"])


def test_rounded_covariances_are_taken_as_correlations() -> None:
    north = catalogue(with_covariance("[[9.1, -0.6], [-0.60001, 0.16]]")).sources["NOR"]
    found = north.covariance_of(["oxygen", "nitrate"])
    assert np.diag(found) == pytest.approx([9.0, 0.16]), "the uncertainties stand"
    assert correlations(found)[0, 1] == pytest.approx(-0.6 / (9.1 * 0.16) ** 0.5, rel=1e-4)
    assert (found == found.T).all()


@pytest.mark.parametrize(
    ("matrix", "sentence"),
    [
        (
            "[[9.0, -0.6], [0.6, 0.16]]",
            "line 16: source 'NOR': found -0.6 and 0.6 as covariance of oxygen and nitrate; expected a symmetric "
            "matrix; make them the same.",
        ),
        *(
            (
                f"[[9.0, {between}], [{between}, 0.16]]",
                "line 16: source 'NOR': found a covariance that is not positive definite: some combination of the "
                "properties would have no spread, or less than none; expected correlations that can hold together; "
                "lower those off the diagonal.",
            )
            for between in (-1.3, 1.2)
        ),
        (
            "[[9.0, 0], [0, 0.25]]",
            "line 16: source 'NOR': found 0.25 as variance of nitrate, whose uncertainty is 0.4; expected 0.16, its "
            "square; correct one of the two.",
        ),
        (
            "[[-9.0, 0], [0, 0.16]]",
            "line 16: source 'NOR': found -9 as variance of oxygen, whose uncertainty is 3; expected 9, its square; "
            "correct one of the two.",
        ),
        (
            "[[9.0, 0], [0]]",
            "line 16: source 'NOR': found a covariance of 2 rows of 1 and 2 numbers; expected 2 rows of 2, one for "
            "each of its properties; correct it.",
        ),
        (
            "[[9.0, 1e30], [1e30, 0.16]]",
            "line 16: found [[9.0, 1e+30], [1e+30, 0.16]] as 'matrix' of source 'NOR', covariance; expected as "
            "many rows of as many numbers, "
            "each a number from -1000000 to 1000000; correct it.",
        ),
    ],
)
def test_covariances_that_cannot_be_used(matrix: str, sentence: str) -> None:
    assert refused(with_covariance(matrix))[0] == sentence


def test_a_covariance_of_what_the_source_does_not_give() -> None:
    for properties in ('["oxygen", "silicate"]', '["oxygen", "oxygen"]'):
        names = properties.strip("[]").replace('"', "")
        assert refused(with_covariance("[[9.0, 0], [0, 0.16]]", properties)) == [
            f"line 15: source 'NOR': found a covariance of {names}; expected each once, and all of them among its "
            f"properties; correct the list."
        ]


@pytest.mark.parametrize(
    ("changes", "sentences"),
    [
        (
            [HEAT, SALT],
            [
                "line 8: source 'NOR': found potential_temperature, no conservative_temperature and no "
                "[catalogue.reference_state]; expected a longitude, latitude and pressure there to convert at; add "
                "it, or give conservative_temperature.",
                "line 8: source 'NOR': found practical_salinity, no preformed_salinity and no "
                "[catalogue.reference_state]; expected a longitude, latitude and pressure there to convert at; add "
                "it, or give preformed_salinity.",
            ],
        ),
        (
            [HEAT, STATE],
            [
                "line 12: source 'NOR': found potential_temperature and no practical_salinity; expected both to make "
                "conservative_temperature of; add it, or give conservative_temperature."
            ],
        ),
        (
            [HEAT, SALT, (STATE[0], STATE[1].replace("40.0", "140.0"))],
            [
                "line 6: found 140.0 as 'latitude' of [catalogue.reference_state]; expected degrees north, from -90 "
                "to 90; correct it."
            ],
        ),
        (
            [HEAT, SALT, (STATE[0], STATE[1].replace("pressure = 2000.0\n", ""))],
            [
                "line 4: found no 'pressure' in [catalogue.reference_state]; expected a pressure in dbar, from 0 to "
                "12000; add it."
            ],
        ),
        (
            [SALT, ("value = 35.0,", "value = 350.0,"), STATE],
            [
                "line 14: source 'NOR': found practical_salinity 350; expected 0 to 42; correct it.",
            ],
        ),
    ],
)
def test_conversions_that_cannot_be_made(changes: list[tuple[str, str]], sentences: list[str]) -> None:
    assert refused(*changes) == sentences


@pytest.mark.parametrize("value", ["nan", "inf", "1e30", "'40'"])
def test_a_reference_state_that_is_no_place(value: str) -> None:
    (told,) = refused(HEAT, SALT, (STATE[0], STATE[1].replace("40.0", value)))
    assert told.endswith(
        "as 'latitude' of [catalogue.reference_state]; expected degrees north, from -90 to 90; correct it."
    )


@pytest.mark.parametrize("value", ["0", "42"])
def test_salinities_at_the_ends_of_the_scale(value: str) -> None:
    made = catalogue(SALT, ("value = 35.0,", f"value = {value},"), STATE).sources["NOR"]
    assert made.properties["preformed_salinity"].uncertainty == pytest.approx(0.01005, rel=1e-2)


def test_two_sources_that_are_the_same_when_converted() -> None:
    """Faults between sources are looked for in what is used."""
    text = TEXT
    south = ("value = -0.5", "value = 34.7", "value = 250.0", "value = 2.2", "value = 32.0")
    north = ("value = 2.0", "value = 35.0", "value = 290.0", "value = 1.0", "value = 14.0")
    for old, new in zip(south, north, strict=True):
        text = text.replace(old, new)
    head, properties, rest = text.partition("properties = [")
    for published, made in (("potential_temperature", HEAT[0]), ("practical_salinity", SALT[0])):
        head = head.replace(made.split(" = {")[0], published)
    with pytest.raises(
        CatalogueProblem, match="the same value of every property in the sources 'NOR' and 'SOU'"
    ):
        parse_catalogue((head + properties + rest).replace(*STATE, 1), NAME)


def test_no_file_can_hold_conversions() -> None:
    with pytest.raises(CatalogueProblem) as refusal:
        parse_catalogue('conversions = ["of my own"]\n' + TEXT, NAME)
    assert str(refusal.value) == (
        f"{NAME}, line 1: found the unknown key 'conversions' in the catalogue; expected one of catalogue, source, "
        "set; correct or remove it."
    )
