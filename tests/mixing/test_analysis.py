from __future__ import annotations

import subprocess
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pytest

from pipeline.mixing import resolve
from pipeline.mixing.status import MixingStatus
from pipeline.mixing.tags import TAG_WORDS, UNSOLVED, Tag, tags
from pipeline.settings import MixingSettings, Settings, UseSettings
from pipeline.tables import MIXING, MIXTURES, registry_field, with_columns
from pipeline.variables import REGISTRY

from .catalogues import catalogue

ROOT = Path(__file__).parent.parent.parent

if TYPE_CHECKING:
    from pipeline.mixing import Resolution
    from pipeline.mixing.entries import Catalogue

SETTINGS = Settings()
NORTH = {
    "conservative_temperature": 2.0,
    "preformed_salinity": 35.0,
    "oxygen": 290.0,
    "phosphate": 1.0,
    "nitrate": 14.0,
}
SOUTH = {
    "conservative_temperature": -0.5,
    "preformed_salinity": 34.7,
    "oxygen": 250.0,
    "phosphate": 2.2,
    "nitrate": 32.0,
}
RESPIRED = {"oxygen": -170.0, "phosphate": 1.0, "nitrate": 16.0}
PLACE = {"pressure": 3000.0, "latitude": -40.0, "longitude": -12.0, "sigma0": 27.8}


def mixed(north: float, respired: float = 0.0, **changed: float | None) -> dict[str, Any]:
    """Return a sample of the two sources, with columns changed as said."""
    values = {
        name: north * NORTH[name] + (1 - north) * SOUTH[name] + respired * RESPIRED.get(name, 0.0)
        for name in NORTH
    }
    return {**PLACE, **values, **changed}


def samples(*rows: dict[str, Any]) -> pa.Table:
    """Return a table of samples, numbered from 1, from line 10 of their file on."""
    identity = [
        {"expocode": "ZZV120090214", "station": "7", "cast": 1, "sample": str(i), "line": 9 + i}
        for i in range(1, len(rows) + 1)
    ]
    full = [{**one, **row} for one, row in zip(identity, rows, strict=True)]
    names = list(dict.fromkeys(name for row in full for name in row))
    fields = [registry_field(name) for name in names]
    return pa.table(
        [pa.array([row.get(f.name) for row in full], type=f.type) for f in fields], schema=pa.schema(fields)
    )


def resolved(*rows: dict[str, Any], of: Catalogue | None = None, settings: Settings = SETTINGS) -> Resolution:
    return resolve(samples(*rows), of or catalogue(), settings)


def tag(row: dict[str, Any], of: Catalogue | None = None, settings: Settings = SETTINGS) -> str:
    return str(resolved(row, of=of, settings=settings).columns["tag"][0])


def test_shares_respiration_and_residuals_of_a_known_mixture() -> None:
    answer = resolved(mixed(0.7, 0.2), mixed(0.1))
    columns = answer.columns
    assert list(columns["tag"]) == ["NOR", "SOU"]
    assert list(columns["leading_source"]) == ["NOR", "SOU"]
    assert list(columns["mixing_set"]) == ["deep", "deep"]
    assert list(columns["mixing_status"]) == ["solved", "solved"]
    np.testing.assert_allclose(columns["leading_share"], [0.7, 0.9], atol=1e-9)
    np.testing.assert_allclose(columns["respiration"], [0.2, 0.0], atol=1e-9)
    np.testing.assert_allclose(columns["reduced_chi_square"], 0, atol=1e-12)
    for name in NORTH:
        np.testing.assert_allclose(columns[f"residual_{name}"], 0, atol=1e-9)
    assert (columns["leading_share_uncertainty"] > 0.001).all()


def test_residuals_are_fitted_less_observed() -> None:
    clean, off = resolved(mixed(0.5), mixed(0.5, oxygen=280.0)).columns["residual_oxygen"]
    assert clean == pytest.approx(0, abs=1e-9)
    assert off < -5, "an observed value that is too high must leave a negative residual"


