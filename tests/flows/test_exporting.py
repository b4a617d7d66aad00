"""NetCDF files of the demonstration's cruises: CF by an independent checker, and back through our own reader."""

from __future__ import annotations

import json
import subprocess
import sys
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pytest
import xarray as xr

from pipeline.archive import open_archive, read_cruise, read_table
from pipeline.exporting import export_netcdf
from pipeline.exporting.profiles import OF_A_CAST
from pipeline.reading import read_delivery
from pipeline.reading.schemes import WHP_MEANINGS
from pipeline.settings import ReadingSettings
from pipeline.tables import cast_groups
from pipeline.variables import MEASURED, REGISTRY, flag_name

from .conftest import Outcome, call

if TYPE_CHECKING:
    from pathlib import Path

CASES = [
    ("ZZV120090306", "samples"), ("ZZV220210218", "samples"), ("ZZV519960914", "samples"), ("ZZV120090306", "casts"),
    ("ZZV620170405", "casts"),
]  # fmt: skip
CHECKER = """
import sys, warnings
warnings.simplefilter("ignore")
from compliance_checker.runner import CheckSuite
suite = CheckSuite()
suite.load_all_available_checkers()
for path in sys.argv[1:]:
    groups, errors = suite.run_all(suite.load_dataset(path), ["cf:1.11"], skip_checks=[])["cf:1.11"]
    told = [str(error) for error in errors]
    told += [group.name for group in groups if isinstance(group.value, tuple) and group.value[0] < group.value[1]]
    print(len(groups) > 20, told)
"""


@pytest.fixture(scope="module")
def files(
    demonstration: tuple[Path, Outcome], tmp_path_factory: pytest.TempPathFactory
) -> dict[tuple[str, str], Path]:
    folder = tmp_path_factory.mktemp("exported")
    made = {}
    for cruise, table in CASES:
        out = folder / f"{cruise}_{table}.nc"
        told = call("export", demonstration[0], cruise, "--table", table, "--out", out)
        assert told.status == 0, told.err
        made[cruise, table] = out
    return made


def archived(archive: Path, cruise: str, table: str) -> pa.Table:
    """Return a table with its rows cast by cast."""
    found = read_table(open_archive(archive), cruise, table)
    return found.take(pa.array(np.argsort(cast_groups(found), kind="stable")))


