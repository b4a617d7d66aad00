from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
import pytest

from pipeline.mixing.advice import TOO_UNCERTAIN, problems
from pipeline.mixing.catalogue import parse_catalogue, read_catalogue
from pipeline.mixing.determinacy import determinacy, propagate
from pipeline.mixing.problem import weighted_system
from pipeline.mixing.properties import ratios_of, respiration_ratios
from pipeline.mixing.weights import measurement_uncertainty, mixing_problem
from pipeline.settings import Settings

from .catalogues import NAME, catalogue

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.mixing.determinacy import Determinacy
    from pipeline.mixing.entries import Catalogue, SourceSet

    FloatArray = NDArray[np.float64]

SETTINGS = Settings()
INVENTED = read_catalogue(Path(__file__).parents[2] / "fixtures" / "sources.toml")

_SOURCE = """
[[source]]
code = "{code}"
name = "Invented water"
[source.properties]
conservative_temperature = {{ value = {heat}, uncertainty = 0.1 }}
preformed_salinity = {{ value = {salt}, uncertainty = 0.01 }}
oxygen = {{ value = {oxygen}, uncertainty = 3.0 }}
phosphate = {{ value = {phosphate}, uncertainty = 0.03 }}
silicate = {{ value = {silicate}, uncertainty = 1.0 }}
"""
_HEAD = '[catalogue]\ntitle = "Invented"\nreference = "no real ocean"\n'
_SET = """
[[set]]
name = "deep"
sources = {codes}
properties = ["conservative_temperature", "preformed_salinity", "oxygen", "phosphate"]
respiration = "{respiration}"
{more}
"""
NORTH, SOUTH, WARM = (
    (2.0, 35.0, 290.0, 1.0, 12.0),
    (-0.5, 34.7, 250.0, 2.2, 90.0),
    (12.0, 35.4, 230.0, 0.6, 4.0),
)


def made_of(respiration: str = "none", more: str = "", **waters: tuple[float, ...]) -> Catalogue:
    """Return a catalogue of one set of these waters: temperature, salinity, oxygen, phosphate, silicate."""
    names = ("heat", "salt", "oxygen", "phosphate", "silicate")
    sources = [
        _SOURCE.format(code=code, **dict(zip(names, values, strict=True))) for code, values in waters.items()
    ]
    codes = "[" + ", ".join(f'"{code}"' for code in waters) + "]"
    return parse_catalogue(
        _HEAD + "".join(sources) + _SET.format(codes=codes, respiration=respiration, more=more), NAME
    )


def told_of(of: Catalogue, *properties: str, settings: Settings = SETTINGS) -> Determinacy:
    (chosen,) = of.set
    update = {"properties": properties} if properties else {}
    return determinacy(of, chosen.model_copy(update=update), settings)


def said_of(of: Catalogue, *properties: str, settings: Settings = SETTINGS) -> list[str]:
    return problems(told_of(of, *properties, settings=settings), of, settings)


def thrown(of: Catalogue, chosen: SourceSet, n: int = 2_500) -> FloatArray:
    """Return the unknowns found (n, n_unknown) when sources and measurement of the equal mixture are thrown anew.

    The slow obvious way: least squares without bounds, the last share one less the others.
    """
    rng = np.random.default_rng(7)
    names = chosen.properties
    values = np.array([[of.sources[c].properties[p].value for p in names] for c in chosen.sources])
    n_source = len(values)
    sample = values.mean(axis=0)
    measured = measurement_uncertainty(names, sample)
    ratios = ratios_of(names, respiration_ratios(SETTINGS.tracers, chosen.silicate_per_phosphate))
    problem = mixing_problem(of, chosen, {})
    found = []
    for _ in range(n):
        perturbed = np.array(
            [
                rng.multivariate_normal(row, of.sources[code].covariance_of(names))
                for row, code in zip(values, chosen.sources, strict=True)
            ]
        )
        observed = sample + measured * rng.standard_normal(len(names))
        columns = list(perturbed[:-1] - perturbed[-1])
        if chosen.respiration != "none":
            columns.append(np.array(ratios))
        A = np.array(columns).T * problem.weight[:, None]
        x, *_ = np.linalg.lstsq(A, (observed - perturbed[-1]) * problem.weight, rcond=None)
        shares = np.append(x[: n_source - 1], 1 - x[: n_source - 1].sum())
        found.append(np.concatenate([shares, x[n_source - 1 :]]))
    return np.array(found)


