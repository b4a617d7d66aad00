from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest

from pipeline import seawater
from pipeline.crossovers import Crossover, compare_cruises, gather_stations, propose, where_corrected
from pipeline.crossovers.comparing import compare_cruises as compared
from pipeline.crossovers.quantities import QUANTITIES, CorrectionKind, Surface
from pipeline.settings import Settings
from pipeline.tables import with_columns
from tests.crossovers.invented import NOISE, SECTION, SETTINGS, cruise, ocean, samples

if TYPE_CHECKING:
    from pipeline.crossovers import CruiseStations, Proposal
    from tests.crossovers.invented import FloatArray

ONE, OTHER = "ZZV120090306", "ZZV220210218"
PLANTED: dict[str, Any] = {"added": {"bottle_oxygen": 3.0}, "factor": {"silicate": 1.02}}
REFERENCE = Settings.model_validate({"crossovers": {"reference": [ONE]}})


def by_name(crossovers: list[Crossover]) -> dict[str, Crossover]:
    return {c.quantity.name: c for c in crossovers}


def of(crossover: Crossover) -> float:
    """Return the offset of the second cruise to the first, as a part or in the unit."""
    return float(np.expm1(-crossover.offset)) if crossover.relative else -crossover.offset


def density(pressure: FloatArray, error: float) -> FloatArray:
    """Return sigma4 of the invented ocean, kg/m3, with an error of salinity, (n,)."""
    true = ocean(pressure)
    salinity = seawater.absolute_salinity(true["bottle_salinity"] + error, pressure, -20.0, -29.0)
    heat = seawater.conservative_temperature(salinity, true["temperature"], pressure)
    return seawater.potential_density_anomaly(salinity, heat, 4000.0)


@pytest.mark.parametrize("seed", range(8))
def test_planted_offsets_are_found_within_their_uncertainty_and_nothing_else_is_proposed(seed: int) -> None:
    pair = [cruise(ONE, seed), cruise(OTHER, 100 + seed, **PLANTED, year=2021)]
    found = by_name(compare_cruises(pair, SETTINGS.crossovers))
    assert list(found) == list(NOISE)
    oxygen, silicate = found["bottle_oxygen"], found["silicate"]
    assert abs(of(oxygen) * oxygen.typical - 3.0) < 2 * oxygen.uncertainty * oxygen.typical
    assert abs(of(silicate) - 0.02) < 2 * silicate.uncertainty
    for name in set(NOISE) - {"bottle_oxygen", "silicate"}:
        assert abs(found[name].offset) < 3 * found[name].uncertainty, name
    assert oxygen.years_apart == pytest.approx(-12.0, abs=0.01)
    proposals = propose(list(found.values()), REFERENCE.crossovers)
    # What is taken as right is never corrected, and 2 % is the limit of silicate itself.
    assert {(p.expocode, p.quantity.name) for p in proposals if p.proposed} <= {
        (OTHER, "bottle_oxygen"),
        (OTHER, "silicate"),
    }


def test_offsets_of_many_pairs_cover_the_truth_as_often_as_they_say() -> None:
    # The ocean does not change here and nothing is presumed of it, so that the whole is put to the test.
    settings = Settings.model_validate({"crossovers": {"between_places": 0.0}})
    ratios = []
    for seed in range(25):
        pair = [
            cruise(ONE, 300 + seed, settings, stations=SECTION[:4]),
            cruise(OTHER, 600 + seed, settings, stations=SECTION[1:5], **PLANTED),
        ]
        for name, c in by_name(compared(pair, settings.crossovers)).items():
            truth = {"bottle_oxygen": 3.0 / c.typical, "silicate": 0.02}.get(name, 0.0)
            ratios.append(abs(of(c) - truth) / c.uncertainty)
    inside = np.array(ratios)
    assert len(inside) == 25 * len(NOISE)
    assert (
        0.62 < np.mean(inside <= 1) < 0.86
    )  # 68.3 % of a normal error; what is presumed errs to the safe side
    assert np.mean(inside <= 2) > 0.93


