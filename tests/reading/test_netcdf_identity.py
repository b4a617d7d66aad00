from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from pipeline.problems import DeliveryProblem
from pipeline.reading import survey_cruises
from pipeline.reading.description import Description
from tests.invented import EXPOCODE, LIMITS, checks, one, read
from tests.reading.netcdf_files import (
    Plan,
    assert_same,
    exchange_twin,
    netcdf_bytes,
    read_nc,
    rows,
)


def refused(data: bytes, description: Description | None = None) -> DeliveryProblem:
    with pytest.raises(DeliveryProblem) as caught:
        read_nc(data, description)
    assert str(caught.value).startswith("cruise.nc")
    assert "\n" not in str(caught.value)
    return caught.value


def test_identity_may_come_in_variables_of_numbers_and_texts() -> None:
    def spoil(file: Any) -> None:
        file.renameVariable("station", "old")
        file["old"].delncattr("cf_role")
        station = file.createVariable("station", "i4", ("profile",))
        station[:] = [7, 8, 9]
        code = file.createVariable("expocode", str, ("profile",))
        code[:] = np.array(["ZZV120090214", "ZZV120090214", "ZZV220090301"], dtype=object)
        file.delncattr("expocode")

    delivery = read_nc(netcdf_bytes(rows(), Plan(format="NETCDF4", spoil=spoil)))
    assert delivery.cruises == ("ZZV120090214", "ZZV220090301")
    assert delivery.table.column("station").to_pylist() == ["7"] * 3 + ["8"] * 2 + ["9"] * 4
    assert one(delivery, "old") == "1"


def test_dates_and_times_of_day_as_exchange_files_have_them() -> None:
    def spoil(file: Any) -> None:
        for name in ("units", "standard_name"):
            file["time"].delncattr(name)
        file.renameVariable("time", "when")
        for name, values in (("DATE", [20090214, 20090215, 20090216]), ("TIME", [803, 0, 2359])):
            variable = file.createVariable(name, "i4", ("profile",))
            variable[:] = values

    samples = rows()
    delivery = read_nc(netcdf_bytes(samples, Plan(spoil=spoil)))
    twin = read(exchange_twin(samples))
    for name in ("date", "time"):
        assert delivery.table.column(name).to_pylist() == twin.table.column(name).to_pylist()


def test_positions_may_be_written_in_minutes() -> None:
    def spoil(file: Any) -> None:
        file.renameVariable("latitude", "old")
        file["old"].delncattr("standard_name")
        file.createDimension("letters", 9)
        variable = file.createVariable("LATITUDE", "S1", ("profile", "letters"))
        variable[:] = np.array([list(text) for text in ("35 30.0 S", "36 00.0 S", "36 30.0 S")], dtype="S1")

    delivery = read_nc(netcdf_bytes(rows(), Plan(spoil=spoil)))
    assert delivery.table.column("latitude").to_pylist() == [-35.5] * 3 + [-36.0] * 2 + [-36.5] * 4


def test_names_that_differ_in_capitals_only() -> None:
    def spoil(file: Any) -> None:
        variable = file.createVariable("Nitrate", "f8", ("obs",))
        variable[:] = np.arange(9.0)

    delivery = read_nc(netcdf_bytes(rows(), Plan(spoil=spoil)))
    assert one(delivery, "nitrate") == float(rows()[0]["NITRAT"])
    assert one(delivery, "Nitrate'", 2) == 2.0


def test_positions_within_a_cast_may_differ_where_the_station_is_known() -> None:
    def spoil(file: Any) -> None:
        for name, values in (("lat", [-35.5, -35.6, -35.7]), ("lon", [-12.0, -12.1, -12.2])):
            variable = file.createVariable(name, "f8", ("obs",))
            variable[:] = values
            variable.standard_name = {"lat": "latitude", "lon": "longitude"}[name]
        for name in ("latitude", "longitude"):
            file.renameVariable(name, f"old_{name}")
            file[f"old_{name}"].delncattr("standard_name")

    delivery = read_nc(netcdf_bytes(rows(1), Plan("single", spoil=spoil)))
    assert delivery.table.column("latitude").to_pylist() == [-35.5, -35.6, -35.7]