@pytest.mark.parametrize(
    "of",
    [
        INVENTED,
        made_of(NOR=NORTH, SOU=SOUTH, WAR=WARM),
        catalogue(
            (
                "nitrate = { value = 14.0, uncertainty = 0.4 }\n",
                "nitrate = { value = 14.0, uncertainty = 0.4 }\n[source.covariance]\n"
                'properties = ["oxygen", "nitrate"]\nmatrix = [[9.0, -1.1], [-1.1, 0.16]]\n',
            )
        ),
    ],
    ids=["invented ocean", "three waters", "covariance"],
)
def test_uncertainties_are_those_of_sources_and_samples_thrown_anew(of: Catalogue) -> None:
    (chosen,) = of.set
    told = told_of(of)
    found = thrown(of, chosen)
    np.testing.assert_allclose(told.propagation.unknown, found.std(axis=0), rtol=0.07)
    for i in range(len(chosen.sources)):
        for j in range(i):
            moved = (found[:, i] - found[:, j]) / 2
            assert told.propagation.exchange[i, j] == pytest.approx(moved.std(), rel=0.07)
    assert (told.propagation.exchange == told.propagation.exchange.T).all()


def test_a_covariance_that_goes_with_the_mixing_line_costs_certainty() -> None:
    """Two sources on a line in two properties: errors along it look like a change of share, others do not."""
    nitrate = "nitrate = { value = 14.0, uncertainty = 0.4 }\n"
    spread = []
    for between in (-1.1, 0.0, 1.1):  # oxygen falls and nitrate rises from the north to the south
        text = (
            f"{nitrate}[source.covariance]\nproperties = ['oxygen', 'nitrate']\n"
            f"matrix = [[9.0, {between}], [{between}, 0.16]]\n"
        )
        of = catalogue((nitrate, text), ('respiration = "non_negative"\n', ""))
        spread.append(told_of(of, "oxygen", "nitrate").share_uncertainty[0])
    assert spread[0] > 1.02 * spread[1] > 1.04 * spread[2]


def test_two_sources_and_one_property_by_hand() -> None:
    of = made_of(NOR=NORTH, SOU=SOUTH)
    told = told_of(of, "oxygen")
    measured = 0.01 * 270.0
    expected = (measured**2 + (3.0**2 + 3.0**2) / 4) ** 0.5 / (290.0 - 250.0)
    np.testing.assert_allclose(told.share_uncertainty, expected, rtol=1e-12)
    np.testing.assert_allclose(told.propagation.exchange, [[0, expected], [expected, 0]], rtol=1e-12)
    np.testing.assert_allclose(told.propagation.alone, told.propagation.exchange, rtol=1e-12)
    assert (told.n_unknown, told.n_free, told.propagation.rank, told.condition_number) == (2, 1, 1, 1.0)
    assert told.worth == (), "nothing is left without the only property"


def test_a_measurement_less_certain_by_the_settings_makes_the_shares_less_certain() -> None:
    of = made_of(NOR=NORTH, SOU=SOUTH)
    worse = Settings.model_validate({"mixing": {"uncertainty": {"oxygen": 20.0}}})
    expected = (20.0**2 + 3.0**2 / 2) ** 0.5 / 40.0
    np.testing.assert_allclose(told_of(of, "oxygen", settings=worse).share_uncertainty, expected, rtol=1e-12)


def test_nothing_depends_on_the_unit_of_a_property_or_the_order_of_the_sources() -> None:
    rng = np.random.default_rng(3)
    A = rng.normal(size=(6, 5))
    summed = np.array([True] * 4 + [False])
    one = propagate(A, summed, np.eye(6), 4)
    order = [2, 0, 3, 1]
    other = propagate(A[:, [*order, 4]], summed, np.eye(6), 4)
    np.testing.assert_allclose(other.unknown, one.unknown[[*order, 4]], rtol=1e-9)
    np.testing.assert_allclose(other.exchange, one.exchange[np.ix_(order, order)], rtol=1e-9)
    np.testing.assert_allclose(other.alone, one.alone[np.ix_(order, order)], rtol=1e-9)
    # Held unknowns can only help.
    assert (one.alone <= one.exchange * (1 + 1e-9)).all()


