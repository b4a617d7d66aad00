from __future__ import annotations

import subprocess
import sys
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.reading import DeliveryKind, read_delivery, survey_cruises
from tests.invented import EXPOCODE, LIMITS, cast_file, checks, read, zipped
from tests.reading.netcdf_files import (
    FORMATS,
    FORMS,
    PRESSURES,
    QUANTITIES,
    Plan,
    assert_same,
    exchange_twin,
    netcdf_bytes,
    read_nc,
    rows,
    samples_for,
)

if TYPE_CHECKING:
    from pathlib import Path


@pytest.mark.parametrize("form", FORMS)
@pytest.mark.parametrize("stored", ["NETCDF3_CLASSIC", "NETCDF4"])
def test_a_cruise_is_the_same_in_every_form_as_in_an_exchange_file(form: str, stored: str) -> None:
    samples = samples_for(form)
    delivery = read_nc(netcdf_bytes(samples, Plan(form, stored)))
    assert_same(read(exchange_twin(samples)), delivery)
    assert delivery.kind is DeliveryKind.BOTTLE
    assert not delivery.findings
    assert not delivery.rejects


@pytest.mark.parametrize("stored", FORMATS)
def test_every_storage_format_gives_the_same(stored: str) -> None:
    assert_same(read(exchange_twin(rows())), read_nc(netcdf_bytes(rows(), Plan(format=stored))))


@pytest.mark.parametrize("form", FORMS)
def test_single_precision_gives_what_single_precision_holds(form: str) -> None:
    samples = samples_for(form)
    twin = read(exchange_twin(samples)).table
    table = read_nc(netcdf_bytes(samples, Plan(form, kind="f4"))).table
    for name in ("pressure", "temperature", "bottle_salinity", "bottle_oxygen"):
        assert (
            table.column(name).to_pylist() == np.float32(twin.column(name).to_numpy()).astype(float).tolist()
        )


@settings(max_examples=60, deadline=None, derandomize=True)
@given(
    data=st.data(),
    form=st.sampled_from(["contiguous", "indexed", "incomplete"]),
    levels=st.lists(st.integers(1, 5), min_size=1, max_size=3),
)
def test_numbers_come_back_as_stored(data: st.DataObject, form: str, levels: list[int]) -> None:
    pressures = tuple(tuple(10.0 * (k + 1) for k in range(count)) for count in levels)
    if sum(levels) < 3:  # the writer takes out a value of the second and the third sample
        pressures = ((10.0, 20.0, 30.0),)
    samples = rows(len(pressures), pressures)
    values = data.draw(st.lists(st.floats(-0.05, 46), min_size=len(samples), max_size=len(samples)))
    samples = [
        row | {"NITRAT": repr(value), "NITRAT_FLAG_W": "2"}
        for row, value in zip(samples, values, strict=True)
    ]
    delivery = read_nc(netcdf_bytes(samples, Plan(form, "NETCDF3_CLASSIC")))
    assert delivery.table.column("nitrate").to_pylist() == values
    assert delivery.rows == len(samples)


CTD = tuple(q for q in QUANTITIES if q.exchange in {"CTDPRS", "CTDTMP", "CTDSAL"})


def test_a_cast_without_bottles_is_one_of_the_ctd() -> None:
    delivery = read_nc(netcdf_bytes(rows(1), Plan("single", identity=False, quantities=CTD)))
    assert delivery.kind is DeliveryKind.CTD
    assert delivery.table.column("ctd_salinity").to_pylist() == [float(row["CTDSAL"]) for row in rows(1)]
    assert delivery.table.column("line").to_pylist() == [1, 2, 3]
    assert checks(delivery) == ["kind-assumed"]
    exchange = read(cast_file(), "cast_ct1.csv").table.column_names
    assert {"station", "cast", "time", "latitude", "bottom_depth", "pressure"} <= set(exchange)
    assert set(exchange) - set(delivery.table.column_names) == {"pressure_flag", "temperature_flag"}


