"""Real bottle rows worked from end to end, through the table functions as the pipeline calls them."""

from __future__ import annotations

from functools import cache
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from pipeline import seawater, tracers
from pipeline.settings import TracerSettings
from pipeline.units import OXYGEN_UMOL_PER_ML

from .check import Check, Status

if TYPE_CHECKING:
    from pipeline.tables import FloatArray

# Expected values are from gsw 3.6.23; the delivered values that they were worked from were read in the files.
A16S = "A16S 2013, expocode 33RO20131223, station 1 cast 2 (inputs verified); gsw 3.6.23"
I08S = "I08S 2007, expocode 33RR20070204, station 1, 3 dbar (inputs verified); definitions of the tracers"

_A16S_ROWS = {
    # sample: pressure, temperature, salinity, oxygen
    24: (3.9, 26.2239, 36.3097, 201.2),
    18: (222.8, 12.0808, 35.1686, 108.6),
    13: (791.9, 4.6390, 34.4845, 148.5),
    10: (1747.8, 3.8921, 34.9665, 238.3),
    7: (3097.5, 2.6784, 34.9194, 251.7),
    4: (4598.0, 0.9865, 34.7443, 226.4),
    2: (5597.3, 0.7292, 34.7031, 219.9),
}
_A16S_COLUMNS = (
    "absolute_salinity", "conservative_temperature", "potential_temperature", "sigma0", "sigma2", "sigma4",
    "depth", "oxygen_solubility", "aou",
)  # fmt: skip
_A16S_EXPECTED = {
    24: ("36.481152", "26.174007", "26.223020", "23.952759", "32.218942", "40.135071", "3.8783", "200.9297",
         "-0.2703"),
    18: ("35.335918", "12.037085", "12.051515", "26.714189", "35.440115", "43.786004", "221.4440", "262.6490",
         "154.0490"),
    13: ("34.651223", "4.576081", "4.576259", "27.318172", "36.389481", "45.057907", "786.0032", "311.6559",
         "163.1559"),
    10: ("35.134206", "3.745322", "3.749877", "27.787912", "36.894069", "45.595032", "1730.8539", "316.7517",
         "78.4517"),
    7: ("35.088698", "2.421230", "2.423845", "27.876003", "37.053393", "45.820906", "3057.8604", "327.3293",
        "75.6293"),
    4: ("34.921263", "0.615808", "0.615358", "27.875735", "37.157282", "46.022162", "4523.7583", "343.0928",
        "116.6928"),
    2: ("34.882092", "0.248722", "0.247723", "27.866162", "37.169755", "46.055255", "5494.7516", "346.4743",
        "126.5743"),
}  # fmt: skip
_A16S_MILLILITRES = {
    24: "4.6131", 18: "2.4967", 13: "3.4160", 10: "5.4842", 7: "5.7931", 4: "5.2108", 2: "5.0611",
}  # fmt: skip

_I08S_ROW = {
    "pressure": 3.0, "temperature": -1.1066, "practical_salinity": 33.4640, "oxygen": 352.9, "silicate": 53.64,
    "nitrate": 22.66, "nitrite": 0.11, "phosphate": 1.58, "latitude": -65.8108, "longitude": 84.5502,
}  # fmt: skip
_DEFAULTS = TracerSettings()
_I08S_EXPECTED = (
    ("absolute_salinity", "33.624954", _DEFAULTS),
    ("conservative_temperature", "-1.101258", _DEFAULTS),
    ("potential_temperature", "-1.106667", _DEFAULTS),
    ("sigma0", "26.917264", _DEFAULTS),
    ("oxygen_solubility", "362.5340", _DEFAULTS),
    ("aou", "9.6340", _DEFAULTS),
    ("po4_star", "1.6466", _DEFAULTS),
    ("broecker_no", "556.840", _DEFAULTS),
    ("broecker_po", "566.200", _DEFAULTS),
    ("n_star", "0.280", _DEFAULTS),
    ("n_star", "0.2436", TracerSettings(n_star="gruber_sarmiento_1997")),
    ("si_star", "30.98", _DEFAULTS),
    ("preformed_phosphate", "1.5233", _DEFAULTS),
    ("preformed_nitrate", "21.7533", _DEFAULTS),
)


def _worked(row: dict[str, float], settings: TracerSettings) -> dict[str, float]:
    table = pa.table({"expocode": ["X"], "station": ["1"], "cast": [1]})
    values: dict[str, FloatArray] = {name: np.array([value]) for name, value in row.items()}
    values |= seawater.columns(table, values.__getitem__)
    values |= tracers.columns(values.__getitem__, settings)
    return {name: float(column[0]) for name, column in values.items()}


@cache
def _a16s(sample: int) -> dict[str, float]:
    names = ("pressure", "temperature", "practical_salinity", "oxygen")
    row = dict(zip(names, _A16S_ROWS[sample], strict=True))
    absent = dict.fromkeys(("nitrate", "phosphate", "silicate"), float("nan"))
    return _worked(row | absent | {"latitude": -6.0016, "longitude": -24.9998}, _DEFAULTS)


def a16s(sample: float, column: str) -> float:
    return _a16s(int(sample))[column]


def a16s_millilitres(sample: float) -> float:
    worked = _a16s(int(sample))
    return worked["oxygen"] * (1000.0 + worked["sigma0"]) / 1000.0 / OXYGEN_UMOL_PER_ML


def a16s_rise(upper: float, lower: float, column: str) -> float:
    return a16s(lower, column) - a16s(upper, column)


def i08s(column: str, n_star: str) -> float:
    return _worked(_I08S_ROW, TracerSettings.model_validate({"n_star": n_star}))[column]


ROWS = (
    *(
        Check(column, {"sample": sample, "column": column}, a16s, printed, A16S, Status.COMPUTED)
        for sample, values in _A16S_EXPECTED.items()
        for column, printed in zip(_A16S_COLUMNS, values, strict=True)
    ),
    *(
        Check("oxygen with 44.6596 and potential density, ml/l", {"sample": sample}, a16s_millilitres, printed,
              A16S, Status.COMPUTED)
        for sample, printed in _A16S_MILLILITRES.items()
    ),
    # Denser water under lighter, and yet sigma0 falls: it is no test of stability at depth.
    Check("rise of sigma0 from sample 7 down to 2, kg/m3", {"upper": 7, "lower": 2, "column": "sigma0"},
          a16s_rise, "-0.009841", A16S, Status.COMPUTED, within=1e-6),
    Check("rise of sigma4 from sample 7 down to 2, kg/m3", {"upper": 7, "lower": 2, "column": "sigma4"},
          a16s_rise, "0.234349", A16S, Status.COMPUTED, within=1e-6),
    *(
        Check(column, {"column": column, "n_star": str(settings.n_star)}, i08s, printed, I08S, Status.COMPUTED)
        for column, printed, settings in _I08S_EXPECTED
    ),
)  # fmt: skip