def test_errors_of_all_unknowns_go_together_as_the_covariance_says() -> None:
    A = np.array([[1.0, 0.0, -1.0], [0.0, 1.0, -1.0]])
    told = propagate(A, np.ones(3, dtype=bool), np.diag([1.0, 4.0]), 3)
    # With f3 = 1 - f1 - f2 the system is [[2, 1], [1, 2]] (f1, f2) + constant.
    inverse = np.linalg.inv(np.array([[2.0, 1.0], [1.0, 2.0]]))
    covariance = inverse @ np.diag([1.0, 4.0]) @ inverse.T
    np.testing.assert_allclose(told.unknown[:2] ** 2, np.diag(covariance), rtol=1e-12)
    assert told.company[0, 1] == pytest.approx(covariance[0, 1] / covariance[0, 0])
    np.testing.assert_allclose(told.company.sum(axis=1), 0, atol=1e-12)


def test_the_published_practice_has_its_own_uncertainties() -> None:
    """With the published weights the shares are not the most likely ones, so they cannot be more certain."""
    best = told_of(made_of(NOR=NORTH, SOU=SOUTH, WAR=WARM))
    weighted = told_of(
        made_of(more='weights = "variance"\nmass = "weighted"', NOR=NORTH, SOU=SOUTH, WAR=WARM)
    )
    assert weighted.n_free == 3
    assert best.n_free == 2
    assert weighted.propagation.rank == 3
    assert (weighted.share_uncertainty >= best.share_uncertainty * 0.999).all()
    assert np.isfinite(weighted.condition_number)


def test_the_weight_of_the_sum_makes_no_set_undetermined() -> None:
    exact = told_of(made_of(NOR=NORTH, SOU=SOUTH, WAR=WARM))
    for mass_weight in ("1e-2", "50.0", "1e6"):
        of = made_of(more=f'mass = "weighted"\nmass_weight = {mass_weight}', NOR=NORTH, SOU=SOUTH, WAR=WARM)
        assert told_of(of).condition_number == pytest.approx(exact.condition_number, rel=1e-6)
        assert said_of(of) == []


def test_the_condition_number_is_the_one_that_samples_are_left_unsolved_by() -> None:
    told = told_of(INVENTED)
    ratios = respiration_ratios(SETTINGS.tracers)
    system = weighted_system(mixing_problem(INVENTED, INVENTED.set[0], ratios), np.arange(6))
    assert told.condition_number == pytest.approx(system.condition_number, rel=1e-12)


def test_what_each_property_tells_is_what_is_lost_without_it() -> None:
    told = told_of(INVENTED)
    names = INVENTED.set[0].properties
    assert [worth.name for worth in told.worth] == list(names)
    for worth in told.worth:
        without = told_of(INVENTED, *(name for name in names if name != worth.name))
        assert worth.share_uncertainty == pytest.approx(without.share_uncertainty.max())
        assert worth.condition_number == pytest.approx(without.condition_number)


def test_the_invented_ocean_is_determined() -> None:
    assert said_of(INVENTED) == []


def test_a_pair_too_alike_is_told_with_what_would_help() -> None:
    near = (1.9, 34.98, 287.5, 1.04, 24.0)
    of = made_of(NOR=NORTH, NOE=near, SOU=SOUTH)
    reached = told_of(of).propagation.exchange[0, 1]
    better = told_of(of, *of.set[0].properties, "silicate").propagation.exchange[0, 1]
    assert TOO_UNCERTAIN < reached < 1
    assert said_of(of) == [
        f"NOR and NOE can be told apart only to {reached:.2f} of the sample with these properties and uncertainties;"
        f" add silicate (then {better:.2f}), or join them."
    ]
    assert said_of(of, *of.set[0].properties, "silicate") == []


def test_a_property_that_does_not_differ_is_not_advised() -> None:
    near = (1.9, 34.98, 287.5, 1.04, 12.0)
    of = made_of(NOR=NORTH, NOE=near, SOU=SOUTH)
    (said,) = said_of(of, *of.set[0].properties, "silicate")
    assert said.endswith(
        "with these properties and uncertainties; add a property in which they differ, or join them."
    )


def test_sources_that_no_property_in_use_tells_apart() -> None:
    of = made_of(NOR=NORTH, NOE=(2.5, *NORTH[1:4], 30.0), SOU=SOUTH)
    (said, unsolved) = said_of(of, "oxygen", "phosphate")
    assert said.startswith("none of these properties tells NOR from NOE; add silicate (then ")
    assert unsolved == (
        "the condition number of the weighted system is infinite, above the 1000 of the settings, so that every sample "
        "would be left undetermined; add properties or take sources away."
    )


