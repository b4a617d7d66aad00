"""Values and casts that are repeated, and what of the ocean repeats a value as well."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.profiles import LIMITED
from pipeline.tables import floats
from tests.checking.cases import CRUISES, Case, changed, clean_casts, clean_samples, rows_of
from tests.checking.planted_profiles import NO_ROWS, bottles
from tests.invented import bottle_file, read

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

# A value repeated where the water itself hardly changes is no fault that anyone could see.
VISIBLE = {"temperature": 0.1, "salinity": 0.05, "oxygen": 20.0, "nitrate": 4.0, "phosphate": 0.3}
VISIBLE_COLUMNS = ("temperature", "ctd_salinity", "bottle_oxygen", "nitrate", "phosphate")


def cases() -> Iterator[Case]:
    """Yield every case of this module."""
    yield from stuck()
    yield from copies()


def stuck() -> Iterator[Case]:
    for seed in range(4):
        table = clean_samples(CRUISES[seed % 2])
        rows = rows_of(table, str(6 + 5 * seed))
        for name in ("bottle_oxygen", "nitrate", "phosphate", "temperature", "ctd_salinity"):
            for first, count in ((5, 5), (8, 6)):
                run = rows[first : first + count]
                if np.ptp(floats(table, name)[run]) < VISIBLE[LIMITED[name]]:
                    continue
                value = float(floats(table, name)[run[0]])
                repeated = changed(table, {name: dict.fromkeys(run, value)})
                yield Case("stuck-values", f"{name} is {value:g} in {count} bottles", repeated, set(run))
        casts = clean_casts(CRUISES[seed % 2])
        rows = rows_of(casts, str(6 + 5 * seed))
        for name in ("temperature", "ctd_salinity", "ctd_oxygen"):
            for run in (rows[20:60], rows[60:]):
                if np.ptp(floats(casts, name)[run]) < VISIBLE[LIMITED[name]]:
                    continue
                value = float(floats(casts, name)[run[0]])
                repeated = changed(casts, {name: dict.fromkeys(run, value)})
                yield Case("stuck-values", f"{name} is {value:g} at {len(run)} levels", repeated, set(run))
        whole = changed(casts, {"ctd_salinity": dict.fromkeys(rows, 34.5)})
        yield Case("stuck-values", "one salinity through a whole cast", whole, None)
    down = (5.0, 20.0, 40.0, 60.0, 80.0, 120.0, 180.0, 260.0)
    cold = (25.0, 24.2, 22.9, 21.0, 18.0, 15.5, 14.0, 12.5)
    yield Case(
        "stuck-values",
        "nutrients that are used up",
        bottles(
            down,
            CTDTMP=cold,
            NITRAT=(0.0, 0.0, 0.0, 0.0, 0.4, 3.0, 8.0, 12.0),
            PHSPHT=(0.05, 0.05, 0.05, 0.05, 0.12, 0.3, 0.6, 0.9),
        ),
        NO_ROWS,
    )
    yield Case(
        "stuck-values",
        "a mixed layer",
        bottles(
            down,
            CTDTMP=(18.1, 18.1, 18.1, 18.1, 18.1, 15.5, 14.0, 12.5),
            CTDSAL=(35.2, 35.2, 35.2, 35.2, 35.2, 35.1, 35.0, 34.9),
            SALNTY=(35.2, 35.2, 35.2, 35.2, 35.2, 35.1, 35.0, 34.9),
        ),
        NO_ROWS,
    )
    deep = np.arange(2000.0, 5600.0, 200.0)
    salt = np.round(34.709 - 0.03 * np.exp(-(deep - 2000.0) / 600.0), 3)
    yield Case(
        "stuck-values",
        "an abyss of one salinity, to three decimals",
        bottles(
            deep.tolist(),
            CTDTMP=(0.8 + 1.4 * np.exp(-(deep - 2000.0) / 1100.0)).tolist(),
            CTDSAL=salt.tolist(),
            SALNTY=salt.tolist(),
        ),
        NO_ROWS,
    )
    top = np.round(2.5 - 0.00000016 * (deep - 3600.0) ** 2, 2)
    yield Case(
        "stuck-values",
        "a maximum that rounding flattens",
        bottles(deep.tolist(), CTDTMP=np.linspace(3.0, 0.8, len(deep)).tolist(), PHSPHT=top.tolist()),
        NO_ROWS,
    )


def stuck_sensitivity(lengths: Sequence[int] = (4, 6, 10), count: int = 25) -> dict[str, list[float]]:
    """Return the share of runs of repeated values found, by quantity, anywhere in a cast, seen or hardly seen."""
    shares = {}
    for name in VISIBLE_COLUMNS:
        found = np.zeros((count, len(lengths)))
        for seed in range(count):
            random = np.random.default_rng([seed, len(name)])
            table = clean_samples(CRUISES[0])
            table = table.take(rows_of(table, str(random.integers(3, 43))))
            for i, length in enumerate(lengths):
                first = int(random.integers(0, table.num_rows - length))
                run = range(first, first + length)
                value = float(floats(table, name)[first])
                repeated = changed(table, {name: dict.fromkeys(run, value)})
                found[seed, i] = set(run) <= Case("stuck-values", "", repeated, set(run)).marked()
        shares[name] = found.mean(axis=0).tolist()
    return shares


def copies() -> Iterator[Case]:
    for seed in range(3):
        for kind, table in (
            ("samples", clean_samples(CRUISES[seed % 2])),
            ("casts", clean_casts(CRUISES[seed % 2])),
        ):
            one, other = rows_of(table, str(4 + seed)), rows_of(table, str(20 + seed))
            count = min(len(one), len(other))
            for share in (1.0, 0.7):
                some = int(share * count)
                names = ("temperature", "ctd_salinity", "ctd_oxygen", "bottle_salinity", "bottle_oxygen")
                columns = {
                    name: dict(zip(other[:some], floats(table, name)[one[:some]].tolist(), strict=True))
                    for name in names
                    if name in table.column_names
                }
                yield Case(
                    "copied-cast",
                    f"{kind}: {some} levels of one cast in another",
                    changed(table, columns),
                    None,
                )
    for table in (clean_samples(), clean_casts(), clean_samples(CRUISES[1]), clean_casts(CRUISES[1])):
        yield Case("copied-cast", "a clean cruise", table, NO_ROWS)
    rows = [
        {
            "STNNBR": str(station),
            "CTDPRS": f"{p}",
            "CTDTMP": f"{18 - p / 100:.1f}",
            "CTDSAL": f"{35 - p / 4000:.1f}",
            "OXYGEN": f"{230 + 7 * station - p / 10:.0f}",
            "LATITUDE": f"{station}.0",
        }
        for station in range(6)
        for p in range(0, 1000, 100)
    ]
    yield Case("copied-cast", "coarse values that coincide", read(bottle_file(*rows)).table, NO_ROWS)
