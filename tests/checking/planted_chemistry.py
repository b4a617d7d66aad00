"""Faults of salinity, oxygen, nutrients, carbon, isotopes and units, and what looks like them and is none."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import gsw
import numpy as np

from tests.checking.cases import Case, changed
from tests.checking.oceans import DEEP, QUANTITIES, SHELF, ocean, patch, row

if TYPE_CHECKING:
    from collections.abc import Iterator

    import pyarrow as pa
    from numpy.typing import NDArray

    from tests.checking.oceans import Quantity

    FloatArray = NDArray[np.floating[Any]]

Q = QUANTITIES
ALL = frozenset(range(10 * len(DEEP)))


def shifted(
    name: str, *places: tuple[int, int, float], table: pa.Table | None = None
) -> tuple[pa.Table, set[int]]:
    """Return a table in which samples (cast, pressure, by how much) are changed, and their rows."""
    table = ocean() if table is None else table
    values = table.column(name).to_pylist()
    cells = {row(cast, pressure): values[row(cast, pressure)] + by for cast, pressure, by in places}
    return changed(table, {name: cells}), set(cells)


def scaled(name: str, factor: float, offset: float = 0.0) -> pa.Table:
    """Return a table with a whole column in another unit."""
    table = ocean()
    cells = enumerate(table.column(name).to_pylist())
    return changed(table, {name: {number: value * factor + offset for number, value in cells}})


def plus(name: str, addition: Quantity) -> Quantity:
    """Return a quantity with something added to it."""
    return lambda at: Q[name](at) + addition(at)


# What looks like a fault and is none.
DENITRIFIED = ocean(
    changes={
        "nitrate": plus("nitrate", lambda at: -0.6 * Q["nitrate"](at) * patch(at, (3, 6), (200, 800))),
        "bottle_oxygen": lambda at: Q["bottle_oxygen"](at) * (1 - 0.98 * patch(at, (3, 6), (200, 800))),
        "ctd_oxygen": lambda at: Q["ctd_oxygen"](at) * (1 - 0.98 * patch(at, (3, 6), (200, 800))),
    }
)
PLUME = ocean(
    changes={
        **{
            name: plus(name, lambda at: -12.0 * patch(at, (0, 2), (0, 25)))
            for name in ("ctd_salinity", "bottle_salinity")
        },
        "nitrate": plus("nitrate", lambda at: 12.0 * patch(at, (0, 2), (0, 25))),
        "silicate": plus("silicate", lambda at: 60.0 * patch(at, (0, 2), (0, 25))),
        "alkalinity": plus("alkalinity", lambda at: -300.0 * patch(at, (0, 2), (0, 25))),
        "delta_carbon_13": plus("delta_carbon_13", lambda at: -5.0 * patch(at, (0, 2), (0, 25))),
        "delta_oxygen_18": lambda at: 0.5 * (Q["ctd_salinity"](at) - 12 * patch(at, (0, 2), (0, 25)) - 34.7),
    }
)
POLAR = ocean(
    changes={
        "temperature": lambda at: -1.7 + 3.2 * np.exp(-(((at.p - 500.0) / 400.0) ** 2)),
        "ctd_salinity": lambda at: 34.7 - 0.9 * np.exp(-at.p / 60.0),
        "bottle_salinity": lambda at: 34.7 - 0.9 * np.exp(-at.p / 60.0),
        "ctd_oxygen": lambda at: 220.0 + (60.0 + 60.0 * (at.c > 3)) * np.exp(-at.p / 120.0),
        "bottle_oxygen": lambda at: 220.0 + (60.0 + 60.0 * (at.c > 3)) * np.exp(-at.p / 120.0),
        "nitrate": lambda at: 33.0 - 4.0 * np.exp(-at.p / 120.0),
        "phosphate": lambda at: 2.3 - 0.3 * np.exp(-at.p / 120.0),
        "silicate": lambda at: 110.0 - 50.0 * np.exp(-at.p / 200.0),
        "delta_oxygen_18": lambda at: -0.05 - 0.4 * np.exp(-at.p / 60.0),
    }
)
BLOOM = ocean(
    changes={
        name: plus(name, lambda at: 90.0 * patch(at, (4, 5), (0, 25)))
        for name in ("bottle_oxygen", "ctd_oxygen")
    }
)
# A salty and warm lens, poor in nutrients, met by two casts at four levels.
OUTFLOW = ocean(
    changes={
        "temperature": plus("temperature", lambda at: 5.0 * patch(at, (5, 6), (800, 1500))),
        **{
            name: plus(name, lambda at: 0.95 * patch(at, (5, 6), (800, 1500)))
            for name in ("ctd_salinity", "bottle_salinity")
        },
        "nitrate": plus("nitrate", lambda at: -9.0 * patch(at, (5, 6), (800, 1500))),
        "phosphate": plus("phosphate", lambda at: -0.6 * patch(at, (5, 6), (800, 1500))),
        "silicate": plus("silicate", lambda at: -12.0 * patch(at, (5, 6), (800, 1500))),
    }
)
ENCLOSED = ocean(
    changes={
        "temperature": lambda at: 13.4 + 6.0 * np.exp(-at.p / 80.0),
        "ctd_salinity": lambda at: 38.5 - 0.5 * np.exp(-at.p / 150.0),
        "bottle_salinity": lambda at: 38.5 - 0.5 * np.exp(-at.p / 150.0),
        "nitrate": lambda at: 8.5 * (1.0 - np.exp(-at.p / 250.0)),
        "phosphate": lambda at: 0.38 * (1.0 - np.exp(-at.p / 250.0)) + 0.02,
        "silicate": lambda at: 8.5 * (1.0 - np.exp(-at.p / 400.0)) + 1.0,
        "alkalinity": lambda at: 2580.0 + 0.0 * at.p,
        "dic": lambda at: 2320.0 - 80.0 * np.exp(-at.p / 150.0),
    }
)
ANOXIC = ocean(
    changes={
        "temperature": lambda at: 9.0 + 6.0 * np.exp(-at.p / 30.0),
        "ctd_salinity": lambda at: 22.3 - 4.0 * np.exp(-at.p / 100.0),
        "bottle_salinity": lambda at: 22.3 - 4.0 * np.exp(-at.p / 100.0),
        "ctd_oxygen": lambda at: 3.0 + 290.0 * np.exp(-((at.p / 80.0) ** 2)),
        "bottle_oxygen": lambda at: 3.0 + 290.0 * np.exp(-((at.p / 80.0) ** 2)),
        "nitrate": lambda at: 0.3 + 3.0 * np.exp(-(((at.p - 80.0) / 40.0) ** 2)),
    }
)
BRACKISH = ocean(
    levels=SHELF,
    changes={
        "temperature": lambda at: 4.0 + 12.0 * np.exp(-at.p / 20.0),
        "ctd_salinity": lambda at: 9.0 - 3.0 * np.exp(-at.p / 50.0),
        "bottle_salinity": lambda at: 9.0 - 3.0 * np.exp(-at.p / 50.0),
        "ctd_oxygen": lambda at: 330.0 - 1.2 * at.p,
        "bottle_oxygen": lambda at: 330.0 - 1.2 * at.p,
    },
)
SHALLOW = ocean(
    levels=SHELF,
    changes={"nitrate": lambda at: 0.2 + 0.0 * at.p, "phosphate": lambda at: 0.03 + 0.0 * at.p},
)
HANDFUL = ocean(n_cast=1, levels=(5, 500, 2000))
# Bottles that hold the water of eight dbar deeper, where salinity changes quickly.
LAGGING = ocean(
    changes={
        "ctd_salinity": lambda at: Q["ctd_salinity"](at) + 0.8 * np.tanh((at.p - 75.0) / 20.0),
        "bottle_salinity": lambda at: Q["ctd_salinity"](at) + 0.8 * np.tanh((at.p + 8.0 - 75.0) / 20.0),
    }
)
# Two water masses side by side, at a front that lies between two casts.
FRONT = ocean(
    n_cast=20,
    changes={
        "temperature": plus("temperature", lambda at: -4.0 * (at.c > 9) * np.exp(-at.p / 900.0)),
        **{
            name: plus(name, lambda at: -0.5 * (at.c > 9) * np.exp(-at.p / 900.0))
            for name in ("ctd_salinity", "bottle_salinity")
        },
        "nitrate": plus("nitrate", lambda at: 9.0 * (at.c > 9) * np.exp(-at.p / 600.0)),
        "phosphate": plus("phosphate", lambda at: 0.65 * (at.c > 9) * np.exp(-at.p / 600.0)),
        "silicate": plus("silicate", lambda at: 30.0 * (at.c > 9) * np.exp(-at.p / 2000.0)),
    },
)
OLD = ocean(changes={"delta_carbon_13": lambda at: 1.7 - 2.1 * (1.0 - np.exp(-at.p / 500.0))})
ALIKE = {
    "clean": ocean(), "denitrification zone": DENITRIFIED, "river plume": PLUME, "polar surface, half under ice": POLAR,
    "bloom": BLOOM, "salty outflow": OUTFLOW, "enclosed warm sea": ENCLOSED, "anoxic basin": ANOXIC,
    "brackish sea": BRACKISH, "oligotrophic shelf": SHALLOW, "three samples": HANDFUL,
    "front between two casts": FRONT, "bottles that lag in a halocline": LAGGING, "old deep water": OLD,
}  # fmt: skip
CHECKS = (
    "bottle-against-ctd", "oxygen-saturation", "nitrate-to-phosphate", "nitrate-and-nitrite", "negative-nutrient",
    "property-misfit", "isotope-range", "regional-range", "cruise-offset", "wrong-unit", "position-sign",
    "alkalinity-less-dic",
)  # fmt: skip
# What a cruise in such waters is rightly told in a note: the check looks at the open ocean.
TOLD = {
    ("cruise-offset", "enclosed warm sea"), ("cruise-offset", "polar surface, half under ice"),
    ("cruise-offset", "anoxic basin"),
}  # fmt: skip


def cases() -> Iterator[Case]:
    """Yield every case."""
    yield from _bottle_against_ctd()
    yield from _oxygen()
    yield from _nutrients()
    yield from _misfits()
    yield from _isotopes_and_regions()
    yield from _carbon()
    yield from _offsets()
    yield from _units()
    yield from _positions()
    for check in CHECKS:
        for label, table in ALIKE.items():
            if (check, label) not in TOLD:
                yield Case(check, label, table, set())


def _bottle_against_ctd() -> Iterator[Case]:
    check = "bottle-against-ctd"
    yield Case(check, "a deep bottle salinity", *shifted("bottle_salinity", (4, 3000, 0.03)))
    yield Case(check, "a shallow bottle salinity", *shifted("bottle_salinity", (4, 200, -0.5)))
    yield Case(check, "a deep bottle oxygen", *shifted("bottle_oxygen", (4, 2000, -12.0)))
    yield Case(check, "a CTD salinity", *shifted("ctd_salinity", (4, 2500, 0.04)))
    run = [(4, pressure, -0.13) for pressure in DEEP if 1000 <= pressure <= 3000]
    yield Case(check, "a stretch of a CTD cast", *shifted("ctd_salinity", *run))
    whole = [(7, pressure, 9.0) for pressure in DEEP]
    yield Case(check, "a whole cast of oxygen", *shifted("bottle_oxygen", *whole))
    yield Case(check, "Absolute Salinity", scaled("bottle_salinity", 35.16504 / 35.0), ALL)


def _oxygen() -> Iterator[Case]:
    check = "oxygen-saturation"
    yield Case(check, "below zero", *shifted("bottle_oxygen", (2, 800, -240.0)))
    alone = ocean(changes={"ctd_oxygen": lambda at: np.nan * at.p})
    yield Case(
        check, "one sample far above saturation", *shifted("bottle_oxygen", (2, 50, 120.0), table=alone)
    )
    yield Case(check, "one surface sample far below", *shifted("bottle_oxygen", (5, 5, -90.0), table=alone))
    low = ocean(changes={"ctd_oxygen": lambda at: 0.8 * Q["ctd_oxygen"](at)})
    yield Case(check, "a sensor that reads low", low, None)


def _nutrients() -> Iterator[Case]:
    check = "nitrate-to-phosphate"
    yield Case(check, "a deep phosphate", *shifted("phosphate", (3, 2500, 0.7)))
    yield Case(check, "a deep nitrate", *shifted("nitrate", (3, 1500, -9.0)))
    yield Case(check, "a shallow nitrate", *shifted("nitrate", (3, 100, 11.0)))
    both = ocean(changes={"nitrate_plus_nitrite": lambda at: Q["nitrate"](at) + Q["nitrite"](at)})
    yield Case("nitrate-and-nitrite", "three columns that agree", both, set())
    same = changed(both, {"nitrate": dict(enumerate(both.column("nitrate_plus_nitrite").to_pylist()))})
    yield Case("nitrate-and-nitrite", "nitrate that is the sum", same, None)
    off = changed(both, {"nitrate": {i: v + 2.0 for i, v in enumerate(both.column("nitrate").to_pylist())}})
    yield Case("nitrate-and-nitrite", "a sum that is another", off, None)
    check = "negative-nutrient"
    ammonium = ocean(changes={"ammonium": lambda at: 0.02 * np.cos(7 * at.c + at.p)})
    yield Case(check, "ammonium around zero", ammonium, set())
    yield Case(check, "a negative ammonium", *shifted("ammonium", (1, 50, -0.6), table=ammonium))
    blank = ocean(changes={"nitrite": plus("nitrite", lambda at: -0.04 + 0.0 * at.p)})
    yield Case(check, "a blank too large", blank, None)


def _misfits() -> Iterator[Case]:
    check = "property-misfit"
    wide = ocean(n_cast=20)
    for name, by in (
        ("nitrate", 3.0),
        ("phosphate", 0.25),
        ("silicate", -9.0),
        ("dic", 40.0),
        ("alkalinity", 40.0),
    ):
        yield Case(check, f"a deep {name}", *shifted(name, (9, 1250, by), table=wide))
    blind = ocean(n_cast=20, changes={"ctd_oxygen": lambda at: np.nan * at.p})
    yield Case(
        check, "a deep oxygen without a CTD's", *shifted("bottle_oxygen", (9, 1250, 25.0), table=blind)
    )
    both = blind.rename_columns([{"nitrate": "nitrate_plus_nitrite"}.get(n, n) for n in blind.column_names])
    yield Case(check, "nitrate and nitrite", *shifted("nitrate_plus_nitrite", (9, 2000, 4.0), table=both))


def _isotopes_and_regions() -> Iterator[Case]:
    check = "isotope-range"
    yield Case(check, "carbon-13 of no sea water", *shifted("delta_carbon_13", (3, 500, -4.0)))
    yield Case(check, "a deep carbon-13", *shifted("delta_carbon_13", (3, 3000, 1.4)))
    yield Case(check, "a deep carbon-14", *shifted("delta_carbon_14", (3, 3000, 260.0)))
    yield Case(check, "an oxygen-18", *shifted("delta_oxygen_18", (3, 1000, -4.0)))
    check = "regional-range"
    yield Case(check, "a warm deep sample", *shifted("temperature", (3, 3000, 8.0)))
    yield Case(check, "a salty deep sample", *shifted("bottle_salinity", (3, 3000, 1.5)))


def _carbon() -> Iterator[Case]:
    check = "alkalinity-less-dic"
    yield Case(check, "alkalinity below DIC", *shifted("alkalinity", (4, 1000, -230.0)))
    yield Case(check, "alkalinity far above DIC", *shifted("alkalinity", (4, 1500, 420.0)))
    yield Case(check, "a DIC that is no sea water's", *shifted("dic", (4, 100, -400.0)))
    old = {"dic": lambda at: Q["alkalinity"](at) - 20.0 + 200.0 * np.exp(-at.p / 300.0)}
    yield Case(check, "old water with as much DIC as alkalinity", ocean(changes=old), set())


def _offsets() -> Iterator[Case]:
    check = "cruise-offset"
    yield Case(check, "nitrate three quarters", scaled("nitrate", 0.75), None)
    yield Case(check, "phosphate high by a constant", scaled("phosphate", 1.0, 0.45), None)
    yield Case(check, "alkalinity high throughout", scaled("alkalinity", 1.0, 140.0), None)
    yield Case(
        check, "DIC as alkalinity", ocean(changes={"dic": lambda at: Q["alkalinity"](at) - 10.0}), None
    )


def _units() -> Iterator[Case]:
    check = "wrong-unit"
    for name, unit, factor, offset in (
        ("bottle_oxygen", "ml/l", 1 / 43.54, 0.0), ("ctd_oxygen", "ml/l", 1 / 43.54, 0.0),
        ("bottle_oxygen", "mg/l", 1 / 30.47, 0.0), ("bottle_oxygen", "mmol/kg", 1e-3, 0.0),
        ("bottle_oxygen", "a conversion too many", 43.54, 0.0),
        ("nitrate", "nmol/kg", 1e3, 0.0), ("nitrate", "mmol/kg", 1e-3, 0.0), ("phosphate", "nmol/kg", 1e3, 0.0),
        ("silicate", "mol/kg", 1e-6, 0.0), ("nitrate", "ug/l of nitrogen", 14.366, 0.0),
        ("dic", "mol/kg", 1e-6, 0.0), ("dic", "mmol/kg", 1e-3, 0.0), ("alkalinity", "mol/kg", 1e-6, 0.0),
        ("bottle_salinity", "kg/kg", 1e-3, 0.0), ("ctd_salinity", "kg/kg", 1e-3, 0.0),
        ("temperature", "kelvin", 1.0, 273.15), ("temperature", "Fahrenheit", 1.8, 32.0),
    ):  # fmt: skip
        yield Case(check, f"{name} in {unit}", scaled(name, factor, offset), ALL)
    conductive = ocean(
        changes={"ctd_salinity": lambda at: gsw.C_from_SP(Q["ctd_salinity"](at), Q["temperature"](at), at.p)}
    )
    yield Case(check, "conductivity", conductive, ALL)
    organic = ocean(changes={"delta_carbon_13": lambda at: -24.0 + 2.0 * np.sin(at.c + at.p)})
    yield Case(check, "carbon-13 of organic matter", organic, ALL)
    for one, other in (("silicate", "phosphate"), ("nitrate", "phosphate"), ("dic", "alkalinity")):
        exchanged = ocean(changes={one: Q[other], other: Q[one]})
        yield Case(check, f"{one} and {other} exchanged", exchanged, ALL)
    for unit, factor in (("MPa", 0.01), ("kPa", 10.0), ("bar", 0.1)):
        table = ocean()
        pressure = {i: v * factor for i, v in enumerate(table.column("pressure").to_pylist())}
        yield Case(check, f"pressure in {unit}", changed(table, {"pressure": pressure}), ALL)


def _positions() -> Iterator[Case]:
    check = "position-sign"
    near = ocean(
        longitude=lambda at: np.where(at.c == 4, 1.0, -1.0) * (2.0 + 0.1 * at.c),
        latitude=lambda at: 40.0 + 0 * at.p,
    )
    yield Case(check, "a longitude of the other sign", near, {row(4, 5)})
    swapped = ocean(
        latitude=lambda at: np.where(at.c == 6, -20.0, -30.0 + 0.5 * at.c),
        longitude=lambda at: np.where(at.c == 6, -27.0, -20.0),
    )
    yield Case(check, "latitude and longitude exchanged", swapped, {row(6, 5)})
    across = ocean(longitude=lambda at: -4.5 + at.c, latitude=lambda at: 1.5 - 0.3 * at.c)
    yield Case(check, "across Greenwich and the equator", across, set())
    dateline = ocean(longitude=lambda at: np.where(at.c < 5, 177.5 + 0.5 * at.c, -182.5 + 0.5 * at.c))
    yield Case(check, "across the date line", dateline, set())