def test_mixtures_hold_every_share_of_solved_samples_with_their_identity() -> None:
    mixtures = resolved(mixed(0.25), mixed(0.5, pressure=10.0), mixed(0.75)).mixtures
    assert mixtures.column_names == list(MIXTURES)
    assert mixtures.column("sample").to_pylist() == ["1", "1", "3", "3"]
    assert mixtures.column("line").to_pylist() == [10, 10, 12, 12]
    assert mixtures.column("station").to_pylist() == ["7"] * 4
    assert mixtures.column("source").to_pylist() == ["NOR", "SOU"] * 2
    assert mixtures.column("mixing_set").to_pylist() == ["deep"] * 4
    np.testing.assert_allclose(mixtures.column("share").to_numpy(), [0.25, 0.75, 0.75, 0.25], atol=1e-9)
    assert mixtures.column("share_uncertainty").null_count == 0
    assert mixtures.schema.field("share").metadata[b"units"] == b"1"


def test_all_columns_can_be_written() -> None:
    table = samples(mixed(0.7), mixed(0.7, pressure=10.0))
    answer = resolve(table, catalogue(), SETTINGS)
    written = with_columns(table, answer.columns)
    assert set(MIXING) <= set(answer.columns)
    assert set(answer.columns) <= set(REGISTRY)
    for name in ("leading_source", "leading_share", "mixing_set", "respiration", "residual_oxygen"):
        assert written.column(name).null_count == 1, name


def test_no_samples() -> None:
    answer = resolve(samples(mixed(0.7)).slice(0, 0), catalogue(), SETTINGS)
    assert answer.mixtures.num_rows == 0
    assert answer.mixtures.column_names == list(MIXTURES)
    assert len(answer.columns["tag"]) == 0


def test_nothing_but_outside_leaves_an_empty_mixtures_table() -> None:
    answer = resolved(mixed(0.7, pressure=10.0))
    assert answer.mixtures.num_rows == 0
    assert list(answer.columns["tag"]) == ["outside"]


@pytest.mark.parametrize(
    ("row", "expected"),
    [
        (mixed(0.95), "NOR"),
        (mixed(0.05), "SOU"),
        (mixed(0.7, conservative_temperature=9.0), "unexplained"),
        (mixed(0.7, oxygen=float("inf")), "unexplained"),
        (mixed(0.7, oxygen=1e30), "unexplained"),
        (mixed(0.7, oxygen=None, phosphate=None, nitrate=None, preformed_salinity=None), "incomplete"),
        (mixed(0.7, pressure=None), "incomplete"),
        (mixed(0.7, pressure=999.9), "outside"),
        (mixed(0.7, pressure=1000.0), "NOR"),
        (mixed(0.7, pressure=6000.0), "NOR"),
        (mixed(0.7, pressure=6000.1), "outside"),
        (mixed(0.7, nitrate=None), "NOR"),
        # without oxygen and nutrients nothing tells respiration
        (mixed(0.7, oxygen=None, phosphate=None, nitrate=None), "undetermined"),
    ],
)
def test_tags(row: dict[str, Any], expected: str) -> None:
    assert tag(row) == expected


def test_a_sample_without_a_leading_source_is_mixed() -> None:
    strict = Settings(mixing=MixingSettings(tag_share=0.8))
    assert tag(mixed(0.75), settings=strict) == "mixed"
    assert tag(mixed(0.81), settings=strict) == "NOR"


def test_what_counts_as_unexplained_is_a_setting() -> None:
    row = mixed(0.7, conservative_temperature=2.2)
    chi_square = float(resolved(row).columns["reduced_chi_square"][0])
    for factor, expected in ((0.99, "unexplained"), (1.01, "NOR")):
        assert (
            tag(row, settings=Settings(mixing=MixingSettings(unexplained_chi_square=chi_square * factor)))
            == expected
        )


def test_what_counts_as_undetermined_is_a_setting() -> None:
    assert tag(mixed(0.7), settings=Settings(mixing=MixingSettings(condition_limit=1.5))) == "undetermined"


