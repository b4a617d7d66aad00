"""What the checks of salinity, oxygen, nutrients, carbon and units say, and to which value they say it."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import gsw
import numpy as np
import pytest

from pipeline.checking import CHECKS, check
from pipeline.checking.marks import findings_of
from pipeline.checking.saturation import solubility
from pipeline.findings import Severity
from pipeline.problems import SettingsProblem
from pipeline.settings import Settings, read_settings
from pipeline.tracers.oxygen import BENSON_KRAUSE_UMOL_KG, oxygen_solubility_garcia_gordon_1992
from pipeline.units import T68_PER_T90
from pipeline.usable import Rows
from tests.checking import planted_chemistry as planted
from tests.checking.cases import SETTINGS, changed, marks_of
from tests.checking.oceans import DEEP, QUANTITIES, ocean, patch, row

if TYPE_CHECKING:
    from pathlib import Path

    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.findings import Finding
    from tests.checking.oceans import Place

    FloatArray = NDArray[np.float64]

Q = QUANTITIES
START = "cruise_hy1.csv, line "
LINES = "cruise_hy1.csv, lines "


def findings(name: str, table: pa.Table, settings: Settings = SETTINGS) -> list[Finding]:
    return findings_of(Rows(table, settings.use), CHECKS[name].run(Rows(table, settings.use), settings))


def only(name: str, table: pa.Table) -> Finding:
    (finding,) = findings(name, table)
    return finding


# Check, what is done to which quantity where, the severity, the quantity told of, and the sentence after its line.
SENTENCES = [
    (
        "bottle-against-ctd", "bottle_salinity", (4, 3000, 0.03), Severity.DOUBT, "bottle_salinity",
        r"SALNTY is 34\.74\d+, 0\.03\d* higher than CTDSAL and the cruise's other samples imply; expected the two to"
        r" agree within 0\.005\d* there\.",
    ),
    (
        "bottle-against-ctd", "ctd_salinity", (4, 2500, 0.04), Severity.DOUBT, "ctd_salinity",
        r"CTDSAL is 34\.75\d+, 0\.04\d* higher than SALNTY and the cruise's other samples imply, and SALNTY agrees with"
        r" the samples around it; expected the two to agree within 0\.005\d* there\.",
    ),
    (
        "oxygen-saturation", "bottle_oxygen", (2, 800, -240.0), Severity.FAULT, "bottle_oxygen",
        r"OXYGEN is -\d+\.\d+ umol/kg; expected at least -1 umol/kg: water without oxygen reads nearly zero\.",
    ),
    (
        "nitrate-to-phosphate", "phosphate", (3, 2500, 0.7), Severity.DOUBT, "phosphate",
        r"PHSPHT is 2\.\d+ \(NO3/PO4 is \d+\.\d, N\* is -\d+\.\d umol/kg\), and no sample beside it is like that;"
        r" expected a ratio of 12 to 16 below 500 dbar and N\* within 5 umol/kg\.",
    ),
    (
        "nitrate-to-phosphate", "nitrate", (3, 1500, -9.0), Severity.DOUBT, "nitrate",
        r"NITRAT is 2\d\.\d+ \(NO3/PO4 is .*",
    ),
    (
        "isotope-range", "delta_carbon_13", (3, 500, -4.0), Severity.DOUBT, "delta_carbon_13",
        r"DELC13 is -3\.\d+; expected -1\.5 to 2\.8 per mil in the open ocean\.",
    ),
    (
        "regional-range", "temperature", (3, 3000, 8.0), Severity.DOUBT, "temperature",
        r"CTDTMP is 9\.\d+ in the deep open ocean, and no sample beside it is like that; expected -2 to 6 degC\.",
    ),
]  # fmt: skip


@pytest.mark.parametrize(("name", "quantity", "place", "severity", "variable", "sentence"), SENTENCES)
def test_one_wrong_value_is_told_in_one_sentence(
    name: str, quantity: str, place: tuple[int, int, float], severity: Severity, variable: str, sentence: str
) -> None:
    table, rows = planted.shifted(quantity, place)
    finding = only(name, table)
    assert (finding.severity, finding.variable) == (severity, variable)
    assert finding.line == rows.pop() + 4
    assert re.fullmatch(f"{START}{finding.line}: {sentence}", finding.message), finding.message


@pytest.mark.parametrize("name", ["nitrate", "phosphate", "silicate", "dic", "alkalinity"])
@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_a_misfit_is_laid_to_the_quantity_that_is_wrong(name: str, sign: float) -> None:
    size = 6.0 * getattr(SETTINGS.checks.misfit_floor, name)
    table, rows = planted.shifted(name, (9, 1250, sign * size), table=ocean(n_cast=20))
    (mark,) = marks_of("property-misfit", table)
    assert mark.variable == name
    assert set(mark.rows.tolist()) == rows
    words = "more" if sign > 0 else "less"
    assert (
        f"umol/kg {words} than the sample's other properties imply"
        in findings("property-misfit", table)[0].message
    )


def test_a_misfit_of_few_samples_is_none() -> None:
    table, _ = planted.shifted("nitrate", (2, 1250, 9.0), table=ocean(n_cast=3))
    assert not marks_of("property-misfit", table)


def test_oxygen_that_the_ctd_confirms_is_no_misfit() -> None:
    table, _ = planted.shifted("bottle_oxygen", (9, 1250, 25.0), table=ocean(n_cast=20))
    table, _ = planted.shifted("ctd_oxygen", (9, 1250, 25.0), table=table)
    assert "bottle_oxygen" not in {mark.variable for mark in marks_of("property-misfit", table)}


def test_an_offset_of_a_cast_is_told_once_and_doubts_no_value() -> None:
    table, rows = planted.shifted("bottle_oxygen", *[(7, pressure, 9.0) for pressure in DEEP])
    finding = only("bottle-against-ctd", table)
    assert (finding.severity, finding.station, finding.count) == (Severity.NOTE, "8", len(rows))
    assert re.search(
        r"OXYGEN differs from CTDOXY by \+8\.\d+ umol/kg throughout the 20 samples of station 8",
        finding.message,
    )
    assert set(check(table, SETTINGS).flags["bottle_oxygen_check"].tolist()) == {1}


def test_offsets_of_many_casts_are_told_together() -> None:
    cells = [(cast, pressure, 9.0) for cast in range(8) for pressure in DEEP]
    table, _ = planted.shifted("bottle_oxygen", *cells, table=ocean(n_cast=20))
    finding = only("bottle-against-ctd", table)
    assert "throughout 8 casts (stations 1, 2, 3, 4, 5 and 3 more)" in finding.message


def test_a_sample_beside_an_offset_of_its_cast_is_still_found() -> None:
    cells = [(7, pressure, 9.0 if pressure != 2500 else 0.0) for pressure in DEEP]
    table, _ = planted.shifted("bottle_oxygen", *cells)
    doubts = [f for f in findings("bottle-against-ctd", table) if f.severity is Severity.DOUBT]
    assert [(f.variable, f.line) for f in doubts] == [("bottle_oxygen", row(7, 2500) + 4)]


def test_a_bottle_that_closed_elsewhere_is_called_that() -> None:
    table, _ = planted.shifted("bottle_salinity", (4, 3000, 0.03), (6, 2000, 0.04))
    table, _ = planted.shifted("bottle_oxygen", (4, 3000, -15.0), table=table)
    told = {
        (f.variable, f.line): "the bottle may have closed elsewhere" in f.message
        for f in findings("bottle-against-ctd", table)
    }
    assert told == {
        ("bottle_salinity", row(4, 3000) + 4): True,
        ("bottle_salinity", row(6, 2000) + 4): False,
        ("bottle_oxygen", row(4, 3000) + 4): True,
    }


def test_an_offset_of_a_cruise_is_told_once() -> None:
    table = planted.scaled("bottle_salinity", 1.0, 0.02)
    finding = only("bottle-against-ctd", table)
    assert (finding.severity, finding.count, finding.station) == (Severity.NOTE, table.num_rows, None)
    assert finding.message == (
        f"{LINES}4 to 203: SALNTY differs from CTDSAL by +0.0199 in the median of all 200 samples; expected less"
        " than 0.0025."
    )


def test_absolute_salinity_is_known_by_its_size() -> None:
    message = only("bottle-against-ctd", planted.scaled("ctd_salinity", 35.16504 / 35.0)).message
    assert (
        "by -0.165 in the median of all 200 samples, as it would if CTDSAL were Absolute Salinity" in message
    )


def test_columns_that_measure_other_things_are_not_compared_sample_by_sample() -> None:
    assert len(findings("bottle-against-ctd", planted.scaled("ctd_salinity", 0.5))) == 1


def test_the_solubility_is_that_of_the_tracers() -> None:
    data = Rows(ocean(), SETTINGS.use)
    salinity = data.floats("bottle_salinity")
    absolute = gsw.SA_from_SP(salinity, *(data.floats(n) for n in ("pressure", "longitude", "latitude")))
    theta = gsw.pt0_from_t(absolute, data.floats("temperature"), data.floats("pressure"))
    there = oxygen_solubility_garcia_gordon_1992(salinity, theta * T68_PER_T90, BENSON_KRAUSE_UMOL_KG)
    assert np.abs(solubility(data) / there - 1.0).max() < 1e-5


def test_supersaturation_that_the_ctd_saw_too_is_a_bloom() -> None:
    table, _ = planted.shifted("bottle_oxygen", (2, 50, 120.0))
    assert [mark.variable for mark in marks_of("oxygen-saturation", table)] == ["bottle_oxygen"]
    table, _ = planted.shifted("ctd_oxygen", (2, 50, 120.0), table=table)
    assert not marks_of("oxygen-saturation", table)


@pytest.mark.parametrize("limit", [0.3, 2.0])
def test_limits_come_from_the_settings(limit: float, tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_text(f"[checks.negative_nutrients]\nammonium = {limit}\n", encoding="utf-8")
    settings = read_settings(path, {})
    assert settings.checks.negative_nutrients.nitrate == 0.1
    table = ocean(changes={"ammonium": lambda at: -0.6 * patch(at, (1, 1), (50, 50))})
    told = [f for f in findings("negative-nutrient", table, settings) if f.severity is Severity.DOUBT]
    assert bool(told) is (limit < 0.6)


def test_a_region_of_ones_own(tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    region = (
        '[[checks.regions]]\nname = "the Vesper Basin"\npressure = [1000, 4500]\nlongitude = [-25, -15]\n'
    )
    path.write_text(region + "usual = { silicate = [0, 60] }\n", encoding="utf-8")
    table, rows = planted.shifted("silicate", (3, 1250, 60.0))
    told = findings("regional-range", table, read_settings(path, {}))
    assert [f.line for f in told] == [rows.pop() + 4]
    assert (
        "in the Vesper Basin, and no sample beside it is like that; expected 0 to 60 umol/kg"
        in told[0].message
    )
    path.write_text(region + "usual = { silicat = [0, 60] }\n", encoding="utf-8")
    with pytest.raises(SettingsProblem, match="expected a measured quantity by its column, such as silicate"):
        read_settings(path, {})


def test_a_column_in_another_unit_is_told_in_one_sentence_and_taken_out_of_use() -> None:
    result = check(planted.scaled("nitrate", 1000.0), SETTINGS)
    (finding,) = [f for f in result.findings if f.variable == "nitrate"]
    assert (finding.check, finding.severity, finding.count) == ("wrong-unit", Severity.DOUBT, 200)
    assert re.fullmatch(
        rf"{LINES}4 to 203: NITRAT has 200 values, nine tenths of them from \S+ to \S+, a thousand times"
        r" what PHSPHT, SILCAT and OXYGEN of the same samples lead to expect below 1000 dbar, as in nmol/kg; expected"
        r" about \S+ to \S+ umol/kg there; the column is not used\.",
        finding.message,
    )
    assert min(result.flags["nitrate_check"]) >= 3


def test_what_is_said_of_flags_is_still_said_of_a_column_in_another_unit() -> None:
    table = planted.scaled("nitrate", 1000.0)
    table = table.append_column("nitrate_flag", [[2] * 199 + [65]])
    assert {f.check for f in check(table, SETTINGS).findings} == {"wrong-unit", "unknown-flag"}


def test_a_part_of_a_column_in_another_unit_is_no_column() -> None:
    table = ocean()
    values = table.column("dic").to_pylist()
    half = changed(table, {"dic": {i: values[i] / 1000.0 for i in range(0, 200, 2)}})
    assert not marks_of("wrong-unit", half)


@pytest.mark.parametrize(
    ("unit", "factor", "words"),
    [
        ("mS/cm", 1.0, "in mS/cm"),
        ("S/m", 0.1, "in S/m"),
        ("ratio", 1 / 42.914, "in parts of that at a salinity of 35"),
    ],
)
def test_conductivity_under_the_name_of_salinity(unit: str, factor: float, words: str) -> None:
    def conductivity(at: Place) -> FloatArray:
        return np.asarray(factor * gsw.C_from_SP(Q["ctd_salinity"](at), Q["temperature"](at), at.p))

    table = ocean(changes={"ctd_salinity": conductivity})
    # the made-up noise is that of a salinity, and too large for other units
    told = [f for f in findings("wrong-unit", table) if f.variable == "ctd_salinity"]
    assert len(told) == 1, unit
    assert f"as the conductivity of sea water has {words}" in told[0].message


def test_exchanged_columns_are_told_in_one_sentence_and_taken_out_of_use() -> None:
    result = check(ocean(changes={"silicate": Q["phosphate"], "phosphate": Q["silicate"]}), SETTINGS)
    (finding,) = result.findings
    assert finding.message.startswith(
        f"{LINES}4 to 203: SILCAT and PHSPHT seem to be exchanged: nine tenths of SILCAT"
    )
    assert finding.message.endswith("; the columns are not used.")
    assert {int(min(result.flags[f"{name}_check"])) for name in ("silicate", "phosphate")} == {3}


def test_a_wrong_sign_is_told_with_what_is_right() -> None:
    table = ocean(
        longitude=lambda at: np.where(at.c == 4, 1.0, -1.0) * (2.0 + 0.1 * at.c),
        latitude=lambda at: 40.0 + 0 * at.p,
    )
    finding = only("position-sign", table)
    assert (finding.variable, finding.station) == ("longitude", "5")
    assert (
        "LONGITUDE is 2.4 at station 5, 216 nautical miles off the track; with longitude of the other sign"
        in finding.message
    )


def test_an_offset_is_told_with_its_size() -> None:
    message = only("cruise-offset", planted.scaled("alkalinity", 1.0, 140.0)).message
    assert "ALKALI is +140 umol/kg from 2300 S/35 in the median of 20 surface samples" in message
    message = only("cruise-offset", planted.scaled("phosphate", 1.0, 0.45)).message
    assert re.search(
        r"N\* of -6\.\d umol/kg .* nitrate is low by that, or phosphate high by 0\.\d\d, or nitrate is lost here",
        message,
    )


@pytest.mark.parametrize("name", planted.CHECKS)
def test_an_empty_table_and_bare_rows_are_nothing_to_tell(name: str) -> None:
    table = ocean(n_cast=1, levels=(5, 10))
    bare = table.select([c for c in table.column_names if c not in QUANTITIES])
    for nothing in (table.slice(0, 0), bare, bare.drop_columns(["sample"])):
        assert marks_of(name, nothing) == []


@pytest.mark.parametrize("name", planted.CHECKS)
def test_values_of_any_size_break_nothing(name: str) -> None:
    chance = np.random.default_rng(5)
    wild = (np.nan, np.inf, -np.inf, 1e300, -1e300, 0.0, -999.0, 5e5)
    for _ in range(20):
        table = ocean(n_cast=4, levels=(5, 25, 100, 500, 1000, 2000))
        for column in {*QUANTITIES, "pressure", "latitude", "longitude", "bottom_depth"}:
            cells = chance.integers(0, table.num_rows, chance.integers(0, table.num_rows))
            values = {int(cell): float(chance.choice(wild)) for cell in cells}
            table = changed(table, {column: values})
        for mark in marks_of(name, table):
            assert len(mark.rows)