def test_making_the_correction_makes_the_cruises_agree() -> None:
    table = samples(OTHER, 5, added={"bottle_oxygen": 8.0}, factor={"silicate": 1.06})
    one = cruise(ONE, 4)
    before = compare_cruises([one, gather_stations(OTHER, table, SETTINGS)], SETTINGS.crossovers)
    for p in propose(before, REFERENCE.crossovers):
        if p.proposed:
            assert p.quantity.kind is CorrectionKind.MULTIPLICATIVE
            corrected = np.asarray(table.column(p.quantity.name)) * p.correction
            table = with_columns(table, {f"{p.quantity.name}_corrected": corrected})
    assert {n for n in table.column_names if n.endswith("_corrected")} == {
        "bottle_oxygen_corrected",
        "silicate_corrected",
    }
    after = compare_cruises([one, gather_stations(OTHER, table, SETTINGS)], SETTINGS.crossovers)
    was, now = by_name(before), by_name(after)
    for name in ("bottle_oxygen", "silicate"):
        assert abs(now[name].offset) < 0.1 * abs(was[name].offset)


def test_swapping_the_cruises_changes_the_sign_alone() -> None:
    one, other = cruise("ZZVA", 1), cruise("ZZVB", 2, **PLANTED)
    back = cruise("ZZVA", 2, **PLANTED), cruise("ZZVB", 1)
    forth = by_name(compare_cruises([one, other], SETTINGS.crossovers))
    for name, c in by_name(compare_cruises(list(back), SETTINGS.crossovers)).items():
        assert c.offset == pytest.approx(-forth[name].offset, rel=1e-9)
        assert c.uncertainty == pytest.approx(forth[name].uncertainty, rel=1e-9)


def test_a_triangle_closes_within_its_uncertainty() -> None:
    cruises = [cruise("ZZVA", 1), cruise("ZZVB", 2, **PLANTED), cruise("ZZVC", 3, factor={"silicate": 0.97})]
    crossovers = compare_cruises(cruises, SETTINGS.crossovers)
    for quantity in QUANTITIES:
        ab, ac, bc = (c for c in crossovers if c.quantity is quantity)
        assert (ab.expocode, ab.other, bc.expocode) == ("ZZVA", "ZZVB", "ZZVB")
        sum_of = np.hypot(np.hypot(ab.uncertainty, bc.uncertainty), ac.uncertainty)
        assert abs(ab.offset + bc.offset - ac.offset) < sum_of


def test_where_two_cruises_differ_neither_can_be_blamed() -> None:
    pair = [cruise(ONE, 1), cruise(OTHER, 2, factor={"silicate": 1.2})]
    proposals = propose(compare_cruises(pair, SETTINGS.crossovers), SETTINGS.crossovers)
    silicate = [p for p in proposals if p.quantity.name == "silicate"]
    assert not any(p.proposed for p in proposals)
    assert all("name a reference" in p.why_not for p in silicate)
    assert silicate[0].correction * silicate[1].correction == pytest.approx(1.0, abs=1e-6)


def test_the_one_of_four_that_is_off_is_the_one_that_is_blamed() -> None:
    cruises = [cruise(f"ZZV{k}", k, factor={"nitrate": 1.08} if k == 3 else {}) for k in range(4)]
    proposals = propose(compare_cruises(cruises, SETTINGS.crossovers), SETTINGS.crossovers)
    (blamed,) = [p for p in proposals if p.proposed]
    assert (blamed.expocode, blamed.quantity.name, blamed.crossovers) == ("ZZV3", "nitrate", 3)
    assert blamed.correction == pytest.approx(1 / 1.08, abs=2 * blamed.uncertainty)


def test_nothing_is_proposed_where_every_crossover_agrees() -> None:
    # Silicates that are off, but within twice the uncertainty of every crossover; all together would say more.
    found = compare_cruises([cruise(f"ZZV{k}", k) for k in range(4)], SETTINGS.crossovers)
    silicate = [c for c in found if c.quantity.name == "silicate"]
    off = [
        replace(c, offset=0.06, uncertainty=0.031)
        if c.other == "ZZV3"
        else replace(c, offset=0.0, uncertainty=0.005)
        for c in silicate
    ]
    assert all(c.agrees for c in off)
    ready = Settings.model_validate({"crossovers": {"certainty": 1.5}}).crossovers
    (last,) = [p for p in propose(off, ready) if p.expocode == "ZZV3"]
    assert last.size > max(last.quantity.limit, 1.5 * last.uncertainty)
    assert last.why_not == "all its crossovers agree within their uncertainty"
    disagree = [replace(c, uncertainty=0.029) if c.other == "ZZV3" else c for c in off]
    (blamed,) = [p for p in propose(disagree, ready) if p.proposed]
    assert blamed.expocode == "ZZV3"