def test_values_that_must_not_be_used_are_not_used() -> None:
    by_bottle = catalogue(
        ("oxygen = {", "bottle_oxygen = {"), ("oxygen = {", "oxygen = {"), ('"oxygen"', '"bottle_oxygen"'),
        ("oxygen = { value = 250.0", "bottle_oxygen = { value = 250.0"),
    )  # fmt: skip
    row = mixed(0.7)
    row["bottle_oxygen"] = row.pop("oxygen")
    bad = {**row, "bottle_oxygen": 20.0, "bottle_oxygen_flag": 4}
    good = {**row, "bottle_oxygen_flag": 2}
    answer = resolved(good, bad, of=by_bottle)
    np.testing.assert_allclose(answer.columns["leading_share"], 0.7, atol=1e-9)
    assert np.isnan(answer.columns["residual_bottle_oxygen"][1])
    trusting = Settings(use=UseSettings(water_flags=(2, 4)))
    assert tag(bad, of=by_bottle, settings=trusting) == "unexplained"


LONGITUDES = [
    ("[-20.0, 10.0]", -12.0, True),
    ("[-20.0, 10.0]", 348.0, True),  # the other custom of writing it
    ("[-20.0, 10.0]", 10.0, True),
    ("[-20.0, 10.0]", -20.0, True),
    ("[-20.0, 10.0]", 11.0, False),
    ("[170.0, -170.0]", 175.0, True),  # across the date line
    ("[170.0, -170.0]", -175.0, True),
    ("[170.0, -170.0]", 185.0, True),
    ("[170.0, -170.0]", 180.0, True),
    ("[170.0, -170.0]", 0.0, False),
    ("[-180.0, 180.0]", 180.0, True),
    ("[0.0, 360.0]", -12.0, True),
]


@pytest.mark.parametrize(("ends", "longitude", "inside"), LONGITUDES)
def test_longitudes_run_east_from_the_west_end(ends: str, longitude: float, inside: bool) -> None:
    of = catalogue(("pressure = [1000.0, 6000.0]", f"longitude = {ends}"))
    assert tag(mixed(0.7, longitude=longitude), of=of) == ("NOR" if inside else "outside")


def test_all_conditions_of_a_domain_must_hold() -> None:
    of = catalogue(end="sigma0 = [27.7, 27.9]\nlatitude = [-60.0, -20.0]\n")
    assert tag(mixed(0.7), of=of) == "NOR"
    assert tag(mixed(0.7, sigma0=27.5), of=of) == "outside"
    assert tag(mixed(0.7, latitude=0.0), of=of) == "outside"
    assert tag(mixed(0.7, sigma0=None), of=of) == "incomplete"
    assert tag(mixed(0.7, sigma0=None, latitude=0.0), of=of) == "outside"


SECOND = """
[[source]]
code = "MID"
name = "Middle water"
[source.properties]
conservative_temperature = { value = 4.0, uncertainty = 0.1 }
preformed_salinity = { value = 34.3, uncertainty = 0.01 }
oxygen = { value = 260.0, uncertainty = 3.0 }
phosphate = { value = 1.6, uncertainty = 0.03 }
nitrate = { value = 23.0, uncertainty = 0.4 }
"""
OTHER_SET = """
[[set]]
name = "{name}"
sources = ["MID", "SOU"]
properties = ["conservative_temperature", "preformed_salinity", "oxygen", "phosphate", "nitrate"]
{more}
"""


def _two_sets(name: str = "upper", more: str = "") -> Catalogue:
    return catalogue(end=SECOND + OTHER_SET.format(name=name, more=more))


def test_the_set_that_explains_a_sample_best_is_kept() -> None:
    middle = {**PLACE, "conservative_temperature": 3.9, "preformed_salinity": 34.31, "oxygen": 260.0,
              "phosphate": 1.61, "nitrate": 23.1}  # fmt: skip
    answer = resolved(mixed(0.9), middle, of=_two_sets())
    assert list(answer.columns["mixing_set"]) == ["deep", "upper"]
    assert list(answer.columns["leading_source"]) == ["NOR", "MID"]
    assert answer.mixtures.column("source").to_pylist() == ["NOR", "SOU", "MID", "SOU"]
    assert np.isnan(answer.columns["respiration"][1]), "the second set knows no respiration"


