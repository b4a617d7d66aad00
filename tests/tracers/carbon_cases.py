"""Samples made up for tests of the carbonate system: tables that have their working columns already."""

from __future__ import annotations

from functools import cache
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import PyCO2SYS

from pipeline.carbonate_settings import CarbonateSettings
from pipeline.checking.marks import findings_of
from pipeline.settings import UseSettings
from pipeline.tables import as_arrow, registry_field
from pipeline.tracers.carbonate import system
from pipeline.tracers.carbonate_consistency import disagreements
from pipeline.tracers.carbonate_findings import carbonate_findings
from pipeline.tracers.carbonate_marks import input_marks, system_marks
from pipeline.usable import Rows

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from pipeline.findings import Finding
    from pipeline.tables import FloatArray

EXPOCODE = "ZZV120090214"
# Deep water: salinity, degC, dbar, umol/kg.
DEEP = {
    "practical_salinity": 34.92, "temperature": 2.7, "pressure": 3000.0, "depth": 2960.0, "dic": 2175.0,
    "alkalinity": 2320.0, "silicate": 25.0, "phosphate": 1.4,
}  # fmt: skip


def rows(samples: Sequence[Mapping[str, Any]], **common: Any) -> Rows:
    """Return samples with the columns that any of them has, missing in the others; line k + 4 of one file."""
    n = len(samples)
    whole = [{**common, **sample} for sample in samples]
    names = list(dict.fromkeys(name for sample in whole for name in sample))
    columns: dict[str, Any] = {
        "expocode": [EXPOCODE] * n,
        "station": [str(sample.get("station", "1")) for sample in whole],
        "cast": [sample.get("cast", 1) for sample in whole],
        "sample": [str(number + 1) for number in range(n)],
        "file": ["a_hy1.csv"] * n,
        "line": list(range(4, n + 4)),
        **{
            name: [sample.get(name, np.nan) for sample in whole]
            for name in names
            if name not in {"station", "cast"}
        },
    }
    fields = [registry_field(name) for name in columns]
    arrays = [as_arrow(columns[field.name], field.type) for field in fields]
    return Rows(pa.table(arrays, schema=pa.schema(fields)), UseSettings())


def ocean(n: int, seed: int = 0) -> dict[str, FloatArray]:
    """Return water of all the ocean, (n,) each: warm and cold, fresh and salt, down to 6000 dbar."""
    random = np.random.default_rng(seed)
    alkalinity = random.uniform(2100.0, 2500.0, n)
    return {
        "salinity": random.uniform(20.0, 40.0, n),
        "temperature": random.uniform(-1.9, 32.0, n),
        "pressure": random.uniform(0.0, 6000.0, n),
        "alkalinity": alkalinity,
        "dic": alkalinity - random.uniform(20.0, 350.0, n),
        "silicate": random.uniform(0.0, 180.0, n),
        "phosphate": random.uniform(0.0, 3.5, n),
    }


def solved(samples: list[dict[str, Any]], **chosen: Any) -> Mapping[str, Any]:
    return system(rows(samples), CarbonateSettings.model_validate(chosen)).columns


def told(samples: list[dict[str, Any]], **chosen: Any) -> list[Finding]:
    choice = CarbonateSettings.model_validate(chosen)
    data = rows(samples)
    found = system(data, choice)
    marks = (
        *input_marks(data, choice),
        *system_marks(data, found, disagreements(data, found, choice), choice),
    )
    return [*findings_of(data, marks), *carbonate_findings(data, found, choice)]


def of(findings: list[Finding], check: str) -> list[Finding]:
    return [finding for finding in findings if finding.check == check]


@cache
def _laboratory() -> dict[str, float]:
    def at(temperature: float) -> dict[str, float]:
        return PyCO2SYS.sys(  # type: ignore[no-any-return]
            DEEP["dic"], DEEP["alkalinity"], 2, 1, salinity=DEEP["practical_salinity"], temperature=temperature,
            pressure=0.0, total_silicate=DEEP["silicate"], total_phosphate=DEEP["phosphate"], opt_k_carbonic=10,
            opt_k_bisulfate=1, opt_k_fluoride=2, opt_total_borate=2, opt_pH_scale=1, opt_gas_constant=3,
        )  # fmt: skip

    warm, mild = at(25.0), at(20.0)
    return {
        "ph_total": warm["pH_total"], "ph_seawater": warm["pH_sws"], "ph_temperature": 25.0,
        "fco2": mild["fCO2"], "fco2_temperature": 20.0, "pco2": mild["pCO2"], "pco2_temperature": 20.0,
    }  # fmt: skip


def laboratory(ph_shift: float = 0.0) -> dict[str, float]:
    """Return pH at 25 degC and the gas at 20 degC of the deep water, by PyCO2SYS's own solver."""
    shifts = {"ph_total": ph_shift, "ph_seawater": ph_shift}
    return {name: value + shifts.get(name, 0.0) for name, value in _laboratory().items()}


def without(*names: str) -> dict[str, float]:
    return {name: value for name, value in DEEP.items() if name not in names}