def test_a_sample_of_no_profile_is_rejected() -> None:
    def spoil(file: Any) -> None:
        file["of_profile"][3] = 7

    delivery = read_nc(netcdf_bytes(rows(), Plan("indexed", spoil=spoil)))
    assert [(reject.line, reject.reason) for reject in delivery.rejects] == [(4, "no-station")]


def test_without_an_expocode_it_is_told_what_to_write() -> None:
    data = netcdf_bytes(rows(), Plan(attributes={"expocode": ""}))
    assert str(refused(data)) == (
        "cruise.nc: the file does not tell its expocode; expected a variable or global attribute of that name, or a"
        ' cruise.toml beside it with the lines: [[file]]; files = "cruise.nc"; [file.constants]; expocode ='
        ' "ZZV120090214" (with your own values, a line each).'
    )
    description = Description("cruise.nc", constants={"expocode": EXPOCODE})
    assert_same(read_nc(data, description), read_nc(netcdf_bytes(rows())))
    assert survey_cruises("cruise.nc", data, LIMITS, description) == (EXPOCODE,)
    assert survey_cruises("cruise.nc", data, LIMITS) == ()


def test_three_positions_of_one_cast_are_told_and_the_median_taken() -> None:
    def spoil(file: Any) -> None:
        file.createDimension("stage", 3)
        for name, values in (("lat3", [-35.1, -35.2, -35.4]), ("lon3", [179.9, -179.8, -179.9])):
            variable = file.createVariable(name, "f8", ("stage",))
            variable[:] = values
            variable.standard_name = {"lat3": "latitude", "lon3": "longitude"}[name]
        for name in ("latitude", "longitude"):
            file.renameVariable(name, f"old_{name}")
            file[f"old_{name}"].delncattr("standard_name")

    delivery = read_nc(netcdf_bytes(rows(1), Plan("single", spoil=spoil)))
    assert one(delivery, "latitude") == -35.2
    assert one(delivery, "longitude") == pytest.approx(-179.9)
    assert checks(delivery) == ["several-of-one", "several-of-one"]
    assert delivery.findings[0].message == (
        "cruise.nc: lat3 gives 3 values of latitude along stage for one cast; the median, -35.2, was taken for all its"
        " rows."
    )


def test_no_time_leaves_it_missing() -> None:
    def spoil(file: Any) -> None:
        file.renameVariable("time", "when")
        file["when"].delncattr("units")
        file["when"].delncattr("standard_name")

    delivery = read_nc(netcdf_bytes(rows(), Plan(spoil=spoil)))
    assert delivery.table.column("time").null_count == delivery.table.column("date").null_count == 9
    assert one(delivery, "when") is not None


@pytest.mark.parametrize(
    ("units", "calendar", "words", "read_as"),
    [
        (
            "seconds since 2009-01-01 00:00:00 00:00",
            "standard",
            "'00:00', which is no time zone; UTC was taken",
            True,
        ),
        (
            "fortnights since 2009-01-01",
            "standard",
            "its unit 'fortnights since 2009-01-01' cannot be read",
            False,
        ),
        ("seconds since 2009-13-01", "standard", "counts from a day that does not exist", False),
        (
            "seconds since 2009-01-01 00:00:00",
            "360_day",
            "its calendar '360_day' is not that of the world",
            False,
        ),
        (
            "seconds since 2009-01-01 00:00:00 10:00",
            "standard",
            "ends in '10:00', which cannot be read",
            False,
        ),
    ],
)
def test_odd_units_of_time_are_told(units: str, calendar: str, words: str, read_as: bool) -> None:
    def spoil(file: Any) -> None:
        file["time"].setncatts({"units": units, "calendar": calendar})

    delivery = read_nc(netcdf_bytes(rows(), Plan(spoil=spoil)))
    (finding,) = (f for f in delivery.findings if f.check == "time-unit")
    assert words in finding.message
    assert (one(delivery, "time") is not None) is read_as