def test_a_correction_in_force_is_not_proposed_again_where_it_works() -> None:
    cruises = [cruise(f"ZZV{k}", k, factor={"nitrate": 1.08} if k == 3 else {}) for k in range(4)]
    found = compare_cruises(cruises, SETTINGS.crossovers)

    def with_factor(factor: float) -> list[Proposal]:
        applied = {"ZZV3": {"nitrate": {"factor": factor, "reason": "invented"}}}
        last = cruise("ZZV3", 3, factor={"nitrate": 1.08 * factor})
        remaining = compare_cruises([*cruises[:3], last], SETTINGS.crossovers)
        assert {name for *_, name in where_corrected(remaining, applied)} == {"nitrate"}
        return propose(found, SETTINGS.crossovers, applied, remaining)

    right = with_factor(1 / 1.08)
    assert not any(p.proposed for p in right)
    (standing,) = [p for p in right if p.in_force]
    assert (standing.expocode, standing.quantity.name) == ("ZZV3", "nitrate")
    assert standing.why_not == "a correction is in force, and what remains is not worth another"
    assert standing.remains == pytest.approx(1.0, abs=2 * (standing.remains_uncertainty or 0.0))
    (blamed,) = [p for p in with_factor(0.97) if p.proposed]
    assert (blamed.expocode, blamed.in_force) == ("ZZV3", "times 0.97")
    assert blamed.remains == pytest.approx(blamed.correction / 0.97, rel=0.01)


def test_a_wrong_salinity_is_seen_in_full_and_shifts_what_is_compared_at_equal_density() -> None:
    # The saltier cruise seems as dense as deeper water of the other, which holds more silicate. Salinity itself
    # is compared at equal potential temperature, where none of its offset hides.
    off = by_name(
        compare_cruises(
            [cruise(ONE, 1, noise=0.1), cruise(OTHER, 2, noise=0.1, added={"bottle_salinity": 0.02})],
            SETTINGS.crossovers,
        )
    )
    salinity, silicate = off["bottle_salinity"], off["silicate"]
    assert salinity.surfaces == (Surface.TEMPERATURE,)
    assert of(salinity) == pytest.approx(0.02, abs=0.0015)
    pressure = np.linspace(1500.0, 4600.0, 400)
    right, dense = (density(pressure, error) for error in (0.0, 0.02))
    hidden = np.log(ocean(pressure)["silicate"] / np.interp(dense, right, ocean(pressure)["silicate"]))
    assert of(silicate) < -0.01
    assert of(silicate) == pytest.approx(hidden[dense < right[-1]].mean(), rel=0.15)


def test_water_of_one_density_is_compared_at_equal_pressure() -> None:
    def filled(expocode: str, seed: int, silicate: float) -> CruiseStations:
        table = samples(expocode, seed, quantities=["silicate"], noise=0.0)
        rows = table.num_rows
        density = 45.9 + np.random.default_rng(seed).uniform(-0.005, 0.005, rows)
        value = silicate + np.asarray(table.column("pressure")) / 1000.0
        return gather_stations(
            expocode, with_columns(table, {"sigma4": density, "silicate": value}), SETTINGS
        )

    (found,) = compare_cruises([filled(ONE, 1, 50.0), filled(OTHER, 2, 51.0)], SETTINGS.crossovers)
    assert found.surfaces == (Surface.PRESSURE,)
    assert of(found) * found.typical == pytest.approx(1.0, abs=0.02)


def test_a_change_of_the_deeper_water_is_no_calibration() -> None:
    table = samples(OTHER, 2)
    pressure, silicate = (np.asarray(table.column(name)) for name in ("pressure", "silicate"))
    table = with_columns(table, {"silicate": np.where(pressure > 3200.0, 1.08, 1.0) * silicate})
    pair = [cruise(ONE, 1), gather_stations(OTHER, table, SETTINGS)]
    changed = by_name(compare_cruises(pair, SETTINGS.crossovers))["silicate"]
    steady = by_name(compare_cruises([cruise(ONE, 1), cruise(OTHER, 2)], SETTINGS.crossovers))["silicate"]
    assert changed.differs_with_depth
    assert not steady.differs_with_depth
    assert changed.uncertainty > 2 * steady.uncertainty


