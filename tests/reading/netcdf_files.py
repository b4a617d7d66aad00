"""NetCDF files made up for tests: one invented cruise in every form that CF has for profiles."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import TYPE_CHECKING, Any

import netCDF4
import numpy as np

from pipeline.reading import read_delivery
from tests.invented import EXPOCODE, LIMITS, bottle_file

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from numpy.typing import NDArray

    from pipeline.reading import Delivery
    from pipeline.reading.description import Description

FORMATS = ("NETCDF3_CLASSIC", "NETCDF3_64BIT_OFFSET", "NETCDF3_64BIT_DATA", "NETCDF4", "NETCDF4_CLASSIC")
FORMS = ("contiguous", "indexed", "incomplete", "orthogonal", "single")
FILL = -9999.0

_WHP = {
    2: "acceptable", 3: "questionable", 4: "bad", 5: "not_reported", 9: "not_sampled",
}  # fmt: skip


@dataclass(frozen=True)
class Quantity:
    """One variable of the file: its exchange name, and what CF says of it."""

    exchange: str
    name: str
    standard_name: str
    units: str
    long_name: str = ""
    flagged: bool = True


QUANTITIES = (
    Quantity("CTDPRS", "pressure", "sea_water_pressure_due_to_sea_water", "dbar", flagged=False),
    Quantity("CTDTMP", "temperature", "sea_water_temperature", "degree_C", "ITS-90", flagged=False),
    Quantity("CTDSAL", "salinity", "sea_water_practical_salinity", "1", "from the CTD"),
    Quantity("SALNTY", "salinity_sample", "sea_water_practical_salinity", "1", "of the bottle"),
    Quantity(
        "OXYGEN",
        "oxygen",
        "moles_of_oxygen_per_unit_mass_in_sea_water",
        "umol kg-1",
        "of the bottle, Winkler",
    ),
    Quantity("NITRAT", "nitrate", "moles_of_nitrate_per_unit_mass_in_sea_water", "umol kg-1"),
    Quantity("PHSPHT", "phosphate", "moles_of_phosphate_per_unit_mass_in_sea_water", "umol kg-1"),
)

# (station, cast, date, time, latitude, longitude, depth of the sea floor), and samples of each
_PROFILES = (
    ("1", "1", "20090214", "0803", "-35.5000", "-12.2500", "4100"),
    ("2", "1", "20090215", "0000", "-36.0000", "179.7500", "5012"),
    ("V3b", "2", "20090216", "2359", "-36.5000", "-179.5000", "3999"),
)
PRESSURES = ((3000.0, 1000.0, 10.0), (2000.0, 10.0), (2500.0, 1500.0, 500.0, 10.0))


def rows(profiles: int = 3, pressures: tuple[tuple[float, ...], ...] = PRESSURES) -> list[dict[str, str]]:
    """Return the samples of the cruise as rows of an exchange file."""
    made = []
    for number, (identity, levels) in enumerate(zip(_PROFILES[:profiles], pressures, strict=False)):
        station, cast, date, time, latitude, longitude, depth = identity
        for sample, pressure in enumerate(levels, start=1):
            made.append(
                {
                    "STNNBR": station, "CASTNO": cast, "DATE": date, "TIME": time, "LATITUDE": latitude,
                    "LONGITUDE": longitude, "DEPTH": depth, "SAMPNO": str(100 * number + sample),
                    "BTLNBR": str(sample), "BTLNBR_FLAG_W": "2", "CTDPRS": f"{pressure:.1f}",
                    "CTDTMP": f"{2 + 20 / (1 + pressure / 500):.4f}", "CTDSAL": f"{34.5 + pressure / 9000:.4f}",
                    "SALNTY": f"{34.501 + pressure / 9000:.4f}", "OXYGEN": f"{180 + pressure / 50:.1f}",
                    "NITRAT": f"{5 + pressure / 100:.2f}", "PHSPHT": f"{0.3 + pressure / 1500:.3f}",
                    "CTDSAL_FLAG_W": "2", "SALNTY_FLAG_W": "2", "OXYGEN_FLAG_W": "3" if sample == 2 else "2",
                    "NITRAT_FLAG_W": "2", "PHSPHT_FLAG_W": "2",
                }
            )  # fmt: skip
    made[1] |= {"PHSPHT": "-999.000", "PHSPHT_FLAG_W": "9"}
    made[2] |= {"NITRAT": "-999.00", "NITRAT_FLAG_W": "5"}
    return made


@dataclass
class Plan:
    """How a test wants the file: what is written when, and what is changed before it is closed."""

    form: str = "contiguous"
    format: Any = "NETCDF3_CLASSIC"
    kind: str = "f8"  # of the measured values
    quantities: tuple[Quantity, ...] = QUANTITIES
    identity: bool = True  # sample and bottle numbers
    attributes: Mapping[str, Any] = field(default_factory=dict)
    meanings: Mapping[int, str] = field(default_factory=lambda: _WHP)
    flag: Callable[[str], int] = int  # the flag to write for a WHP flag
    spoil: Callable[[netCDF4.Dataset], None] = lambda _: None


def exchange_twin(samples: list[dict[str, str]]) -> bytes:
    """Return the same samples as an exchange file."""
    return bottle_file(*samples)


def netcdf_bytes(samples: list[dict[str, str]], plan: Plan | None = None) -> bytes:
    """Return the samples as a NetCDF file."""
    plan = plan or Plan()
    with TemporaryDirectory() as folder:
        path = Path(folder) / "made.nc"
        with netCDF4.Dataset(path, mode="w", format=plan.format) as file:
            _fill(file, samples, plan)
        return path.read_bytes()


def _fill(file: netCDF4.Dataset, samples: list[dict[str, str]], plan: Plan) -> None:
    file.setncatts(
        {
            "Conventions": "CF-1.11, ACDD-1.3", "featureType": "profile", "title": "An invented cruise",
            "institution": "None: invented", "source": "made up for a test", "history": "2026-01-01 made",
            "references": "none", "comment": "none", "expocode": EXPOCODE, "section": "V01", **plan.attributes,
        }
    )  # fmt: skip
    writer = _Writer(file, samples, plan)
    writer.write_profiles()
    if plan.identity:
        writer.write_identity()
    for quantity in plan.quantities:
        writer.write_quantity(quantity)
    plan.spoil(file)


class _Writer:
    """Lays samples out in one of the forms."""

    def __init__(self, file: netCDF4.Dataset, samples: list[dict[str, str]], plan: Plan) -> None:
        self.file, self.samples, self.plan = file, samples, plan
        keys = list(dict.fromkeys((row["STNNBR"], row["CASTNO"]) for row in samples))
        self.groups = [[row for row in samples if (row["STNNBR"], row["CASTNO"]) == key] for key in keys]
        self.longest = max(len(group) for group in self.groups)
        self.single = plan.form == "single"
        self.flat = self.single or plan.form in {"contiguous", "indexed"}
        self.instance = () if self.single else ("profile",)
        self.along = ("obs",) if self.flat else ("profile", "level")
        if not self.single:
            file.createDimension("profile", len(self.groups))
        file.createDimension(self.along[-1], len(samples) if self.flat else self.longest)
        file.createDimension("name_length", 8)

    def write_profiles(self) -> None:
        """Write what a profile has one of, and which samples are whose."""
        if self.plan.form == "contiguous":
            counts = [len(group) for group in self.groups]
            self._add(
                "row_size", "i4", ("profile",), counts, sample_dimension="obs", long_name="samples of it"
            )
        if self.plan.form == "indexed":
            index = [number for number, group in enumerate(self.groups) for _ in group]
            self._add(
                "of_profile", "i4", ("obs",), index, instance_dimension="profile", long_name="whose it is"
            )
        firsts = [group[0] for group in self.groups]
        letters = [list(row["STNNBR"].ljust(8, "\0").encode()) for row in firsts]
        station = np.array(letters, dtype="u1").view("S1")
        self._add("station", "S1", (*self.instance, "name_length"), station[0] if self.single else station,
                  long_name="station", cf_role="profile_id")  # fmt: skip
        for name, kind, values, attributes in (
            ("cast", "i4", [int(row["CASTNO"]) for row in firsts], {}),
            ("time", "f8", [_seconds(row["DATE"], row["TIME"]) for row in firsts],
             {"standard_name": "time", "units": "seconds since 2009-01-01 00:00:00", "calendar": "standard",
              "units_metadata": "leap_seconds: utc"}),
            ("latitude", "f8", [float(row["LATITUDE"]) for row in firsts],
             {"standard_name": "latitude", "units": "degrees_north"}),
            ("longitude", "f8", [float(row["LONGITUDE"]) for row in firsts],
             {"standard_name": "longitude", "units": "degrees_east"}),
            ("bottom", "f8", [float(row["DEPTH"]) for row in firsts],
             {"standard_name": "sea_floor_depth_below_sea_surface", "units": "m"}),
        ):  # fmt: skip
            shared: dict[str, Any] = {"long_name": f"{name} of the cast", **attributes}
            self._add(name, kind, self.instance, values[0] if self.single else values,
                      **shared)  # fmt: skip

    def write_identity(self) -> None:
        """Write sample and bottle."""
        for name, kind, key in (("sample", "i4", "SAMPNO"), ("bottle", "i4", "BTLNBR"),
                                ("BTLNBR_FLAG_W", "i1", "BTLNBR_FLAG_W")):  # fmt: skip
            values = self._laid([int(row[key]) for row in self.samples], -1)
            self._add(
                name, kind, self.along, values, fill=-1, long_name=name, coordinates="time latitude longitude"
            )

    def write_quantity(self, quantity: Quantity) -> None:
        """Write a quantity and its flags."""
        plan = self.plan
        delivered = np.array([float(row[quantity.exchange]) for row in self.samples])
        values = np.where(delivered == -999.0, FILL, delivered).tolist()
        attributes: dict[str, Any] = {
            "long_name": f"{quantity.name} {quantity.long_name}".strip(), "units": quantity.units,
            "standard_name": quantity.standard_name,
        }  # fmt: skip
        if quantity.name == "pressure":
            attributes |= {"positive": "down"} | ({} if self.single else {"axis": "Z"})
        else:
            attributes["coordinates"] = "time latitude longitude pressure"
        if quantity.name == "pressure" and plan.form == "orthogonal":
            self._add("pressure", plan.kind, ("level",), values[: self.longest], **attributes)
            return
        if quantity.name == "temperature":
            attributes["units_metadata"] = "temperature: on_scale"
        flagged = quantity.flagged and bool(plan.meanings)
        if flagged:
            attributes["ancillary_variables"] = f"{quantity.name}_qc"
        self._add(quantity.name, plan.kind, self.along, self._laid(values, FILL), fill=FILL, **attributes)
        if flagged:
            flags = self._laid([plan.flag(row[f"{quantity.exchange}_FLAG_W"]) for row in self.samples], 9)
            variable = self._add(f"{quantity.name}_qc", "i1", self.along, flags, standard_name="quality_flag",
                                 long_name=f"flag of {quantity.name}", coordinates="time latitude longitude pressure",
                                 flag_meanings=" ".join(plan.meanings.values()))  # fmt: skip
            variable.flag_values = np.array(list(plan.meanings), dtype="i1")

    def _laid(self, values: list[Any], missing: float) -> NDArray[Any]:
        """Return one value a sample as the form has it, ``missing`` where storage is unused."""
        if self.flat:
            return np.array(values)
        each = iter(values)
        laid = np.full((len(self.groups), self.longest), missing)
        for number, group in enumerate(self.groups):
            for level in range(len(group)):
                laid[number, level] = next(each)
        return laid

    def _add(
        self, name: str, kind: str, dimensions: tuple[str, ...], values: Any, *, fill: float | None = None,
        **attributes: Any,
    ) -> Any:  # fmt: skip
        variable = self.file.createVariable(name, kind, dimensions, fill_value=fill)
        variable.set_auto_maskandscale(False)
        variable.setncatts(attributes)
        variable[...] = values
        return variable


def _seconds(date: str, time: str) -> float:
    instant = np.datetime64(f"{date[:4]}-{date[4:6]}-{date[6:]}T{time[:2]}:{time[2:]}:00")
    return float((instant - np.datetime64("2009-01-01T00:00:00")) / np.timedelta64(1, "s"))


def stored(values: NDArray[Any] | list[Any], kind: str = "f8", **attributes: Any) -> bytes:
    """Return a file of one variable ``x`` along ``n``, as it is."""
    array = np.asarray(values)
    file = netCDF4.Dataset("made.nc", mode="w", memory=1 << 16, format="NETCDF4")
    file.createDimension("n", len(array))
    variable = file.createVariable("x", kind, ("n",), fill_value=attributes.pop("_FillValue", None))
    variable.set_auto_maskandscale(False)
    variable.setncatts(attributes)
    variable[:] = array
    return bytes(file.close())


def samples_for(form: str) -> list[dict[str, str]]:
    """Return samples that a form can hold."""
    if form == "single":
        return rows(1)
    return rows(3, (PRESSURES[0],) * 3) if form == "orthogonal" else rows()


def read_nc(data: bytes, description: Description | None = None) -> Delivery:
    """Read a NetCDF file with the default limits."""
    return read_delivery("cruise.nc", data, LIMITS, description)


def assert_same(one: Delivery, other: Delivery) -> None:
    """Hold two deliveries to the same columns and values, but for the file and the lines."""
    names = set(one.table.column_names)
    assert names == set(other.table.column_names)
    for name in names - {"file", "line"}:
        assert one.table.column(name).to_pylist() == other.table.column(name).to_pylist(), name