@pytest.mark.parametrize(("cruise", "name"), [("ZZV519960914", "samples"), ("ZZV620170405", "casts")])
def test_an_independent_checker_finds_no_fault(
    cruise: str, name: str, demonstration: tuple[Path, Outcome], tmp_path: Path
) -> None:
    """A column of every kind: the checker's time grows with the square of their number."""
    store = open_archive(demonstration[0])
    made = read_cruise(store, cruise).provenance
    assert made is not None
    table, mixtures = (read_table(store, cruise, one) for one in (name, "mixtures"))
    always = [
        one for one in (*OF_A_CAST, "expocode", "sample", "line", "pressure") if one in table.column_names
    ]
    kinds: dict[tuple[object, ...], str] = {}
    for field in table.schema:
        told = field.metadata or {}
        ends = field.name.endswith("_uncertainty"), field.name.startswith("residual_")
        made_of = (field.type, told.get(b"units"), b"standard_name" in told, field.name in REGISTRY, *ends)
        kinds.setdefault(made_of if field.name not in always else (), field.name)
    chosen = [*always, *(one for one in kinds.values() if one not in always)]
    assert len(chosen) > 20
    path = tmp_path / "exported.nc"
    path.write_bytes(export_netcdf(name, table.select(chosen), mixtures, made))
    done = subprocess.run([sys.executable, "-c", CHECKER, path], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines() == ["True []"]


@pytest.mark.parametrize("case", CASES, ids="-".join)
def test_our_own_reader_finds_the_same_measured_values_and_flags(
    case: tuple[str, str], files: dict[tuple[str, str], Path], demonstration: tuple[Path, Outcome]
) -> None:
    back = read_delivery("cruise.nc", files[case].read_bytes(), ReadingSettings())
    table = archived(demonstration[0], *case)
    assert not back.rejects
    assert back.kind == ("bottle" if case[1] == "samples" else "ctd")
    measured = [name for name in MEASURED if name in table.column_names]
    flags = [flag_name(name) for name in measured if flag_name(name) in table.column_names]
    assert len(measured) >= 4
    identity = [
        name for name in ("expocode", "station", "cast", "sample", "bottle", "bottle_flag", "time", "latitude",
                          "longitude", "bottom_depth", "section") if name in table.column_names
    ]  # fmt: skip
    for name in (*measured, *flags, *identity):
        assert back.table.column(name).to_pylist() == table.column(name).to_pylist(), name
    new = {name for name in MEASURED if name in back.table.column_names} - set(measured)
    assert new <= {"delivered_potential_temperature"}, "nothing computed may come back as measured"


def test_shares_lie_by_row_and_source(
    files: dict[tuple[str, str], Path], demonstration: tuple[Path, Outcome]
) -> None:
    mixtures = read_table(open_archive(demonstration[0]), "ZZV120090306", "mixtures").to_pylist()
    with xr.open_dataset(files["ZZV120090306", "samples"], decode_times=False) as file:
        sources = [
            name.decode() if isinstance(name, bytes) else name for name in file.source_water.values.tolist()
        ]
        assert sources == ["OVF", "BOT", "DEP", "MID", "CEN"]
        line = file.line.values.tolist()
        for row in mixtures[::97]:
            at = line.index(row["line"]), sources.index(row["source"])
            for name in ("share", "share_uncertainty", "share_p16", "share_p84"):
                assert file[name].values[at] == row[name]
        assert np.isfinite(file.share.values).sum() == len(mixtures)


def test_flags_units_and_scales_are_told(files: dict[tuple[str, str], Path]) -> None:
    with xr.open_dataset(files["ZZV120090306", "samples"], decode_cf=False) as file:
        assert file.attrs["Conventions"] == "CF-1.11, ACDD-1.3"
        assert file.attrs["featureType"] == "profile"
        assert file.nitrate.ancillary_variables == "nitrate_flag nitrate_check"
        assert file.nitrate.units == "umol kg-1"
        flags, meanings = file.nitrate_flag.flag_values.tolist(), file.nitrate_flag.flag_meanings.split()
        assert flags == list(WHP_MEANINGS[REGISTRY["nitrate"].flags])  # type: ignore[index]
        assert meanings[flags.index(3)] == "questionable"
        assert file.nitrate_check.flag_meanings.split()[0] == "good"
        assert file.conservative_temperature.units_metadata == "temperature: on_scale"
        assert file.residual_conservative_temperature.units_metadata == "temperature: difference"
        assert file.sigma2.coordinates.endswith("reference_pressure_of_sigma2")
        assert float(file.reference_pressure_of_sigma2) == 2000.0
        assert file.aou.standard_name == "apparent_oxygen_utilization"
        assert "standard_name" not in file.ph_in_situ.attrs
        assert file.row_size.sample_dimension == "obs"
        assert int(file.row_size.sum()) == file.sizes["obs"] == 1074
        assert int(file.profile_id.shape[0]) == file.sizes["profile"] == 45
        made = json.loads(file.attrs["seawhence_provenance"])
        assert made["expocode"] == file.attrs["expocode"] == "ZZV120090306"
        assert made["deliveries"][0]["sha256"] in file.attrs["history"] + file.attrs["seawhence_provenance"]


def test_what_was_delivered_in_another_unit_cannot_be_taken_for_it(
    files: dict[tuple[str, str], Path],
) -> None:
    with xr.open_dataset(files["ZZV519960914", "samples"], decode_cf=False) as file:
        assert "IPTS-68" not in " ".join(map(str, file.temperature.attrs.values()))
        assert (
            "temperature: delivered name CTDTMP; delivered units IPTS-68"
            in file.attrs["seawhence_deliveries"]
        )
        assert "units" not in file.delivered_CTDTMP.attrs
        assert "CTDTMP" not in file.variables


def test_the_same_table_gives_the_same_bytes(
    files: dict[tuple[str, str], Path], demonstration: tuple[Path, Outcome], tmp_path: Path
) -> None:
    out = tmp_path / "again.nc"
    assert call("export", demonstration[0], "ZZV120090306", "--out", out).status == 0
    assert out.read_bytes() == files["ZZV120090306", "samples"].read_bytes()


@pytest.mark.parametrize(
    ("arguments", "sentence"),
    [
        (("ZZV9", "--out", "a.nc"), "there is no cruise 'ZZV9'"),
        (("ZZV120090306", "--out", "a.csv"), "expected .nc"),
        (("ZZV620170405", "--out", "a.nc"), "has no samples, so there is no profile to write"),
        (("ZZV120090306", "--out", "nowhere/a.nc"), "cannot be written"),
    ],
)
def test_what_cannot_be_done_is_told_in_a_sentence(
    arguments: tuple[str, ...], sentence: str, demonstration: tuple[Path, Outcome], tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
) -> None:  # fmt: skip
    monkeypatch.chdir(tmp_path)
    told = call("export", demonstration[0], *arguments)
    assert told.status == 2
    assert sentence in told.err
    assert not list(tmp_path.rglob("*"))


def test_odd_tables_are_written_too(demonstration: tuple[Path, Outcome]) -> None:
    """Interleaved casts, stations in other letters, columns of any name, times that change, nothing known."""
    store = open_archive(demonstration[0])
    made = read_cruise(store, "ZZV519960914").provenance
    assert made is not None
    table = read_table(store, "ZZV519960914", "samples")
    mixtures = read_table(store, "ZZV519960914", "mixtures")
    order = pa.array([*range(0, 24, 2), *range(1, 24, 2)])
    odd: dict[str, Any] = {name: table.column(name) for name in table.column_names}
    odd["station"] = pa.array(["Ωmega" if one == "3" else one for one in table.column("station").to_pylist()])
    odd["time"] = pa.array(
        [None] * 12 + table.column("time").to_pylist()[12:], table.schema.field("time").type
    )
    odd["nitrate"] = pa.array([None] * 24, pa.float64())
    odd["nitrate_flag"] = pa.array([0, 77, None] * 8, pa.int16())
    odd["bottle_flag"] = pa.array([6, 2, 9] * 8, pa.int16())
    odd["1 % of µ?"] = pa.array(list(range(24)), pa.int64())
    odd["1 % of µ!"] = pa.array([2**40] * 24, pa.int64())
    fields = [
        table.schema.field(name) if name in table.column_names else pa.field(name, odd[name].type)
        for name in odd
    ]
    changed = pa.table(list(odd.values()), schema=pa.schema(fields)).take(order)
    data = export_netcdf("samples", changed, mixtures.slice(0, 0), made)
    back = read_delivery("cruise.nc", data, ReadingSettings())
    assert back.table.num_rows == 24
    assert set(back.table.column("station").to_pylist()) == {"Ωmega", "4"}
    wanted = changed.take(pa.array(np.argsort(cast_groups(changed), kind="stable")))
    for name in ("oxygen", "bottle_oxygen", "phosphate", "sample", "date", "time"):
        found = f"{name}_delivered" if name == "oxygen" else name
        assert back.table.column(found).to_pylist() == wanted.column(name).to_pylist(), name
    with xr.open_dataset(data, decode_times=False, engine="scipy") as file:
        assert {"delivered_1___of___", "delivered_1___of____"} <= set(file.variables)
        assert 6 in file.bottle_flag.flag_values
        assert "share" not in file
