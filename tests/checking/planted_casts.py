"""Faults of whole casts and whole columns: offsets of a cast, powers of ten, positions exchanged throughout."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from tests.checking.cases import CRUISES, Case, changed, clean_samples, restless_samples, rows_of
from tests.checking.oceans import DEEP, QUANTITIES, SHELF, Place, ocean, row
from tests.checking.planted_chemistry import ALIKE, ALL, scaled, shifted

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    import pyarrow as pa
    from numpy.typing import NDArray

    from tests.checking.oceans import Quantity

    FloatArray = NDArray[np.float64]

Q = QUANTITIES
NO_ROWS: frozenset[int] = frozenset()
# A water of its own, met by one cast: more nutrients and carbon, less oxygen, and colder at the same density.
EDDY = 5


def cases() -> Iterator[Case]:
    """Yield every case of this module."""
    yield from offsets()
    yield from powers()
    yield from exchanged()
    yield Case("alkalinity-less-dic", "an alkalinity below DIC", *shifted("alkalinity", (4, 2000, -400.0)))
    for label, table in ALIKE.items():
        yield Case("alkalinity-less-dic", label, table, NO_ROWS)


def offsets() -> Iterator[Case]:
    check = "cast-offset"
    for name, by in (("nitrate", 1.5), ("nitrate", -2.0), ("phosphate", 0.15), ("silicate", 7.0), ("dic", 15.0),
                     ("alkalinity", -15.0)):  # fmt: skip
        for cast in (2, 6):
            table, rows = shifted(name, *[(cast, pressure, by) for pressure in DEEP])
            deep = {i for i in rows if table.column("pressure")[i].as_py() >= 1250}
            yield Case(check, f"{name} of cast {cast} off by {by:g}", table, deep)
    for seed in range(2):
        for table in (clean_samples(CRUISES[seed]), restless_samples(CRUISES[seed])):
            rows = set(rows_of(table, str(12 + 9 * seed)))
            for name, factor in (
                ("silicate", 1.1),
                ("nitrate", 1.08),
                ("phosphate", 0.9),
                ("silicate", 10.0),
            ):
                yield Case(
                    check, f"{name} of a cast times {factor:g}", times(table, name, rows, factor), None
                )
    for label, table in ALIKE.items():
        yield Case(check, label, table, NO_ROWS)
    for expocode in CRUISES:
        for kind, table in (("calm", clean_samples(expocode)), ("restless", restless_samples(expocode))):
            yield Case(check, f"a clean cruise in a {kind} sea", table, NO_ROWS)
    yield Case(check, "another water in one cast", ocean(changes=eddy()), NO_ROWS)
    yield Case(check, "a front, and a slope along the section", ocean(n_cast=20, changes=slope()), NO_ROWS)
    shallow, _ = shifted("nitrate", *[(4, p, 3.0) for p in DEEP if p <= 800])
    yield Case(check, "an offset of the upper ocean alone", shallow, NO_ROWS)


def times(table: pa.Table, name: str, rows: set[int], factor: float) -> pa.Table:
    """Return a table in which some values of a quantity are multiplied."""
    values = table.column(name).to_pylist()
    return changed(table, {name: {i: values[i] * factor for i in rows if values[i] is not None}})


def eddy() -> dict[str, Quantity]:
    """Return the quantities of an ocean of which one cast meets older and colder water."""

    def more(name: str, by: float) -> Quantity:
        return lambda at: Q[name](at) + by * (at.c == EDDY) * (at.p > 300)

    sizes = {
        "nitrate": 2.0,
        "phosphate": 0.13,
        "silicate": 8.0,
        "dic": 16.0,
        "bottle_oxygen": -20.0,
        "ctd_oxygen": -20.0,
    }
    return {name: more(name, by) for name, by in sizes.items()}


def slope() -> dict[str, Quantity]:
    """Return the quantities of an ocean whose deep nutrients rise along the section, and jump once."""

    def rising(name: str, by: float) -> Quantity:
        def at_place(at: Place) -> FloatArray:
            return np.asarray(Q[name](at) + by * (0.1 * at.c + 2.0 * (at.c > 9)) * (at.p > 300))

        return at_place

    return {name: rising(name, by) for name, by in (("nitrate", 1.0), ("phosphate", 0.07), ("silicate", 5.0))}


def offset_sensitivity(parts: Sequence[float] = (0.03, 0.05, 0.1), count: int = 25) -> dict[str, list[float]]:
    """Return the share of casts found whose nutrient is too high by a part of it, anywhere in a restless sea."""
    shares = {}
    table = restless_samples()
    for name in ("nitrate", "phosphate", "silicate"):
        found = np.zeros((count, len(parts)))
        for seed in range(count):
            rows = set(rows_of(table, str(np.random.default_rng([seed, len(name)]).integers(5, 41))))
            for i, part in enumerate(parts):
                wrong = times(table, name, rows, 1.0 + part)
                found[seed, i] = bool(Case("cast-offset", "", wrong, None).marked() & rows)
        shares[name] = found.mean(axis=0).tolist()
    return shares


def powers() -> Iterator[Case]:
    check = "wrong-unit"
    for name in ("nitrate", "phosphate", "silicate"):
        for factor in (10.0, 0.1, 100.0):
            yield Case(check, f"{name} times {factor:g}", scaled(name, factor), ALL)
    for name in ("bottle_oxygen", "dic", "alkalinity"):
        for factor in (10.0, 0.1):
            yield Case(check, f"{name} times {factor:g}", scaled(name, factor), ALL)
    for expocode in CRUISES:
        table = clean_samples(expocode)
        for factor in (10.0, 0.1):
            wrong = times(table, "silicate", set(range(table.num_rows)), factor)
            yield Case(check, f"silicate of {expocode} times {factor:g}", wrong, None)
    for name, label in (("nitrate", "Atlantic"), ("silicate", "Atlantic")):
        for factor in (10.0, 0.1):
            wrong = times(ocean(changes=atlantic()), name, set(ALL), factor)
            yield Case(check, f"{label} {name} times {factor:g}", wrong, ALL)
    yield Case(check, "the Atlantic", ocean(changes=atlantic()), NO_ROWS)
    yield Case(check, "an old and rich ocean", ocean(changes=pacific()), NO_ROWS)
    yield Case(check, "a cold bay rich in silicate", ocean(changes=bay()), NO_ROWS)
    shelf = ocean(levels=SHELF, changes={"silicate": lambda at: 10.0 * Q["silicate"](at)})
    yield Case(check, "silicate of a shelf, where nothing is clear", shelf, NO_ROWS)
    alone = ocean(changes={"silicate": lambda at: 0.1 * Q["silicate"](at)})
    alone = alone.drop_columns(["nitrate", "phosphate"])
    yield Case(check, "silicate alone", alone, NO_ROWS)


def atlantic() -> dict[str, Quantity]:
    """Return the deep nutrients and oxygen of a young ocean (from memory)."""
    return {
        "nitrate": lambda at: 18.5 - 18.0 * np.exp(-at.p / 350.0),
        "phosphate": lambda at: 1.22 - 1.15 * np.exp(-at.p / 350.0),
        "silicate": lambda at: 9.0 + 0.006 * np.maximum(at.p - 1500.0, 0.0) - 8.0 * np.exp(-at.p / 400.0),
        **dict.fromkeys(("bottle_oxygen", "ctd_oxygen"), lambda at: 265.0 - 30.0 * np.exp(-at.p / 300.0)),
    }


def pacific() -> dict[str, Quantity]:
    """Return the deep nutrients and oxygen of an old ocean (from memory)."""
    return {
        "nitrate": lambda at: 40.0 - 39.5 * np.exp(-at.p / 350.0),
        "phosphate": lambda at: 2.8 - 2.7 * np.exp(-at.p / 350.0),
        "silicate": lambda at: 170.0 - 168.0 * np.exp(-at.p / 900.0),
        **dict.fromkeys(("bottle_oxygen", "ctd_oxygen"), lambda at: 90.0 + 140.0 * np.exp(-at.p / 200.0)),
    }


def bay() -> dict[str, Quantity]:
    """Return a closed cold bay whose deep water is rich in silicate and poor in nitrate (from memory)."""
    return {
        "nitrate": lambda at: 19.0 - 15.0 * np.exp(-at.p / 150.0),
        "phosphate": lambda at: 1.6 - 1.0 * np.exp(-at.p / 150.0),
        "silicate": lambda at: 95.0 - 85.0 * np.exp(-at.p / 500.0),
        **dict.fromkeys(("bottle_oxygen", "ctd_oxygen"), lambda at: 160.0 + 150.0 * np.exp(-at.p / 300.0)),
    }


def exchanged() -> Iterator[Case]:
    check = "position-sign"

    def warm(at: Place) -> FloatArray:
        return np.asarray(2.0 + 25.0 * np.exp(-at.p / 300.0))

    def along(start: float, step: float) -> Quantity:
        return lambda at: start + step * at.c

    # off the south of Africa, and in Antarctica when exchanged; across a warm sea, and in the Arctic when exchanged
    for label, latitude, longitude, changes in (
        ("a section into land", along(-38.0, 0.6), along(-2.0, 0.8), {}),
        ("a warm section", along(12.0, 0.5), along(72.0, -0.4), {"temperature": warm}),
    ):
        table = ocean(latitude=latitude, longitude=longitude, changes=changes)
        yield Case(check, f"{label}, as it is", table, NO_ROWS)
    wrong = ocean(latitude=along(72.0, -0.4), longitude=along(12.0, 0.5), changes={"temperature": warm})
    yield Case(check, "a warm section exchanged", wrong, {row(0, 5), row(9, 5)})
    inland = ocean(latitude=along(20.0, 0.2), longitude=along(5.0, 0.3))
    yield Case(check, "a section in the desert, that stays there", inland, NO_ROWS)
    desert = ocean(latitude=along(-25.0, 0.3), longitude=along(-45.0, -1.0))
    yield Case(check, "an open ocean where either way is sea", desert, NO_ROWS)
