from __future__ import annotations

from typing import TYPE_CHECKING, Any

import netCDF4
import numpy as np
import pytest

from pipeline.problems import DeliveryProblem
from pipeline.reading import read_delivery
from pipeline.settings import ReadingSettings
from tests.invented import LIMITS
from tests.reading.netcdf_files import FORMATS, Plan, netcdf_bytes, rows
from tests.reading.spoiled import judged, spoiled

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping
    from pathlib import Path


def made(dimensions: Mapping[str, int], variables: Mapping[str, tuple[str, str]], **attributes: str) -> bytes:
    """Return a file of zeros: variables by name, with their dimensions and standard name."""
    file = netCDF4.Dataset("made.nc", mode="w", memory=1 << 20)
    file.setncatts(attributes)
    for name, size in dimensions.items():
        file.createDimension(name, size)
    for name, (along, standard) in variables.items():
        variable = file.createVariable(name, "f8", tuple(along.split()))
        variable.standard_name = standard
        variable[...] = np.arange(variable.size).reshape(variable.shape)
    return bytes(file.close())


PLACE = {"lat": ("", "latitude"), "lon": ("", "longitude")}
PRESSURE, HEAT = "sea_water_pressure_due_to_sea_water", "sea_water_temperature"


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (
            made({"time": 3, "z": 4, "y": 2, "x": 5}, {"p": ("z", PRESSURE), "t": ("time z y x", HEAT)}),
            "found a gridded product (time, z, y, x)",
        ),
        (
            made({"time": 9}, {"p": ("", PRESSURE), "t": ("time", HEAT), **PLACE}),
            "found values along time at one level (p)",
        ),
        (
            made({"time": 9}, {"p": ("time", PRESSURE), "t": ("time", HEAT)}, featureType="trajectory"),
            "found trajectories (featureType is 'trajectory')",
        ),
        (
            made({"s": 3, "z": 4}, {"p": ("z", PRESSURE), "t": ("s z", HEAT)}, featureType="timeSeriesProfile"),
            "found time series of profiles",
        ),
        (
            made({"time": 9}, {"p": ("time", PRESSURE), "t": ("time", HEAT), "lat": ("time", "latitude"),
                               "lon": ("time", "longitude")}),
            "found positions that change along time and no station: a track",
        ),
        (
            made({"time": 9, "z": 3}, {"p": ("z", PRESSURE), "t": ("time z", HEAT), **PLACE}, expocode="ZZV1",
                 station="4"),
            "found 9 profiles that are all of station '4', a time series",
        ),
        (
            made({"y": 9, "x": 3}, {"sst": ("y x", "sea_surface_temperature")}),
            "found neither pressure nor depth among sst (looked for: the standard names",
        ),
        (made({}, {}), "neither pressure nor depth among no variables"),
    ],
)  # fmt: skip
def test_what_is_no_file_of_profiles_is_refused_in_a_sentence(data: bytes, words: str) -> None:
    with pytest.raises(DeliveryProblem) as caught:
        read_delivery("x.nc", data, LIMITS)
    assert caught.value.reason == "no-profiles"
    assert words in str(caught.value)
    assert "expected profiles" in str(caught.value)
    assert "\n" not in str(caught.value)


def test_a_file_whose_variables_are_all_in_groups_says_so() -> None:
    file = netCDF4.Dataset("made.nc", mode="w", memory=1 << 16)
    file.createGroup("casts")
    with pytest.raises(DeliveryProblem, match="no variables outside its groups casts"):
        read_delivery("x.nc", bytes(file.close()), LIMITS)


def vast(file: Any) -> None:
    file.createDimension("vast", 1_250_000_000)  # ten gigabytes of doubles
    file.createVariable("nothing", "f8", ("vast",), chunksizes=(1000,), zlib=True)


@pytest.mark.parametrize("stored", ["NETCDF4", "NETCDF4_CLASSIC"])
def test_a_vast_declared_dimension_is_refused_before_it_is_loaded(stored: str) -> None:
    data = netcdf_bytes(rows(), Plan(format=stored, spoil=vast))
    assert len(data) < 200_000
    with pytest.raises(
        DeliveryProblem, match=r"declares 12500\d+ values; expected at most 100000000"
    ) as caught:
        read_delivery("x.nc", data, LIMITS)
    assert caught.value.reason == "too-large"


