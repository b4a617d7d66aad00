"""One cause is told in one sentence, whatever the checks notice of it."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np
import pytest

from pipeline.checking import check
from pipeline.findings import Severity
from pipeline.settings import Settings, UseSettings
from pipeline.tables import floats
from tests.checking.cases import SETTINGS, changed, clean_samples, rows_of
from tests.checking.oceans import DEEP, QUANTITIES, ocean, row
from tests.checking.planted_chemistry import scaled, shifted

if TYPE_CHECKING:
    from collections.abc import Iterable

    import pyarrow as pa

    from pipeline.findings import Finding

DRAWN = ("bottle_salinity", "bottle_oxygen", "nitrate", "phosphate", "silicate")


def found(table: pa.Table) -> list[Finding]:
    """Return what is found in a table of the invented cruise that is not found in the clean one."""
    usual = {finding.message for finding in check(clean_samples(), SETTINGS).findings}
    return [finding for finding in check(table, SETTINGS).findings if finding.message not in usual]


def taken_from(table: pa.Table, row_number: int, other: int, names: Iterable[str] = DRAWN) -> pa.Table:
    """Return a table in which a bottle holds the water of another one."""
    return changed(table, {name: {row_number: float(floats(table, name)[other])} for name in names})


def cast_of(station: str) -> list[int]:
    return rows_of(clean_samples(), station)


def test_a_bottle_that_leaked_is_told_once_and_nothing_of_it_is_used() -> None:
    rows = cast_of("30")
    table = taken_from(clean_samples(), rows[15], rows[4])
    (finding,) = found(table)
    assert (finding.check, finding.line) == ("leaking-bottle", table.column("line")[rows[15]].as_py())
    assert "SALNTY, OXYGEN, SILCAT, NITRAT and PHSPHT of one bottle at " in finding.message
    assert finding.message.endswith("; none of its values is used.")
    flags = check(table, SETTINGS).flags
    assert {int(flags[f"{name}_check"][rows[15]]) for name in DRAWN} == {3}
    assert flags["ctd_salinity_check"][rows[15]] == 1


def test_two_bottles_that_were_exchanged_are_told_once_each() -> None:
    rows = cast_of("30")
    table = taken_from(taken_from(clean_samples(), rows[15], rows[5]), rows[5], rows[15])
    table = changed(
        table, {name: {rows[5]: float(floats(clean_samples(), name)[rows[15]])} for name in DRAWN}
    )
    assert [finding.check for finding in found(table)] == ["leaking-bottle"] * 2


def test_two_quantities_that_are_off_are_no_leak() -> None:
    rows = cast_of("30")
    table = taken_from(clean_samples(), rows[15], rows[4], ("nitrate", "phosphate"))
    assert {finding.check for finding in found(table)} == {"spike"}


def test_an_inversion_that_a_spike_explains_is_not_told() -> None:
    rows = cast_of("30")
    warm = float(floats(clean_samples(), "temperature")[rows[12]]) + 3.0
    table = changed(clean_samples(), {"temperature": {rows[12]: warm}})
    (finding,) = found(table)
    assert (finding.check, finding.variable) == ("spike", "temperature")
    flags = check(table, SETTINGS).flags
    assert (flags["temperature_check"][rows[12]], flags["ctd_salinity_check"][rows[12]]) == (3, 1)


def test_an_inversion_is_told_once_with_all_that_it_doubts() -> None:
    rows = cast_of("30")
    salty = {
        name: {rows[16]: float(floats(clean_samples(), name)[rows[16]]) + 0.5}
        for name in ("ctd_salinity", "bottle_salinity")
    }
    table = changed(clean_samples(), salty)
    (finding,) = found(table)
    assert finding.check == "density-inversion"
    assert (
        "CTDTMP, SALNTY and CTDSAL are part of a density inversion of 0.31 kg/m3 between" in finding.message
    )
    flags = check(table, SETTINGS).flags
    assert {
        int(flags[f"{name}_check"][rows[16]]) for name in ("temperature", "ctd_salinity", "bottle_salinity")
    } == {3}


def test_pressures_in_reverse_order_are_told_once() -> None:
    rows = cast_of("30")
    pressure = floats(clean_samples(), "pressure")[rows].tolist()
    table = changed(clean_samples(), {"pressure": dict(zip(rows, pressure[::-1], strict=True))})
    (finding,) = found(table)
    assert (finding.check, finding.variable, finding.count) == ("density-inversion", "pressure", len(rows))
    assert "CTDPRS of station 30 cast 1 seems to stand in reverse order: in 23 of 23 pairs" in finding.message
    flags = check(table, SETTINGS).flags
    assert {int(flags["pressure_check"][i]) for i in rows} == {3}
    assert {int(flags["temperature_check"][i]) for i in rows} == {1}


def test_a_ctd_that_was_off_in_a_whole_cast_is_told_once() -> None:
    run = [(4, pressure, -0.13) for pressure in DEEP if pressure >= 800]
    table, rows = shifted("ctd_salinity", *run)
    (finding,) = check(table, SETTINGS).findings
    assert (finding.check, finding.variable, finding.station) == ("bottle-against-ctd", "ctd_salinity", "5")
    assert finding.count == len(rows)
    first, last = min(rows) + 4, max(rows) + 4
    assert finding.message == (
        f"cruise_hy1.csv, lines {first} to {last}: CTDSAL of station 5 cast 1 lies 0.13 below SALNTY in"
        f" {len(rows)} of 20 samples: the CTD was off there; expected differences as in the cruise's other casts."
    )


def test_a_value_that_two_checks_doubt_is_told_by_one() -> None:
    table, rows = shifted("ctd_salinity", (4, 2500, 0.14))
    (finding,) = check(table, SETTINGS).findings
    assert (finding.check, finding.line) == ("bottle-against-ctd", rows.pop() + 4)


def test_values_that_are_stuck_are_told_once_for_a_run() -> None:
    rows = cast_of("30")
    table = changed(clean_samples(), {"nitrate": dict.fromkeys(rows[2:8], 22.22)})
    (finding,) = found(table)
    assert (finding.check, finding.count) == ("stuck-values", 6)


@pytest.mark.parametrize("name", ["bottle_oxygen", "bottle_salinity", "silicate", "phosphate"])
def test_nothing_follows_from_a_column_that_is_wrong_as_a_whole(name: str) -> None:
    factor = {"bottle_oxygen": 1 / 43.54, "bottle_salinity": 1e-3, "silicate": 10.0, "phosphate": 0.1}[name]
    result = check(scaled(name, factor), SETTINGS)
    (finding,) = result.findings
    assert (finding.check, finding.variable, finding.count) == ("wrong-unit", name, 200)
    assert finding.message.endswith("; the column is not used.")
    assert set(result.flags[f"{name}_check"].tolist()) == {3}


def test_a_value_that_is_none_in_the_other_unit_either_is_told_besides() -> None:
    table = scaled("bottle_oxygen", 1 / 43.54)
    table = changed(table, {"bottle_oxygen": {row(3, 500): -182.1}})
    whole, one = sorted(check(table, SETTINGS).findings, key=lambda finding: -finding.count)
    assert re_range(whole.message) == ("4", "5")
    assert (one.severity, one.line) == (Severity.FAULT, row(3, 500) + 4)
    assert "OXYGEN is -182.1, which is none of these either" in one.message


def re_range(message: str) -> tuple[str, str]:
    """Return the first digits of the range that a sentence gives."""
    low, _, high = message.partition("nine tenths of them from ")[2].partition(",")[0].partition(" to ")
    return low[0], high[0]


def test_a_power_of_ten_is_told_with_what_says_so() -> None:
    (finding,) = check(scaled("silicate", 10.0), SETTINGS).findings
    assert (
        "ten times what NITRAT, PHSPHT and OXYGEN of the same samples lead to expect below 1000 dbar"
        in finding.message
    )


def test_a_column_of_another_unit_says_nothing_of_the_others() -> None:
    table = ocean(
        changes={
            "silicate": lambda at: 10.0 * QUANTITIES["silicate"](at),
            "bottle_oxygen": lambda at: QUANTITIES["bottle_oxygen"](at) / 43.54,
            "ctd_oxygen": lambda at: np.nan * at.p,
        }
    )
    told = {finding.variable: finding.message for finding in check(table, SETTINGS).findings}
    assert set(told) == {"silicate", "bottle_oxygen"}
    assert "what NITRAT and PHSPHT of the same samples" in told["silicate"]


def test_a_cast_that_is_ten_times_too_large_is_told_once_and_not_used() -> None:
    table = scaled("silicate", 1.0)
    rows = [row(4, pressure) for pressure in DEEP]
    table = changed(table, {"silicate": {i: 10.0 * table.column("silicate")[i].as_py() for i in rows}})
    result = check(table, SETTINGS)
    (finding,) = result.findings
    assert (finding.check, finding.severity, finding.count) == ("cast-offset", Severity.DOUBT, len(rows))
    assert re.search(
        r"SILCAT of station 5 cast 1 is (9\.9|10|10\.1) times that of the casts around it", finding.message
    )
    assert set(result.flags["silicate_check"][rows].tolist()) == {3}


def test_an_offset_of_a_cast_is_told_with_its_size_and_doubts_nothing() -> None:
    table, _ = shifted("nitrate", *[(4, pressure, 2.0) for pressure in DEEP])
    result = check(table, SETTINGS)
    (finding,) = result.findings
    assert (finding.check, finding.severity, finding.station) == ("cast-offset", Severity.NOTE, "5")
    assert "NITRAT of station 5 cast 1 is 2.0" in finding.message or "is 1.9" in finding.message
    assert "%) higher than in the casts around it at the same density" in finding.message
    assert "where oxygen and temperature agree; expected within 3 %." in finding.message
    assert set(result.flags["nitrate_check"].tolist()) == {1}


def test_offsets_of_many_casts_are_told_together() -> None:
    casts = (2, 5, 8, 11, 14, 17)
    table, _ = shifted(
        "nitrate", *[(cast, pressure, 3.0) for cast in casts for pressure in DEEP], table=ocean(n_cast=20)
    )
    (finding,) = check(table, SETTINGS).findings
    assert (
        "NITRAT of 6 casts (stations 3, 6, 9, 12 and 15 and 1 more) differs from the casts around"
        in finding.message
    )


def test_values_that_are_used_all_the_same_are_not_said_to_be_unused() -> None:
    doubtful = Settings(use=UseSettings(doubtful=True))
    (finding,) = check(scaled("silicate", 10.0), doubtful).findings
    assert "not used" not in finding.message


def test_positions_exchanged_throughout_are_told_once() -> None:
    table = ocean(
        latitude=lambda at: 72.0 - 0.4 * at.c,
        longitude=lambda at: 12.0 + 0.5 * at.c,
        changes={"temperature": lambda at: 2.0 + 25.0 * np.exp(-at.p / 300.0)},
    )
    told = [
        f
        for f in check(table, SETTINGS).findings
        if f.check in ("position-sign", "station-speed", "off-section")
    ]
    (finding,) = told
    assert (finding.severity, finding.count, finding.variable) == (Severity.DOUBT, 10, "latitude")
    assert "LATITUDE and LONGITUDE seem to be exchanged: at 10 of 10 casts they name land" in finding.message