def test_a_source_that_is_a_mixture_of_others_is_told_as_such() -> None:
    half = tuple((a + b) / 2 for a, b in zip(NORTH, SOUTH, strict=True))
    odd = (*half[:4], half[4] + 60.0)
    of = made_of(NOR=NORTH, SOU=SOUTH, HAL=odd)
    told = told_of(of)
    assert (told.propagation.alone < TOO_UNCERTAIN).all(), "no two of them are alike"
    assert told.propagation.rank == 1
    said, unsolved = problems(told, of, SETTINGS)
    assert said.startswith(
        "the shares of NOR, SOU and HAL are not known at all, since HAL can look like 0.50 NOR and 0.50 SOU; add "
    )
    assert "add silicate (then 0." in said
    assert unsolved.startswith("the condition number of the weighted system is infinite")


def test_what_stays_uncertain_when_a_pair_is_joined_has_reasons_of_its_own() -> None:
    half = tuple((a + b) / 2 for a, b in zip(SOUTH, WARM, strict=True))
    of = made_of(
        NOR=NORTH,
        NOE=(2.01, 35.0, 290.2, 1.0, 24.0),
        SOU=SOUTH,
        WAR=WARM,
        HAL=(half[0] + 0.05, *half[1:4], 90.0),
    )
    joined = told_of(made_of(NOR=NORTH, SOU=SOUTH, WAR=WARM, HAL=(half[0] + 0.05, *half[1:4], 90.0)))
    pair, others, *_ = said_of(of)
    assert pair.startswith(
        "NOR and NOE cannot be told apart with these properties and uncertainties: share moved from"
    )
    assert others.startswith(
        "once those alike are joined, the shares of SOU, WAR and HAL are not known at all, since "
    )
    assert (joined.share_uncertainty[1:] > 1).all()
    assert "NOE" not in others
    assert " can look like 0.50 SOU and 0.50 WAR; add silicate" in others


def test_a_share_known_only_vaguely_names_what_it_can_be_mistaken_for() -> None:
    (said,) = said_of(
        INVENTED, "conservative_temperature", "preformed_salinity", "oxygen", "phosphate", "nitrate"
    )
    assert said.startswith(
        "the shares of BOT and DEP are known only to 0.36 and 0.81 of the sample, since DEP can"
    )
    assert said.endswith("respiration aside; add silicate (then 0.03), or take one of these sources away.")


def test_more_unknowns_than_equations() -> None:
    (said,) = said_of(INVENTED, "oxygen", "phosphate")
    assert said == (
        "there are 6 unknowns (5 shares and respiration) for 3 equations (2 properties and the sum of the shares), so"
        " that no sample can be solved; add properties or take sources away."
    )
    assert np.isinf(told_of(INVENTED, "oxygen").share_uncertainty).all()


def test_respiration_that_no_property_tells() -> None:
    of = made_of("non_negative", NOR=NORTH, SOU=SOUTH)
    (said,) = said_of(of, "conservative_temperature", "preformed_salinity")
    assert said.startswith("respiration changes none of these properties")
    told = told_of(of, "conservative_temperature", "preformed_salinity")
    assert told.respiration_uncertainty == np.inf
    assert np.isfinite(told.share_uncertainty).all(), "the shares are known all the same"
    assert told.condition_number == np.inf


def test_a_lower_limit_of_the_settings_is_kept_to() -> None:
    strict = Settings.model_validate({"mixing": {"condition_limit": 5.0}})
    (said,) = said_of(INVENTED, settings=strict)
    assert said.startswith("the condition number of the weighted system is 9, above the 5 of the settings")


def test_a_single_source_has_nothing_to_be_told_from() -> None:
    of = made_of(NOR=NORTH)
    told = told_of(of)
    assert told.share_uncertainty.tolist() == [0.0]
    assert told.condition_number == 1.0
    assert problems(told, of, SETTINGS) == []


def test_properties_of_which_none_differs_tell_nothing() -> None:
    south = (-0.5, 35.0, 290.0, 1.0, 90.0)
    for more in ("", 'mass = "weighted"', 'mass = "weighted"\nmass_weight = 9.0'):
        of = made_of(more=more, NOR=NORTH, SOU=south)
        told = told_of(of, "preformed_salinity", "oxygen")
        assert np.isinf(told.share_uncertainty).all()
        assert told.condition_number == np.inf
        assert problems(told, of, SETTINGS)[0].startswith("none of these properties tells NOR from SOU; add ")
        assert [np.isinf(worth.share_uncertainty) for worth in told_of(of).worth] == [
            True,
            False,
            False,
            False,
        ]