def test_a_vast_dimension_of_a_classic_file_is_refused() -> None:
    data = netcdf_bytes(rows(), Plan(format="NETCDF3_CLASSIC"))
    start = data.index(b"profile\0") + 8
    with pytest.raises(DeliveryProblem) as caught:
        read_delivery("x.nc", data[:start] + b"\x4f\xff\xff\xff" + data[start + 4 :], LIMITS)
    assert caught.value.reason == "broken-netcdf"


def test_rows_times_variables_are_bounded_too() -> None:
    limits = ReadingSettings(netcdf_values=190)
    with pytest.raises(
        DeliveryProblem, match=r"9 rows of 22 variables are 198 values; expected at most 190; deliver"
    ):
        read_delivery("x.nc", netcdf_bytes(rows()), limits)


@pytest.mark.parametrize("stored", FORMATS)
@pytest.mark.parametrize("part", [0.02, 0.4, 0.8, 0.99])
def test_a_cut_file_is_refused(stored: str, part: float) -> None:
    data = netcdf_bytes(rows(), Plan(format=stored))
    with pytest.raises(DeliveryProblem) as caught:
        read_delivery("x.nc", data[: int(part * len(data))], LIMITS)
    assert caught.value.reason == "broken-netcdf"
    assert "\n" not in str(caught.value)


def test_ragged_counts_beyond_the_rows_are_refused() -> None:
    def spoil(file: Any) -> None:
        file["row_size"][1] = 2_000_000_000

    with pytest.raises(DeliveryProblem, match="have 2000000007 elements by row_size, but obs has 9"):
        read_delivery("x.nc", netcdf_bytes(rows(), Plan(spoil=spoil)), LIMITS)


def number(file: Any) -> None:
    file.renameVariable("row_size", "counted")
    odd = file.createVariable("row_size", "f8", ("profile",))
    odd.sample_dimension = "obs"
    file["counted"].delncattr("sample_dimension")


def empty(file: Any) -> None:
    for name in [q for q in file.variables if file[q].dimensions == ("obs",)]:
        if file[name].dtype.kind == "f":
            file[name][:] = -9999.0


@pytest.mark.parametrize(
    ("spoil", "words"),
    [
        (number, "row_size tells how the profiles lie and holds no whole numbers"),
        (empty, "there are no data rows"),
    ],
)
def test_files_that_hold_nothing_to_read(spoil: Callable[[Any], None], words: str) -> None:
    with pytest.raises(DeliveryProblem, match=words):
        read_delivery("x.nc", netcdf_bytes(rows(), Plan(spoil=spoil)), LIMITS)


@pytest.mark.parametrize(("stored", "count"), [("NETCDF3_CLASSIC", 300), ("NETCDF4", 24)])
def test_spoiled_bytes_are_refused_or_accounted_for(stored: str, count: int) -> None:
    # python -m tests.reading.spoiled does many more of them
    worst = max(judged(data).seconds for data in spoiled(stored, count))
    assert worst < 10.0


@pytest.mark.parametrize(
    ("script", "words"),
    [
        ("import os, signal\nos.kill(os.getpid(), signal.SIGSEGV)\n", "reading it was ended by signal 11"),
        ("while True: pass\n", "reading it did not end within 0.2 s"),
        ("raise OSError('bad\\nheader')\n", r"\(header\)"),
    ],
)
def test_a_library_that_breaks_down_or_never_ends_takes_one_file_with_it(
    script: str, words: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    worker = tmp_path / "worker.py"
    worker.write_text(script)
    monkeypatch.setattr("pipeline.reading.netcdf_bytes._WORKER", worker)
    monkeypatch.setattr("pipeline.reading.netcdf_bytes._PATIENCE", 0.2)
    with pytest.raises(DeliveryProblem, match=words) as caught:
        read_delivery("x.nc", b"\x89HDF\r\n\x1a\n", ReadingSettings(netcdf_seconds=1))
    assert caught.value.reason == "broken-netcdf"