@pytest.mark.parametrize(
    ("how", "why"),
    [
        ({"pressures": (100.0, 1300.0)}, "no deep data"),
        ({"stations": [(-30.0, 40.0)]}, "far apart"),
        ({"stations": [(-30.0, -17.5)], "bottles": 12}, "2.2 degrees of arc on its parallel"),
        ({"bottles": 3}, "two deep samples"),
        ({"quantities": []}, "nothing measured"),
    ],
)
def test_cruises_that_cannot_be_compared_have_no_crossover(how: dict[str, Any], why: str) -> None:
    one = cruise(ONE, 1, stations=[(-30.0, -20.0)])
    assert compare_cruises([one, cruise(OTHER, 2, **how)], SETTINGS.crossovers) == [], why


def test_one_cruise_alone_and_no_cruise_at_all() -> None:
    assert compare_cruises([cruise(ONE, 1)], SETTINGS.crossovers) == []
    assert compare_cruises([], SETTINGS.crossovers) == []
    assert propose([], SETTINGS.crossovers) == []


def test_a_crossing_over_the_date_line() -> None:
    east, west = [(-30.0 + 0.5 * k, 179.5) for k in range(4)], [(-30.0 + 0.5 * k, -179.5) for k in range(4)]
    found = compare_cruises(
        [cruise(ONE, 1, stations=east), cruise(OTHER, 2, stations=west)], SETTINGS.crossovers
    )
    assert {c.quantity.name for c in found} == set(NOISE)


def test_one_cast_on_either_side_is_compared_with_the_uncertainty_of_one_cast() -> None:
    single = cruise(ONE, 1, stations=SECTION[:1]), cruise(OTHER, 2, stations=SECTION[:1])
    several = cruise(ONE, 1), cruise(OTHER, 2)
    few = by_name(compare_cruises(list(single), SETTINGS.crossovers))
    many = by_name(compare_cruises(list(several), SETTINGS.crossovers))
    assert few["dic"].station_pairs == 1
    assert few["dic"].uncertainty > 1.3 * many["dic"].uncertainty


def test_the_same_cast_counted_ten_times_over_is_known_no_better() -> None:
    one, other = cruise(ONE, 1, stations=SECTION[:1]), cruise(OTHER, 2, stations=SECTION[:1])
    crowd = cruise(OTHER, 2, stations=[SECTION[0]] * 10)
    few, many = (by_name(compare_cruises([one, b], SETTINGS.crossovers))["nitrate"] for b in (other, crowd))
    # The one cast of the first cruise and the place are what they all share.
    assert many.station_pairs == 10
    assert many.uncertainty > 0.6 * few.uncertainty


def test_doubted_flags_and_ph_at_another_temperature_take_no_part() -> None:
    table = samples(OTHER, 2)
    bad = with_columns(
        table, {"nitrate_flag": [3] * table.num_rows, "ph_temperature": [20.0] * table.num_rows}
    )
    stations = gather_stations(OTHER, bad, SETTINGS)
    names = set(by_name(compare_cruises([cruise(ONE, 1), stations], SETTINGS.crossovers)))
    assert names == set(NOISE) - {"nitrate", "ph_total"}
    assert stations.left_out["ph_total"] > 0


def test_two_casts_of_a_station_are_one_profile_and_a_number_used_again_elsewhere_is_another() -> None:
    table = samples(ONE, 1, stations=[(-30.0, -20.0), (-30.01, -20.0), (-10.0, -20.0)])
    stations = gather_stations(ONE, with_columns(table, {"station": ["7"] * table.num_rows}), SETTINGS)
    assert stations.names == ("7", "7")
    deep = np.asarray(table.column("pressure")).reshape(3, -1) >= 1500.0
    assert [len(rows) for rows in stations.samples] == [deep[:2].sum(), deep[2].sum()]


def test_order_of_rows_and_of_cruises_does_not_matter() -> None:
    table = samples(OTHER, 2, **PLANTED)
    mixed = table.take(np.random.default_rng(1).permutation(table.num_rows))
    one = cruise(ONE, 1)
    first = compare_cruises([one, gather_stations(OTHER, table, SETTINGS)], SETTINGS.crossovers)
    second = compare_cruises([gather_stations(OTHER, mixed, SETTINGS), one], SETTINGS.crossovers)
    for a, b in zip(first, second, strict=True):
        assert (a.offset, a.uncertainty) == pytest.approx((b.offset, b.uncertainty), rel=1e-9)
