from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from pipeline.mixing import resolve
from pipeline.mixing.properties import respiration_ratios
from pipeline.mixing.split import QUANTITIES, pseudo_age, quantities_of, split
from pipeline.settings import MixingSettings, Settings, TracerSettings
from pipeline.tables import with_columns
from pipeline.variables import REGISTRY

from .catalogues import catalogue
from .test_analysis import OTHER_SET, SECOND, mixed, samples

DIC = tuple(
    (entry, f"{entry}\ndic = {{ value = {dic}, uncertainty = {uncertainty} }}")
    for entry, dic, uncertainty in (
        ("nitrate = { value = 14.0, uncertainty = 0.4 }", 2160.0, 5.0),
        ("nitrate = { value = 32.0, uncertainty = 0.5 }", 2260.0, 7.0),
    )
)
PARTS = ("from_sources", "from_sources_uncertainty", "from_respiration", "from_respiration_uncertainty")
ROWS = (
    mixed(0.7, 0.2),
    mixed(0.35, 0.4, conservative_temperature=0.42, oxygen=199.0),
    mixed(0.5, 0.3, nitrate=None),
    mixed(0.5, 0.3, phosphate=None, conservative_temperature=0.8),
)


def settings(**mixing: Any) -> Settings:
    return Settings(mixing=MixingSettings(**mixing))


def test_the_parts_are_those_the_sample_was_made_of() -> None:
    found = resolve(samples(mixed(0.7, 0.2)), catalogue(*DIC), settings()).columns
    sources = {"phosphate": 1.36, "nitrate": 19.4, "oxygen": 278.0, "dic": 2190.0}
    added = {"phosphate": 0.2, "nitrate": 3.2, "oxygen": -34.0, "dic": 23.4}  # Anderson and Sarmiento 1994
    for name, value in sources.items():
        assert found[f"{name}_from_sources"][0] == pytest.approx(value, rel=1e-9)
        assert found[f"{name}_from_respiration"][0] == pytest.approx(added[name], rel=1e-7)
        assert found[f"{name}_from_sources_uncertainty"][0] > 0
        assert found[f"{name}_from_respiration_uncertainty"][0] > 0
    assert not any(name.startswith("silicate_from") for name in found), "no source gives silicate"


def test_the_parts_add_up_to_the_fitted_value() -> None:
    table = samples(*ROWS)
    found = resolve(table, catalogue(), settings()).columns
    for name in ("phosphate", "nitrate", "oxygen"):
        observed = table.column(name).to_numpy(zero_copy_only=False)
        fitted = found[f"{name}_from_sources"] + found[f"{name}_from_respiration"]
        there = np.isfinite(observed)
        np.testing.assert_allclose(
            fitted[there], (observed + found[f"residual_{name}"])[there], rtol=1e-12, atol=1e-10
        )
        assert np.isfinite(fitted).all(), "the parts are known where the value was not measured"


def test_members_and_first_order_agree() -> None:
    """The standard deviation of 4000 members is known to 1.1 %."""
    table = samples(*ROWS)
    members = resolve(table, catalogue(*DIC), settings(members=4000)).columns
    first = resolve(table, catalogue(*DIC), settings(members=0)).columns
    for name in ("phosphate", "nitrate", "oxygen", "dic"):
        column = f"{name}_from_sources_uncertainty"
        np.testing.assert_allclose(members[column], first[column], rtol=0.05, err_msg=name)
        for part in ("from_sources", "from_respiration"):
            np.testing.assert_array_equal(members[f"{name}_{part}"], first[f"{name}_{part}"])


def test_what_is_measured_well_is_known_better_than_its_sources() -> None:
    """Shares follow the sample, so errors of the sources largely cancel in a property of the fit."""
    found = resolve(samples(mixed(0.5, 0.3)), catalogue(*DIC), settings()).columns
    assert found["dic_from_sources_uncertainty"][0] > 3.0
    uncertain = found["respiration_uncertainty"][0]
    assert found["oxygen_from_respiration_uncertainty"][0] == pytest.approx(170.0 * uncertain)


def test_a_set_without_respiration_tells_what_came_with_the_sources_alone() -> None:
    of = catalogue(end=SECOND + OTHER_SET.format(name="upper", more=""))
    middle = mixed(0.9, conservative_temperature=3.9, preformed_salinity=34.31, oxygen=260.0, phosphate=1.61,
                   nitrate=23.1)  # fmt: skip
    found = resolve(samples(mixed(0.9, 0.2), middle), of, settings(oxygen_utilisation_rate=1.0)).columns
    assert list(found["mixing_set"]) == ["deep", "upper"]
    assert np.isfinite(found["oxygen_from_sources"]).all()
    for name in ("oxygen_from_respiration", "oxygen_from_respiration_uncertainty", "pseudo_age"):
        np.testing.assert_array_equal(np.isnan(found[name]), [False, True])


def test_a_quantity_that_one_source_lacks_has_no_columns() -> None:
    of = catalogue(DIC[0])
    assert quantities_of(of, of.set[0]) == ("phosphate", "nitrate", "oxygen")
    found = resolve(samples(mixed(0.7, 0.2)), of, settings()).columns
    assert not any(name.startswith("dic_from") for name in found)


def test_a_pseudo_age_is_oxygen_consumed_over_the_rate() -> None:
    """By hand: 0.15 umol/kg of phosphate take 25.5 of oxygen."""
    ratios = respiration_ratios(TracerSettings())
    for rate, years in ((0.5, 51.0), (1.0, 25.5), (5.0, 5.1)):
        assert pseudo_age(np.array([0.15]), ratios, rate)[0] == pytest.approx(years)
    row = samples(mixed(0.7, 0.15))
    aged = resolve(row, catalogue(), settings(oxygen_utilisation_rate=0.5)).columns
    assert aged["pseudo_age"][0] == pytest.approx(51.0)
    assert "pseudo_age" not in resolve(row, catalogue(), settings()).columns


def test_samples_that_are_not_solved_have_no_parts() -> None:
    table = samples(mixed(0.7, 0.2), mixed(0.7, pressure=10.0), mixed(0.7, oxygen=1e30))
    found = resolve(table, catalogue(), settings()).columns
    for part in PARTS:
        np.testing.assert_array_equal(np.isnan(found[f"oxygen_{part}"]), [False, True, True])


def test_the_columns_are_in_the_registry() -> None:
    assert all(f"{name}_{part}" in REGISTRY for name in QUANTITIES for part in PARTS)
    table = samples(mixed(0.7, 0.2))
    found = resolve(table, catalogue(), settings(oxygen_utilisation_rate=1.0)).columns
    assert with_columns(table, found).schema.field("pseudo_age").metadata[b"units"] == b"year"


def test_shapes_without_quantities() -> None:
    came, added = split(np.ones((3, 2)) / 2, np.zeros(3), np.zeros((2, 0)), [])
    assert came.shape == added.shape == (3, 0)
    bare = resolve(samples(mixed(0.7)), _without_nutrients(), settings(members=0)).columns
    assert not any("_from_" in name for name in bare)
    assert np.isfinite(bare["leading_share_uncertainty"]).all()


def _without_nutrients() -> Any:
    of = catalogue()
    kept = ("conservative_temperature", "preformed_salinity")
    sources = tuple(
        source.model_copy(update={"properties": {name: source.properties[name] for name in kept}})
        for source in of.source
    )
    chosen = of.set[0].model_copy(update={"properties": kept, "respiration": "none"})
    return of.model_copy(update={"source": sources, "set": (chosen,)})
