"""The components of carbon-13: what they add up to, how certain they are, and what bad input does."""

from __future__ import annotations

import datetime as dt
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.findings import Severity
from pipeline.problems import SettingsProblem
from pipeline.process import process_cruise
from pipeline.settings import Settings, TracerSettings, read_settings
from pipeline.tracers.isotope_components import components
from pipeline.tracers.isotopes import (
    DIC_ZHANG_1995,
    EQUILIBRIA,
    EquilibriumForm,
    Fractions,
    atmosphere_at,
    biological_line,
    dic_enrichment_zhang_1995,
    enriched,
)
from pipeline.variables import ISOTOPES
from tests.invented import EXPOCODE, bottle_file, read

from .carbon_cases import rows

if TYPE_CHECKING:
    from pathlib import Path

    from pipeline.tables import FloatArray
    from pipeline.tracers.isotope_components import Components

quick = settings(deadline=None, derandomize=True, max_examples=50)
PARTS = ("equilibrium", "biological", "air_sea", "disequilibrium")
WATER: dict[str, Any] = {
    "delta_carbon_13": 0.9, "phosphate": 1.4, "potential_temperature": 2.4, "date": dt.date(2010, 6, 1),
}  # fmt: skip
CARBON = {
    "aqueous_co2_fraction": 0.009, "bicarbonate_fraction": 0.944, "carbonate_fraction": 0.047,
    "aqueous_co2_fraction_uncertainty": 0.0005, "carbonate_fraction_uncertainty": 0.001,
}  # fmt: skip
ANYTHING = st.floats(allow_nan=True, allow_infinity=True)


def found(*samples: dict[str, Any], carbon: dict[str, float] | None = None, **chosen: Any) -> Components:
    each = {
        name: np.full(len(samples), value) for name, value in (CARBON if carbon is None else carbon).items()
    }
    return components(rows(samples), each, TracerSettings.model_validate(chosen))


def column(of: Components, part: str) -> FloatArray:
    return of.columns[f"delta_carbon_13_{part}"]


def parts(*samples: dict[str, Any], **chosen: Any) -> dict[str, float]:
    return {part: float(column(found(*samples, **chosen), part)[0]) for part in PARTS}


def test_three_components_add_up_to_what_was_measured() -> None:
    part = parts(WATER)
    of_equilibrium = part["equilibrium"] - part["biological"]
    assert part["biological"] + of_equilibrium + part["disequilibrium"] == pytest.approx(0.9, abs=1e-14)
    assert part["biological"] + part["air_sea"] == pytest.approx(0.9, abs=1e-14)


def test_equilibrium_is_reached_by_multiplying_alphas() -> None:
    enrichment = 0.014 * 2.4 * 0.047 - 0.105 * 2.4 + 10.53
    alpha = 1.0 + enrichment / 1000.0
    expected = 1000.0 * (alpha * (1.0 - 8.3 / 1000.0) - 1.0)
    assert parts(WATER)["equilibrium"] == pytest.approx(expected, abs=1e-12)
    assert float(enriched(np.array(-8.3), np.array(0.0))) == -8.3


def test_water_counts_at_its_temperature_at_the_surface() -> None:
    deep = {**WATER, "temperature": 2.9, "pressure": 5000.0}
    assert parts(deep)["equilibrium"] == parts(WATER)["equilibrium"]
    warmer = parts({**WATER, "potential_temperature": 3.4})["equilibrium"]
    assert warmer - parts(WATER)["equilibrium"] == pytest.approx(-0.105 * (1 - 0.0083), abs=1e-3)


def test_the_air_is_that_of_the_year() -> None:
    by_year = {1990: -7.8, 2010: -8.3}
    air = atmosphere_at(np.array([1950.0, 1990.0, 2000.0, 2010.0, 2030.0, np.nan]), by_year)
    np.testing.assert_allclose(air, [-7.8, -7.8, -8.05, -8.3, -8.3, np.nan])
    np.testing.assert_array_equal(atmosphere_at(np.array([1950.0, np.nan]), -8.5), -8.5)
    early = {**WATER, "date": dt.date(1990, 12, 31)}
    assert parts(WATER)["equilibrium"] - parts(early)["equilibrium"] == pytest.approx(-0.5, abs=0.01)
    assert np.isnan(parts({**WATER, "date": None})["equilibrium"])
    assert np.isfinite(parts({**WATER, "date": None}, atmosphere_delta_carbon_13=-8.5)["equilibrium"])


