"""Carbon in mixtures: carbon-13 through its product with DIC, and calcium carbonate beside respiration."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pytest

from pipeline.mixing import resolve
from pipeline.mixing.advice import problems
from pipeline.mixing.catalogue import parse_catalogue
from pipeline.mixing.determinacy import determinacy
from pipeline.mixing.products import rows_of
from pipeline.mixing.properties import calcium_carbonate_ratios, respiration_ratios
from pipeline.mixing.solver import solve
from pipeline.mixing.weights import mixing_problem
from pipeline.problems import CatalogueProblem
from pipeline.settings import MixingSettings, Settings, TracerSettings
from pipeline.tables import with_columns

from .invented import problem
from .test_analysis import PLACE, samples

if TYPE_CHECKING:
    from pipeline.mixing.entries import Catalogue

NAMES = ("conservative_temperature", "preformed_salinity", "oxygen", "phosphate", "nitrate", "dic", "alkalinity",
         "delta_carbon_13")  # fmt: skip
SOURCES = {
    "NOR": (3.0, 35.10, 280.0, 1.0, 15.0, 2150.0, 2310.0, 1.20),
    "SOU": (-0.5, 34.70, 240.0, 2.2, 31.5, 2260.0, 2365.0, 0.40),
    "MID": (6.0, 34.40, 250.0, 1.6, 23.0, 2100.0, 2280.0, 1.70),
}
SPREAD = (0.1, 0.02, 4.0, 0.05, 0.6, 6.0, 5.0, 0.06)
VALUES = np.array([SOURCES[code] for code in SOURCES])
SETTINGS = Settings(mixing=MixingSettings(members=0))
DIC, DELTA = NAMES.index("dic"), NAMES.index("delta_carbon_13")


def text(*, properties: tuple[str, ...] = NAMES, respiration: str = "non_negative", dissolved: str = "non_negative",
         more: str = "") -> str:  # fmt: skip
    lines = ["[catalogue]", 'title = "Invented"', 'reference = "no real ocean"']
    for code, values in SOURCES.items():
        lines += ["[[source]]", f'code = "{code}"', f'name = "Water {code}"', "[source.properties]"]
        each = zip(NAMES, values, SPREAD, strict=True)
        lines += [f"{name} = {{ value = {value}, uncertainty = {spread} }}" for name, value, spread in each]
    lines += ["[[set]]", 'name = "deep"', f"sources = {[*SOURCES]}", f"properties = {[*properties]}",
              f'respiration = "{respiration}"', f'calcium_carbonate = "{dissolved}"', more]  # fmt: skip
    return "\n".join(lines) + "\n"


def catalogue(**chosen: Any) -> Catalogue:
    return parse_catalogue(text(**chosen), "sources.toml")


def mixture(shares: tuple[float, ...], freed: float = 0.0, dissolved: float = 0.0) -> dict[str, float]:
    """Return a sample by the book: amounts of carbon, and of carbon-13 in it, are added up one by one."""
    mixed = dict(zip(NAMES, np.array(shares) @ VALUES, strict=True))
    parts = [(f * one[DIC], one[DELTA]) for f, one in zip(shares, VALUES, strict=True)]
    parts += [(117.0 * freed, 0.3 - 19.0), (dissolved, 0.3)]
    dic = sum(amount for amount, _ in parts)
    mixed["delta_carbon_13"] = sum(amount * delta for amount, delta in parts) / dic
    mixed["dic"] = dic
    mixed["oxygen"] -= 170.0 * freed
    mixed["phosphate"] += freed
    mixed["nitrate"] += 16.0 * freed
    mixed["alkalinity"] += 2.0 * dissolved - 16.0 * freed
    return {**PLACE, **mixed}


def found(*rows: dict[str, Any], of: Catalogue | None = None, settings: Settings = SETTINGS) -> Any:
    return resolve(samples(*rows), of or catalogue(), settings)


TRUTH = (((0.5, 0.3, 0.2), 0.3, 12.0), ((0.1, 0.85, 0.05), 0.0, 30.0), ((0.2, 0.2, 0.6), 0.8, 0.0))


@pytest.mark.parametrize("members", [0, 20])
@pytest.mark.parametrize("properties", [NAMES, NAMES[::-1]])
def test_planted_shares_respiration_and_dissolution_are_found(
    members: int, properties: tuple[str, ...]
) -> None:
    settings = Settings(mixing=MixingSettings(members=members))
    answer = found(*(mixture(*one) for one in TRUTH), of=catalogue(properties=properties), settings=settings)
    columns = answer.columns
    shares = answer.mixtures.column("share").to_numpy().reshape(-1, 3)
    np.testing.assert_allclose(shares, [one[0] for one in TRUTH], atol=1e-9)
    np.testing.assert_allclose(columns["respiration"], [one[1] for one in TRUTH], atol=1e-9)
    np.testing.assert_allclose(columns["calcium_carbonate"], [one[2] for one in TRUTH], atol=1e-7)
    np.testing.assert_allclose(columns["dic_from_calcium_carbonate"], columns["calcium_carbonate"])
    np.testing.assert_allclose(
        columns["alkalinity_from_calcium_carbonate"], 2.0 * columns["calcium_carbonate"]
    )
    np.testing.assert_allclose(columns["alkalinity_from_respiration"], -16.0 * columns["respiration"])
    np.testing.assert_allclose(columns["dic_from_respiration"], 117.0 * columns["respiration"])
    for name in NAMES:
        np.testing.assert_allclose(columns[f"residual_{name}"], 0.0, atol=1e-8)
    for name in ("respiration", "calcium_carbonate", "dic_from_calcium_carbonate", "dic_from_sources"):
        inside = np.array(columns[name]) > 1e-6
        assert (np.array(columns[f"{name}_uncertainty"])[inside] > 0).all()


def test_carbon_13_is_split_into_sources_respiration_and_dissolution() -> None:
    columns = found(*(mixture(*one) for one in TRUTH)).columns
    came = [mixture(shares)["delta_carbon_13"] for shares, _, _ in TRUTH]
    respired = [mixture(shares, freed)["delta_carbon_13"] for shares, freed, _ in TRUTH]
    whole = [mixture(*one)["delta_carbon_13"] for one in TRUTH]
    np.testing.assert_allclose(columns["delta_carbon_13_from_sources"], came, atol=1e-9)
    np.testing.assert_allclose(
        columns["delta_carbon_13_from_respiration"], np.subtract(respired, came), atol=1e-9
    )
    np.testing.assert_allclose(
        columns["delta_carbon_13_from_calcium_carbonate"], np.subtract(whole, respired), atol=1e-9
    )
    by_phosphate = columns["delta_carbon_13_from_respiration"][2] / 0.8
    assert by_phosphate == pytest.approx(-1.0, abs=0.1), "about the slope on phosphate"


def test_a_set_without_carbon_13_tells_where_it_came_from_all_the_same() -> None:
    of = catalogue(properties=NAMES[:-1])
    columns = found({**mixture(*TRUTH[0]), "delta_carbon_13": None}, of=of).columns
    assert columns["delta_carbon_13_from_sources"][0] == pytest.approx(
        mixture(TRUTH[0][0])["delta_carbon_13"]
    )
    assert "residual_delta_carbon_13" not in columns


def test_mixing_the_ratio_itself_is_biased() -> None:
    """Half of a water with little DIC and half of one with much: the ratio is not half way."""
    light, heavy = (2000.0, 1.8), (2300.0, -0.6)
    dic = 0.5 * (light[0] + heavy[0])
    ratio = 0.5 * (light[0] * light[1] + heavy[0] * heavy[1]) / dic
    linear = solve(problem(np.array([[1.8], [-0.6]]), 0.05), np.array([[ratio]])).shares[0]
    assert linear[0] == pytest.approx(0.5 * light[0] / dic), "a share of the carbon, not of the water"
    assert abs(linear[0] - 0.5) > 0.03
    names = ("dic", "delta_carbon_13")
    rows = rows_of(names, np.array([light, heavy]))
    by_product = solve(problem(rows, np.array([1e6, 1.0])), rows_of(names, np.array([[dic, ratio]]))).shares[
        0
    ]
    assert by_product[0] == pytest.approx(0.5, abs=1e-9)


def test_dissolution_that_the_set_does_not_know_biases_respiration() -> None:
    """Carbon that came of shells is laid to respiration, though carbon-13 says that it was not organic."""
    properties = ("conservative_temperature", "preformed_salinity", "dic", "delta_carbon_13")
    sample = mixture((0.5, 0.3, 0.2), 0.3, 30.0)
    knows = found(sample, of=catalogue(properties=properties))
    assert knows.columns["respiration"][0] == pytest.approx(0.3, abs=1e-6)
    not_knows = found(sample, of=catalogue(properties=properties, dissolved="none"))
    assert abs(not_knows.columns["respiration"][0] - 0.3) > 0.03
    assert "calcium_carbonate" not in not_knows.columns


def test_shells_that_were_made_are_found_where_the_set_allows_it() -> None:
    sample = mixture((0.5, 0.3, 0.2), 0.3, -15.0)
    free = found(sample, of=catalogue(dissolved="free")).columns
    assert free["calcium_carbonate"][0] == pytest.approx(-15.0, abs=1e-7)
    bound = found(*[sample] * 5)
    assert (bound.columns["calcium_carbonate"] == 0).all()
    assert bound.columns["reduced_chi_square"][0] > 0.1
    far = found(*[mixture((0.5, 0.3, 0.2), 0.3, -150.0)] * 5)
    (told,) = [f for f in far.findings if f.check == "outside-mixing-hull"]
    assert "less than no calcium carbonate would have to be dissolved" in told.message


def test_dissolution_alone_needs_no_respiration() -> None:
    of = catalogue(respiration="none")
    columns = found(mixture((0.5, 0.3, 0.2), 0.0, 12.0), of=of).columns
    assert columns["calcium_carbonate"][0] == pytest.approx(12.0, abs=1e-7)
    assert np.isnan(columns["respiration"][0])
    assert np.isnan(columns["dic_from_respiration"][0])
    assert "delta_carbon_13_from_respiration" not in columns
    told = determinacy(of, of.set[0], SETTINGS)
    assert told.respiration_uncertainty is None
    assert told.process_uncertainty("calcium_carbonate") is not None
    assert of.set[0].unknowns == "3 shares and calcium carbonate"


def test_the_weighted_row_holds_both_uncertainties() -> None:
    of = catalogue()
    made = mixing_problem(of, of.set[0], respiration_ratios(TracerSettings()))
    mean_dic, mean_product = VALUES[:, DIC].mean(), (VALUES[:, DIC] * VALUES[:, DELTA]).mean()
    measured = np.hypot(mean_dic * 0.03, mean_product / mean_dic * 4.0)
    of_sources = np.hypot(VALUES[:, DIC] * 0.06, VALUES[:, DELTA] * 6.0)
    expected = np.sqrt(measured**2 + (of_sources**2).mean())
    assert made.uncertainty[DELTA] == pytest.approx(expected, rel=1e-12)
    np.testing.assert_allclose(made.sources[:, DELTA], VALUES[:, DIC] * VALUES[:, DELTA])
    assert made.processes[0, DELTA] == pytest.approx(117.0 * (0.3 - 19.0))
    np.testing.assert_allclose(made.processes[1, [DIC, DIC + 1, DELTA]], [100.0, 200.0, 30.0])
    assert made.signs == ("non_negative", "non_negative")


def test_members_and_first_order_agree() -> None:
    """The standard deviation of 4000 members is known to 1.1 %."""
    row = mixture(*TRUTH[0])  # inside all bounds
    members = found(row, settings=Settings(mixing=MixingSettings(members=4000)))
    first = found(row)
    for name in (
        "dic_from_sources_uncertainty",
        "alkalinity_from_sources_uncertainty",
        "delta_carbon_13_from_sources_uncertainty",
    ):
        assert members.columns[name][0] == pytest.approx(first.columns[name][0], rel=0.06), name
    # The first order has the joined uncertainty of the weights, the members those of this sample's sources.
    for name in ("respiration_uncertainty", "calcium_carbonate_uncertainty"):
        assert 0.4 < members.columns[name][0] / first.columns[name][0] < 1.1, name


def test_what_is_not_measured_takes_the_product_with_it_and_nothing_else() -> None:
    row = mixture(*TRUTH[0])
    without = catalogue(properties=NAMES[:-1])
    for missing in ("dic", "delta_carbon_13"):
        columns = found({**row, missing: None}).columns
        assert columns["respiration"][0] == pytest.approx(0.3, abs=1e-6)
        assert columns["calcium_carbonate"][0] == pytest.approx(12.0, abs=1e-5)
        assert np.isnan(columns["residual_delta_carbon_13"][0])
    off = {**row, "oxygen": row["oxygen"] + 3.0}
    with_it = found({**off, "delta_carbon_13": None}).columns
    alone = found(off, of=without).columns
    assert with_it["respiration"][0] == alone["respiration"][0]
    assert with_it["reduced_chi_square"][0] == alone["reduced_chi_square"][0]


def test_a_residual_is_one_of_the_ratio() -> None:
    row = mixture(*TRUTH[0])
    off = found({**row, "delta_carbon_13": row["delta_carbon_13"] + 0.5}).columns["residual_delta_carbon_13"][
        0
    ]
    assert -0.5 < off < -0.3, "fitted less observed, in per mil"


@pytest.mark.parametrize("how", ["variance", "given"])
def test_published_weights_find_the_same(how: str) -> None:
    given = f"given_weights = {{ {', '.join(f'{name} = 5.0' for name in NAMES)} }}" if how == "given" else ""
    of = catalogue(more=f'weights = "{how}"\nmass = "weighted"\n{given}')
    columns = found(mixture(*TRUTH[0]), of=of).columns
    assert columns["respiration"][0] == pytest.approx(0.3, abs=1e-7)
    assert columns["calcium_carbonate"][0] == pytest.approx(12.0, abs=1e-5)


@pytest.mark.parametrize(
    ("chosen", "sentence"),
    [
        (
            {"properties": tuple(name for name in NAMES if name != "dic")},
            "set 'deep': found delta_carbon_13 without dic; expected both, since a mixture has the mean of their"
            " product and not that of the ratio; add dic, to the sources too, or take delta_carbon_13 away.",
        ),
        (
            {"properties": NAMES[:5]},
            "set 'deep': found calcium_carbonate = 'non_negative' and no property that it changes; expected alkalinity"
            " or dic among them; add one, or set calcium_carbonate = 'none'.",
        ),
        (
            {"dissolved": "sometimes"},
            "found 'sometimes' as 'calcium_carbonate' of set 'deep'; expected \"none\", \"non_negative\" or \"free\"",
        ),
        (
            {"properties": ("dic", "delta_carbon_13", "oxygen")},
            "found 5 unknowns (3 shares, respiration and calcium carbonate) for 4 equations",
        ),
    ],
)  # fmt: skip
def test_what_cannot_be_solved_is_refused_in_a_sentence(chosen: dict[str, Any], sentence: str) -> None:
    with pytest.raises(CatalogueProblem) as refused:
        catalogue(**chosen)
    assert sentence in str(refused.value)
    assert len(str(refused.value).splitlines()) == 1


def test_a_source_of_organic_carbon_is_refused() -> None:
    with pytest.raises(CatalogueProblem, match=r"source 'NOR': found delta_carbon_13 -22; expected -5 to 5"):
        parse_catalogue(text().replace("value = 1.2,", "value = -22.0,"), "sources.toml")


def test_leaving_out_dic_leaves_out_carbon_13() -> None:
    of = catalogue(dissolved="none")
    told = determinacy(of, of.set[0], SETTINGS)
    worth = {one.name: one for one in told.worth}
    assert set(worth) == set(NAMES)
    neither = of.set[0].model_copy(update={"properties": (*NAMES[:5], "alkalinity")})
    assert worth["dic"].share_uncertainty == pytest.approx(
        determinacy(of, neither, SETTINGS).share_uncertainty.max(), rel=1e-12
    )
    pair = of.set[0].model_copy(update={"properties": ("dic", "delta_carbon_13"), "respiration": "none"})
    assert [one.name for one in determinacy(of, pair, SETTINGS).worth] == ["delta_carbon_13"]


def test_carbon_13_is_advised_only_beside_dic() -> None:
    bare = catalogue(
        properties=("oxygen", "preformed_salinity", "nitrate"), respiration="none", dissolved="none"
    )
    for settings in (
        SETTINGS,
        Settings(mixing=MixingSettings(uncertainty={"oxygen": 90.0, "nitrate": 30.0})),
    ):
        for sentence in problems(determinacy(bare, bare.set[0], settings), bare, settings):
            assert "delta_carbon_13" not in sentence


@pytest.mark.parametrize("name", ["dic", "delta_carbon_13"])
@pytest.mark.parametrize("value", [-22.0, 0.0, 0.0021, 1e30, 1e300, -1e300])
def test_no_value_of_carbon_raises_or_warns(name: str, value: float) -> None:
    row = mixture(*TRUTH[0])
    answer = found({**row, name: value}, {**row, "dic": value, "delta_carbon_13": value}, row)
    assert answer.columns["respiration"][2] == pytest.approx(0.3, abs=1e-9)
    assert answer.columns["tag"][0] != answer.columns["tag"][2] or value == 0.0


def test_ratios_follow_the_settings() -> None:
    carter = respiration_ratios(TracerSettings(potential_alkalinity="carter_2014"))
    assert carter["alkalinity"] == pytest.approx(-1.26 * 16)
    lighter = TracerSettings(photosynthetic_fractionation=-25.0, mean_delta_carbon_13=0.5)
    assert respiration_ratios(lighter)["delta_carbon_13"] == pytest.approx(117.0 * -24.5)
    assert calcium_carbonate_ratios(lighter) == {"dic": 1.0, "alkalinity": 2.0, "delta_carbon_13": 0.5}


def test_all_columns_can_be_written() -> None:
    table = samples(mixture(*TRUTH[0]), {**mixture(*TRUTH[0]), "pressure": np.nan})
    answer = resolve(table, catalogue(), Settings())
    written = with_columns(table, answer.columns)
    for name in ("calcium_carbonate", "alkalinity_from_sources", "delta_carbon_13_from_calcium_carbonate"):
        assert written.schema.field(name).metadata[b"units"] in {b"umol kg-1", b"1e-3"}


def test_uncertainties_are_those_of_oceans_drawn_anew() -> None:
    """800 oceans, solved one by one with the weights of the catalogue: a standard deviation is known to 2.5 %."""
    random = np.random.default_rng(11)
    shares, freed, dissolved = TRUTH[0]
    row = mixture(shares, freed, dissolved)
    listed = np.array([row[name] for name in NAMES])
    of = catalogue(respiration="free", dissolved="free")
    settings = Settings(mixing=MixingSettings(members=2000))
    told = found(row, of=of, settings=settings).columns
    made = mixing_problem(of, of.set[0], respiration_ratios(TracerSettings()))
    measured = np.array([0.002, 0.002, 2.11, 0.0356, 0.527, 4.0, 4.0, 0.03])  # the registry's, at the sample
    draws = []
    for _ in range(800):
        sources = rows_of(NAMES, VALUES + np.array(SPREAD) * random.normal(size=VALUES.shape))
        drawn = problem(
            sources, made.uncertainty, weight=made.weight, processes=made.processes, signs=("free", "free")
        )
        sample = rows_of(NAMES, listed + measured * random.normal(size=len(NAMES)))
        solved = solve(drawn, sample[None])
        mixed = solved.shares[0] @ sources
        respired, ratio = solved.processes[0], mixed[DELTA] / mixed[DIC]
        after = (mixed[DELTA] + respired[0] * made.processes[0, DELTA]) / (mixed[DIC] + 117.0 * respired[0])
        draws.append((respired[0], 100.0 * respired[1], ratio, after - ratio))
    names = (
        "respiration",
        "calcium_carbonate",
        "delta_carbon_13_from_sources",
        "delta_carbon_13_from_respiration",
    )
    for name, spread in zip(names, np.std(draws, axis=0), strict=True):
        assert told[f"{name}_uncertainty"][0] == pytest.approx(spread, rel=0.1), name