def test_casts_in_a_zip() -> None:
    casts = {
        f"cast{number}.nc": netcdf_bytes(rows(1), Plan("single", stored, identity=False, quantities=CTD))
        for number, stored in enumerate(("NETCDF3_CLASSIC", "NETCDF4"))
    }
    data = zipped(
        {**casts, "c_ct1.csv": cast_file(), "d.nc": netcdf_bytes(rows()), "e.nc": casts["cast1.nc"][:900]}
    )
    delivery = read_delivery("casts.zip", data, LIMITS)
    assert set(delivery.table.column("file").to_pylist()) == {
        "casts.zip:cast0.nc", "casts.zip:cast1.nc", "casts.zip:c_ct1.csv",
    }  # fmt: skip
    assert [(reject.raw, reject.reason) for reject in delivery.rejects] == [
        ("d.nc", "bottle-in-zip"), ("e.nc", "broken-netcdf"),
    ]  # fmt: skip
    assert survey_cruises("casts.zip", zipped(casts), LIMITS) == (EXPOCODE,)


def test_storage_that_is_not_used_is_no_row() -> None:
    delivery = read_nc(netcdf_bytes(rows(), Plan("incomplete")))
    assert delivery.rows == 9
    assert delivery.table.column("line").to_pylist() == [1, 2, 3, 5, 6, 9, 10, 11, 12]


def test_levels_that_all_profiles_share_are_rows_where_something_was_measured() -> None:
    def spoil(file: Any) -> None:
        for name in [name for name in file.variables if file[name].dimensions == ("profile", "level")]:
            if file[name].dtype.kind == "f":
                file[name][2, 1:] = -9999.0

    delivery = read_nc(netcdf_bytes(rows(3, (PRESSURES[0],) * 3), Plan("orthogonal", spoil=spoil)))
    assert delivery.table.column("line").to_pylist() == [1, 2, 3, 4, 5, 6, 7]


def test_a_row_without_pressure_is_rejected_with_its_record_and_values() -> None:
    def spoil(file: Any) -> None:
        file["pressure"][4] = -9999.0

    delivery = read_nc(netcdf_bytes(rows(), Plan(spoil=spoil)))
    (reject,) = delivery.rejects
    assert (reject.line, reject.reason, reject.expocode) == (5, "no-pressure", EXPOCODE)
    assert reject.message.startswith("cruise.nc, record 5: the pressure (pressure) is missing")
    assert "nitrate=5.1" in reject.raw
    assert delivery.rows == 9


_CHECKER = """
import sys, warnings
warnings.simplefilter("ignore")
from compliance_checker.runner import CheckSuite
suite = CheckSuite()
suite.load_all_available_checkers()
for path in sys.argv[1:]:
    groups, errors = suite.run_all(suite.load_dataset(path), ["cf:1.11"], skip_checks=[])["cf:1.11"]
    told = [str(error) for error in errors]
    told += [group.name for group in groups if isinstance(group.value, tuple) and group.value[0] < group.value[1]]
    print(path.rsplit("/", 1)[-1], len(groups) > 20, told)
"""


def test_the_rules_of_cf_hold_for_what_the_tests_write(tmp_path: Path) -> None:
    def spoil(file: Any) -> None:
        file["nitrate"].standard_name = "love_of_the_sea"

    files = {form: netcdf_bytes(samples_for(form), Plan(form)) for form in FORMS}
    files["wrong"] = netcdf_bytes(rows(), Plan(spoil=spoil))  # the checker does look
    for name, data in files.items():
        (tmp_path / f"{name}.nc").write_bytes(data)
    paths = [str(tmp_path / f"{name}.nc") for name in files]
    done = subprocess.run(
        [sys.executable, "-c", _CHECKER, *paths], capture_output=True, text=True, check=True
    )
    assert done.stdout.splitlines() == [
        *(f"{form}.nc True []" for form in FORMS), "wrong.nc True ['§3.3 Standard Name']",
    ]  # fmt: skip