def test_of_equals_the_first_of_the_catalogue_is_kept() -> None:
    same = OTHER_SET.format(name="twin", more='respiration = "non_negative"').replace('"MID"', '"NOR"')
    answer = resolved(mixed(0.6, 0.1), mixed(0.6, pressure=10.0), of=catalogue(end=same))
    assert list(answer.columns["mixing_set"]) == ["deep", "twin"]


def test_a_fit_without_degrees_of_freedom_yields_to_one_with() -> None:
    tight = OTHER_SET.format(name="tight", more="").replace(
        '["conservative_temperature", "preformed_salinity", "oxygen", "phosphate", "nitrate"]', '["oxygen"]'
    )
    answer = resolved(mixed(0.6), of=catalogue(end=SECOND + tight))
    assert list(answer.columns["mixing_set"]) == ["deep"]
    first = catalogue(end=SECOND + tight)
    first = first.model_copy(update={"set": first.set[::-1]})
    off = resolved(mixed(0.1), mixed(0.1, conservative_temperature=9.0), of=first)
    assert list(off.columns["mixing_set"]) == ["deep", "deep"], "even one that can be seen not to explain it"
    assert off.columns["tag"][1] == "unexplained"
    only = resolved(mixed(0.6, pressure=10.0, oxygen=258.0), of=catalogue(end=SECOND + tight))
    assert list(only.columns["mixing_set"]) == ["tight"]
    assert np.isnan(only.columns["reduced_chi_square"][0])
    assert list(only.columns["tag"]) == ["MID"], "no chi-square speaks against it"


def test_the_reason_that_came_furthest_is_told() -> None:
    """The first set is not valid here, the second has too few values: that is what can be mended."""
    row = mixed(0.7, pressure=10.0, oxygen=None, phosphate=None, nitrate=None, conservative_temperature=None,
                preformed_salinity=None)  # fmt: skip
    assert tag(row, of=_two_sets()) == "incomplete"


def test_the_stoichiometry_is_a_setting() -> None:
    other = Settings.model_validate({"tracers": {"stoichiometry": "redfield_1963"}})
    row = mixed(0.7, 0.3)
    assert resolved(row).columns["reduced_chi_square"][0] < 1e-9
    assert resolved(row, settings=other).columns["reduced_chi_square"][0] > 0.1


def test_every_tag_and_reason_has_its_words() -> None:
    assert set(TAG_WORDS) == set(Tag)
    assert set(UNSOLVED) == set(MixingStatus) - {MixingStatus.SOLVED}


def test_a_sample_at_the_limit_takes_the_tag() -> None:
    got = tags(
        np.zeros(3, dtype=np.int8),
        np.array(["A", "B", "C"], dtype=object),
        np.array([0.5, 0.5, 0.49]),
        np.array([0.5, np.nan, 0.9]),
        np.array([10.0, np.nan, 1.0]),
        MixingSettings(),
    )
    assert list(got) == ["A", "B", "mixed"]


def test_a_source_that_the_ensemble_does_not_see_lead_gives_no_tag() -> None:
    def got(**settings: float) -> list[str]:
        return list(
            tags(
                np.zeros(4, dtype=np.int8),
                np.array(["A", "B", "C", "D"], dtype=object),
                np.array([0.6, 0.6, 0.3, 0.6]),
                np.array([0.49, 0.5, 0.1, 0.1]),
                np.array([1.0, 1.0, 1.0, 99.0]),
                MixingSettings(**settings),
            )
        )

    assert got() == ["undetermined", "B", "mixed", "unexplained"]
    assert got(tag_probability=0.3) == ["A", "B", "mixed", "unexplained"]
    assert got(tag_probability=0.9) == ["undetermined", "undetermined", "mixed", "unexplained"]
    assert got(tag_probability=0) == ["A", "B", "mixed", "unexplained"]


