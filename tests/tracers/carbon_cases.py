"""Samples made up for tests of the carbonate system: tables that have their working columns already."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa

from pipeline.settings import UseSettings
from pipeline.tables import as_arrow, registry_field
from pipeline.usable import Rows

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

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