def test_years_beyond_those_of_the_air_are_told_with_how_many() -> None:
    late = {**WATER, "date": dt.date(2031, 1, 1)}
    (told,) = [f for f in found(WATER, late, late).findings if f.check == "isotope-atmosphere"]
    assert (told.severity, told.count) == (Severity.NOTE, 2)
    assert told.message.startswith(
        "2 of 3 samples with a DELC13 are of 2031, beyond the years that the settings"
    )
    assert not [
        f for f in found(late, atmosphere_delta_carbon_13=-8.5).findings if f.check == "isotope-atmosphere"
    ]


@pytest.mark.parametrize(
    ("written", "words"),
    [
        (
            "8.5",
            "'tracers.atmosphere_delta_carbon_13' is 8.5; expected per mil from -20 to 0: one number for all years, or"
            " numbers by year from 1800 to 2100, such as {1972 = -7.3}, which are added to those that stand there;",
        ),
        ('"thin"', "is 'thin'; expected per mil from -20 to 0"),
        ("{1990 = -7.8, 2010 = 8.3}", "'2010': 8.3}; expected per mil from -20 to 0"),
        ("{14 = -8.4}", "is {'14': -8.4}; expected .* by year from 1800 to 2100"),
        ("{1799 = -6.5}", "expected .* by year from 1800 to 2100"),
        ("{20140 = -8.4}", "expected .* by year from 1800 to 2100"),
        ("{" + "9" * 5000 + " = -8.4}", "expected .* by year from 1800 to 2100"),
    ],
)
def test_an_atmosphere_that_is_none_is_refused_in_words(written: str, words: str, tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_text(f"[tracers]\natmosphere_delta_carbon_13 = {written}\n")
    with pytest.raises(SettingsProblem, match=words):
        read_settings(path, {})


def test_a_year_that_is_given_is_added_to_those_that_stand_there(tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_text("[tracers]\natmosphere_delta_carbon_13 = {1972 = -7.3}\n")
    chosen = read_settings(path, {}).tracers
    assert chosen.atmosphere_delta_carbon_13 == {1972: -7.3, 1990: -7.8, 2010: -8.3, 2020: -8.5}
    by_year: dict[str, Any] = {"atmosphere_delta_carbon_13": {1972: -7.3}}
    old, recent, late = ({**WATER, "date": dt.date(year, 6, 1)} for year in (1972, 2010, 2035))
    gone = parts(recent)["equilibrium"] - parts(old, **by_year)["equilibrium"]
    assert gone == pytest.approx(-1.0, abs=0.02)
    assert parts(recent, **by_year) == parts(recent)
    (told,) = [f for f in found(old, late, **by_year).findings if f.check == "isotope-atmosphere"]
    assert told.count == 1
    assert "expected 1972 to 2020; the nearest year stands for them;" in told.message
    assert told.message.endswith("atmosphere_delta_carbon_13 = {2035 = ...}, which is added to those.")


def test_one_number_for_all_years_stays_one(tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_text("[tracers]\natmosphere_delta_carbon_13 = -8.5\n")
    chosen = read_settings(path, {})
    assert chosen.tracers.atmosphere_delta_carbon_13 == -8.5
    again = Settings.model_validate(chosen.model_dump())
    assert again.sha256 == chosen.sha256
    assert Settings.model_validate(Settings().model_dump()).sha256 == Settings().sha256


def test_the_slope_is_computed_and_is_about_that_of_the_literature() -> None:
    line = biological_line(TracerSettings())
    assert line.slope == -19.0 / 2200.0 * 117.0
    assert line.slope == pytest.approx(-1.1, abs=0.1)
    assert biological_line(TracerSettings(stoichiometry="redfield_1963")).slope == -19.0 / 2200.0 * 106.0
    printed = biological_line(TracerSettings(biological_slope="lynch_stieglitz_1995"))
    assert printed.slope == -1.1
    assert printed.constant == pytest.approx(2.7, abs=1e-12)
    assert line.words.startswith("2.503 -1.0105 PO4 per mil; slope -19 per mil x 117 C:P / 2200 umol kg-1")


@pytest.mark.parametrize("slope", ["stoichiometry", "broecker_maier_reimer_1992", "lynch_stieglitz_1995"])
def test_whatever_the_slope_the_mean_ocean_stays_where_it_is(slope: str) -> None:
    mean = {**WATER, "phosphate": 2.2, "delta_carbon_13": 0.28}
    assert parts(mean, biological_slope=slope)["air_sea"] == pytest.approx(0.0, abs=1e-12)
    other = parts(mean, biological_slope=slope, biological_constant="charles_1993")
    assert other["air_sea"] == pytest.approx(-0.05, abs=1e-12)


def test_respiration_moves_a_sample_along_the_slope() -> None:
    """DIC of the mean ocean, and carbon that is lighter than it by the fractionation."""
    chosen = TracerSettings()
    dic, delta, freed = 2200.0, 0.28, 1e-6
    after = (dic * delta + 117.0 * freed * (delta + chosen.photosynthetic_fractionation)) / (
        dic + 117.0 * freed
    )
    assert (after - delta) / freed == pytest.approx(biological_line(chosen).slope, rel=1e-6)


@pytest.mark.parametrize("form", list(EquilibriumForm))
def test_uncertainties_are_the_spread_of_perturbed_samples(form: EquilibriumForm) -> None:
    """Of 40000 draws: their standard deviation is known to 0.35 %."""
    random = np.random.default_rng(7)
    n = 40_000
    temperature = 21.0 + 0.002 * random.normal(size=n)
    carbonate, aqueous = 0.12 + 0.004 * random.normal(size=n), 0.006 + 0.0005 * random.normal(size=n)
    of_one = Fractions(*(np.array([v]) for v in (0.006, 0.874, 0.12, 0.0005, 0.004)))
    value, uncertainty = EQUILIBRIA[form](np.array([21.0]), of_one, 0.002)

    def drawn(value: float, of: float) -> FloatArray:
        return value + of * random.normal(size=n)

    if form is EquilibriumForm.ZHANG_1995_SPECIES:
        lines = ((-1.31, 0.06, 0.0049, 0.003), (10.78, 0.04, -0.1141, 0.0028), (7.22, 0.46, -0.052, 0.03))
        each = [drawn(a, u) + drawn(b, v) * temperature for a, u, b, v in lines]
        draws = aqueous * each[0] + (1.0 - aqueous - carbonate) * each[1] + carbonate * each[2]
    else:
        slope, part = (-0.105, 0.014) if form is EquilibriumForm.ZHANG_1995 else (-0.107, 0.0144)
        draws = (
            drawn(part, 0.01) * temperature * carbonate
            + drawn(slope, 0.002) * temperature
            + drawn(10.53, 0.05)
        )
    assert uncertainty[0] == pytest.approx(draws.std(), rel=0.02)
    assert value[0] == pytest.approx(draws.mean(), abs=0.002)


def test_the_uncertainty_of_the_air_sea_component_holds_measurements_and_ratio() -> None:
    of = found(WATER)
    biological = np.hypot(19.0 / 2200.0 * 117.0 * 0.02 * 1.4, 19.0 / 2200.0 * 14.0 * 0.8)
    assert column(of, "biological_uncertainty")[0] == pytest.approx(biological, rel=1e-12)
    assert column(of, "air_sea_uncertainty")[0] == pytest.approx(np.hypot(0.03, biological), rel=1e-12)
    printed = found(WATER, biological_slope="lynch_stieglitz_1995")
    assert column(printed, "biological_uncertainty")[0] == pytest.approx(1.1 * 0.02 * 1.4, rel=1e-12)
    assert (
        of.forms["delta_carbon_13_air_sea_uncertainty"]["uncertainty"]
        == "carbon-13 0.03 per mil, or its delivered error where that is larger; phosphate 2 % and C:P +-14"
    )


def test_a_delivered_error_counts_where_it_is_larger_than_the_usual() -> None:
    for told, counts in ((0.2, 0.2), (0.004, 0.03), (-999.0, 0.03), (np.nan, 0.03), (np.inf, 0.03)):
        of = found({**WATER, "delta_carbon_13_error": told}, biological_slope="lynch_stieglitz_1995")
        assert column(of, "air_sea_uncertainty")[0] == pytest.approx(np.hypot(counts, 1.1 * 0.028), rel=1e-12)


@pytest.mark.parametrize("delta", [-22.0, -8.0, 9.0, np.inf, 1e300, np.nan])
def test_carbon_that_is_no_dic_gives_nothing(delta: float) -> None:
    of = found({**WATER, "delta_carbon_13": delta})
    assert all(np.isnan(values).all() for values in of.columns.values())


@pytest.mark.parametrize(
    ("missing", "left"),
    [
        ("phosphate", {"equilibrium", "disequilibrium"}),
        ("potential_temperature", {"biological", "air_sea"}),
        ("delta_carbon_13", set()),
    ],
)
def test_what_is_missing_takes_with_it_what_is_made_of_it(missing: str, left: set[str]) -> None:
    of = found(WATER, {**WATER, missing: np.nan})
    assert {part for part in PARTS if np.isfinite(column(of, part)[1])} == left
    assert {part for part in PARTS if np.isfinite(column(of, f"{part}_uncertainty")[1])} == left
    assert np.isfinite([values[0] for values in of.columns.values()]).all()


def test_a_cruise_without_a_carbonate_system_is_told_so_once() -> None:
    of = found(WATER, WATER, carbon={})
    assert np.isnan(column(of, "equilibrium")).all()
    assert np.isfinite(column(of, "air_sea")).all()
    (told,) = of.findings
    assert told.check == "isotope-inputs"
    assert told.message.startswith(
        "2 of 2 samples with a DELC13 that may be used have no delta_carbon_13_equilibrium;"
    )


def test_temperatures_that_nobody_measured_at_are_told() -> None:
    (told,) = found(WATER, {**WATER, "potential_temperature": 18.0}).findings
    assert (told.check, told.count) == ("isotope-validity", 1)


@quick
@given(
    st.lists(st.fixed_dictionaries(dict.fromkeys([n for n in WATER if n != "date"], ANYTHING)), max_size=5)
)
def test_no_row_of_rubbish_raises_or_warns(samples: list[dict[str, float]]) -> None:
    table = [{"date": dt.date(2010, 6, 1), **sample} for sample in samples] or [WATER]
    assert not any(np.isinf(values).any() for values in found(*table).columns.values())


def test_a_batch_is_its_samples_one_by_one() -> None:
    samples = [{**WATER, "phosphate": 0.3 * i, "potential_temperature": 3.0 * i} for i in range(6)]
    together = found(*samples).columns
    for name, values in together.items():
        np.testing.assert_array_equal(values, [found(one).columns[name][0] for one in samples])


EXTRA = {"TCARBN": "UMOL/KG", "ALKALI": "UMOL/KG", "DELC13": "/MILLE", "C13ERR": "/MILLE"}
GOOD = {"TCARBN": "2175.0", "ALKALI": "2320.0", "DELC13": "0.80", "C13ERR": "0.02"}


def test_a_cruise_with_carbon_13_has_the_columns_with_what_they_were_made_by() -> None:
    made = process_cruise(EXPOCODE, [read(bottle_file(GOOD, extra=EXTRA))], Settings())
    samples = made.tables["samples"]
    assert all(samples.column(v.name).null_count == 0 for v in ISOTOPES)
    assert not {v.name for v in ISOTOPES} & set(made.tables["casts"].column_names)
    assert b"-1.0105 PO4" in samples.schema.field("delta_carbon_13_air_sea").metadata[b"form"]
    told = samples.schema.field("delta_carbon_13_equilibrium").metadata
    assert told[b"form"] == (
        b"zhang_1995: enrichment 0.014 T f(CO3) -0.105 T +10.53 per mil; atmosphere 1990 -7.8, 2010 -8.3, 2020 -8.5 per"
        b" mil, linear between, at the year of the sample"
    )
    assert told[b"units"] == b"1e-3"
    temperature = samples.column("potential_temperature")[0].as_py()
    part = np.array(samples.column("carbonate_fraction")[0].as_py())
    expected = enriched(
        np.array(-7.8 - 0.5 * 19 / 20), dic_enrichment_zhang_1995(np.array(temperature), part, DIC_ZHANG_1995)
    )
    assert samples.column("delta_carbon_13_equilibrium")[0].as_py() == pytest.approx(
        float(expected), abs=1e-12
    )


def test_organic_carbon_in_the_column_of_dic_is_told_and_not_computed_with() -> None:
    cells = [{**GOOD, "DELC13": f"{-22.0 - 0.1 * i:.1f}"} for i in range(12)]
    made = process_cruise(EXPOCODE, [read(bottle_file(*cells, extra=EXTRA))], Settings())
    samples = made.tables["samples"]
    assert all(samples.column(v.name).null_count == 12 for v in ISOTOPES)
    assert any(f.variable == "delta_carbon_13" and f.severity is not Severity.NOTE for f in made.findings)


def test_dic_in_mol_per_kg_is_told_and_not_computed_with() -> None:
    cells = [{**GOOD, "TCARBN": f"{0.002175 + 1e-6 * i:.6f}"} for i in range(12)]
    made = process_cruise(EXPOCODE, [read(bottle_file(*cells, extra=EXTRA))], Settings())
    samples = made.tables["samples"]
    for name in (
        "delta_carbon_13_equilibrium",
        "preformed_dic",
        "c_star",
        "dic_normalised",
        "dic_soft_tissue",
    ):
        assert samples.column(name).null_count == 12, name
    assert samples.column("delta_carbon_13_air_sea").null_count == 0
    assert any(f.variable == "dic" and f.severity is not Severity.NOTE for f in made.findings)