TWIN = mixed(1.0, conservative_temperature=1.89)


def test_sources_hardly_told_apart_leave_the_leading_one_undetermined() -> None:
    """Three northern waters that differ by less than they are uncertain: which leads is a matter of chance."""
    twins = "\n".join(
        f'[[source]]\ncode = "{code}"\nname = "Twin"\n[source.properties]\n'
        f"conservative_temperature = {{ value = {heat}, uncertainty = 0.3 }}\n"
        f"preformed_salinity = {{ value = {salt}, uncertainty = 0.05 }}\n"
        "oxygen = { value = 290.0, uncertainty = 9.0 }\n"
        "phosphate = { value = 1.0, uncertainty = 0.1 }\nnitrate = { value = 14.0, uncertainty = 1.0 }\n"
        for code, heat, salt in (("ONE", 1.7, 35.0), ("TWO", 2.1, 34.93), ("TRE", 2.1, 35.07))
    )
    of = catalogue(('["NOR", "SOU"]', '["ONE", "TWO", "TRE", "SOU"]'), end=twins)
    answer = resolved(TWIN, of=of)
    assert answer.columns["leading_share"][0] > 0.5
    assert answer.columns["leading_probability"][0] < 0.5
    assert list(answer.columns["tag"]) == ["undetermined"]
    assert list(answer.columns["mixing_status"]) == ["solved"]
    assert set(answer.mixtures.column("tag").to_pylist()) == {"undetermined"}
    without = Settings(mixing=MixingSettings(members=0))
    assert tag(TWIN, of=of, settings=without) in {"ONE", "TWO", "TRE"}


def test_what_decided_the_tag_stands_beside_it() -> None:
    """Condition number where a sample had equations enough, degrees of freedom where it was solved."""
    gone: dict[str, Any] = dict.fromkeys(("oxygen", "phosphate", "nitrate"))
    table = samples(
        mixed(0.7, 0.2), mixed(0.7, 0.2, nitrate=None), mixed(0.7, **gone), mixed(0.7, preformed_salinity=None, **gone),
        mixed(0.7, pressure=10.0), mixed(0.6, -0.3),
    )  # fmt: skip
    answer = resolve(table, catalogue(), SETTINGS)
    written = with_columns(table, answer.columns)
    assert written.column("degrees_of_freedom").to_pylist() == [3, 2, None, None, None, 4]
    condition = answer.columns["condition_number"]
    np.testing.assert_array_equal(np.isnan(condition), [False, False, False, True, True, False])
    assert condition[2] > SETTINGS.mixing.condition_limit > condition[1] > 1
    assert condition[0] == condition[5]


def test_the_condition_number_is_that_of_the_set_that_is_told_of() -> None:
    gone: dict[str, Any] = dict.fromkeys(("oxygen", "phosphate", "nitrate"))
    row = mixed(0.7, **gone)
    answer = resolved(row, of=_two_sets())
    assert list(answer.columns["mixing_set"]) == ["upper"], "only the second knows no respiration"
    assert 1 <= answer.columns["condition_number"][0] < 100


def test_kernels_are_made_ready_without_a_cruise() -> None:
    code = (
        "from pipeline.mixing import prepare, read_catalogue\n"
        "from pipeline.mixing.kernel import solve_rows\n"
        "from pipeline.mixing.ensemble_kernel import run_rows\n"
        "from pipeline.settings import Settings\n"
        "from pathlib import Path\n"
        "assert not solve_rows.signatures and not run_rows.signatures\n"
        "prepare(read_catalogue(Path('fixtures/sources.toml')), Settings())\n"
        "print(len(solve_rows.signatures), len(run_rows.signatures))\n"
    )
    said = subprocess.run([sys.executable, "-c", code], check=True, cwd=ROOT, capture_output=True, text=True)
    assert said.stdout.split() == ["1", "1"]
