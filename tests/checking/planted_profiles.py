"""Faults planted in profiles, and what of the ocean looks like them: spikes, steps, inversions."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.profiles import LIMITED, limit_at
from pipeline.tables import floats
from pipeline.variables import REGISTRY
from tests.checking.cases import CRUISES, SETTINGS, Case, changed, clean_casts, clean_samples, rows_of
from tests.invented import bottle_file, cast_file, read

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    import pyarrow as pa
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    Values = Sequence[float] | FloatArray

MEASURED_HERE = ("CTDTMP", "CTDSAL", "SALNTY", "OXYGEN", "NITRAT", "PHSPHT")
NO_ROWS: frozenset[int] = frozenset()
SPIKED = {
    "samples": (
        "temperature",
        "ctd_salinity",
        "bottle_salinity",
        "bottle_oxygen",
        "nitrate",
        "phosphate",
        "silicate",
    ),
    "casts": ("temperature", "ctd_salinity", "ctd_oxygen"),
}


def cases() -> Iterator[Case]:
    """Yield every case of this module."""
    yield from spikes()
    yield from wide_spikes()
    yield from spike_look_alikes()
    yield from gradients()
    yield from inversions()


def spikes(seeds: Sequence[int] = (1, 2, 3)) -> Iterator[Case]:
    for seed in seeds:
        for kind, names in SPIKED.items():
            for name in names:
                table, row, around, limit = _spot(kind, name, seed)
                for sign in (1.0, -1.0):
                    # beyond all that five levels span: no slope can excuse it
                    value = (max(around) if sign > 0 else min(around)) + sign * (1.5 * limit + np.ptp(around))
                    if not _in_range(name, value):
                        continue  # another check's
                    spiked = changed(table, {name: {row: float(value)}})
                    yield Case("spike", f"{kind}, {name} of row {row} is {value:.4g}", spiked, {row})


def wide_spikes() -> Iterator[Case]:
    p, t, s = fine_cast()
    for width in (1, 2, 3):
        for first in (90, 460, 700):
            run = slice(first, first + width)
            warm, fresh = t.copy(), s.copy()
            warm[run] += 2.5
            fresh[run] -= 1.1
            rows = set(range(first, first + width))
            yield Case(
                "spike", f"{width} levels from {p[first]:g} dbar are too warm", levels(p, warm, s), rows
            )
            yield Case(
                "spike", f"{width} levels from {p[first]:g} dbar are too fresh", levels(p, t, fresh), rows
            )


def sensitivity(factors: Sequence[float] = (1.5, 3.0, 10.0), count: int = 25) -> dict[str, list[float]]:
    """Return the share of spikes found, by quantity, for spikes of so many times the limit at random levels."""
    shares = {}
    for kind, names in SPIKED.items():
        for name in names:
            found = np.zeros((count, len(factors)))
            for seed in range(count):
                table, row, around, limit = _spot(kind, name, 100 + seed)
                for i, factor in enumerate(factors):
                    values = [
                        around[2] + sign * factor * limit for sign in ((-1.0) ** seed, -((-1.0) ** seed))
                    ]
                    value = next((value for value in values if _in_range(name, value)), None)
                    spiked = changed(table, {name: {row: value}})
                    found[seed, i] = (
                        np.nan if value is None else row in Case("spike", "", spiked, {row}).marked()
                    )
            shares[f"{kind}, {name}"] = np.nanmean(found, axis=0).tolist()
    return shares


def end_sensitivity(
    factors: Sequence[float] = (10.0, 30.0, 100.0), count: int = 25
) -> dict[str, list[float]]:
    """Return the share of wrong deepest bottles that the gradient check finds, by quantity, so many spike limits off.

    NaN where no value so far off is a plausible one, which is another check's.
    """
    shares = {}
    for name in SPIKED["samples"]:
        found = np.full((count, len(factors)), np.nan)
        for seed in range(count):
            table = clean_samples(CRUISES[0])
            table = table.take(rows_of(table, str(np.random.default_rng([seed, 5]).integers(3, 43))))
            last, pressure = table.num_rows - 1, floats(table, "pressure")[-1:]
            limit = limit_at(getattr(SETTINGS.checks.spike_bottle, LIMITED[name]), pressure, SETTINGS.checks)[
                0
            ]
            for i, factor in enumerate(factors):
                value = float(floats(table, name)[last] + (-1.0) ** seed * factor * limit)
                if _in_range(name, value):
                    found[seed, i] = (
                        last in Case("gradient", "", changed(table, {name: {last: value}}), {last}).marked()
                    )
        known = np.count_nonzero(~np.isnan(found), axis=0)
        shares[name] = (np.nansum(found, axis=0) / np.where(known, known, np.nan)).tolist()
    return shares


def _in_range(name: str, value: float) -> bool:
    low, high = REGISTRY[name].plausible or (-np.inf, np.inf)
    return bool(low <= value <= high)


def _spot(kind: str, name: str, seed: int) -> tuple[pa.Table, int, FloatArray, float]:
    """Return one cast of a clean table, a row inside it, the values of five levels there, and the limit."""
    random = np.random.default_rng([seed, len(name)])
    table = (clean_samples if kind == "samples" else clean_casts)(CRUISES[seed % 2])
    # bottle salinity is sparse on the second cruise
    table = clean_samples(CRUISES[0]) if name == "bottle_salinity" else table
    station = str(random.integers(3, 43))
    rows = rows_of(table, station)
    table = table.take(rows)
    place = int(random.integers(2, len(rows) - 2))
    values, pressure = floats(table, name), floats(table, "pressure")
    limits = SETTINGS.checks.spike_bottle if kind == "samples" else SETTINGS.checks.spike_ctd
    limit = limit_at(getattr(limits, LIMITED[name]), pressure[[place]], SETTINGS.checks)
    return table, place, values[place - 2 : place + 3], float(limit[0])


def bottles(pressure: Values, **columns: Values) -> pa.Table:
    """Return one bottle cast with these pressures; columns by their exchange names, all others missing."""
    missing = dict.fromkeys(MEASURED_HERE, "-999") | {f"{name}_FLAG_W": "9" for name in MEASURED_HERE}
    flags = {f"{name}_FLAG_W": "2" for name in columns}
    rows = [
        {
            **missing,
            **flags,
            "CTDPRS": f"{p:.1f}",
            **{name: f"{values[i]:.4f}" for name, values in columns.items()},
        }
        for i, p in enumerate(pressure)
    ]
    return read(bottle_file(*rows)).table


def levels(pressure: Values, temperature: Values, salinity: Values) -> pa.Table:
    """Return one CTD cast."""
    lines = [
        f"{p:.1f},2,{t:.4f},2,{s:.4f},2" for p, t, s in zip(pressure, temperature, salinity, strict=True)
    ]
    return read(cast_file(lines), "cast_ct1.csv").table


def fine_cast() -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return pressure, temperature, salinity every dbar: mixed layer, sharp thermocline, layered interior."""
    random = np.random.default_rng(7)
    p = np.arange(1.0, 801.0)
    step = 0.5 * (1.0 - np.tanh((p - 42.0) / 1.6))
    t = 8.0 + 11.0 * step - 0.004 * p + random.normal(0.0, 0.001, len(p))
    s = 34.6 + 1.1 * step + random.normal(0.0, 0.0008, len(p))
    layers = 0.25 * np.sin(p / 1.9) * np.exp(-0.5 * ((p - 300.0) / 30.0) ** 2)  # interleaving, compensated
    return p, t + layers, s + 0.2 * layers


def spike_look_alikes() -> Iterator[Case]:
    p, t, s = fine_cast()
    for check in ("spike", "gradient", "density-inversion", "stuck-values"):
        yield Case(check, "sharp thermocline and interleaving layers every dbar", levels(p, t, s), NO_ROWS)
        yield Case(check, "the same every 2 dbar", levels(p[::2], t[::2], s[::2]), NO_ROWS)
        for coarse in (clean_samples(), clean_casts()):
            yield Case(check, f"a clean cruise, {coarse.num_rows} rows", coarse, NO_ROWS)
    down = (5.0, 25.0, 50.0, 75.0, 100.0, 150.0, 200.0, 300.0)
    yield Case(
        "spike",
        "bottles through a sharp thermocline",
        bottles(down, CTDTMP=(24.1, 24.0, 24.0, 16.0, 14.5, 13.9, 13.0, 11.0)),
        NO_ROWS,
    )
    yield Case(
        "spike",
        "cold water left from winter under a summer surface",
        bottles(down, CTDTMP=(2.1, 1.9, -0.9, -1.6, -0.7, 1.2, 1.8, 1.9)),
        NO_ROWS,
    )
    yield Case(
        "spike",
        "an oxygen maximum under the mixed layer",
        bottles(down, OXYGEN=(228.0, 229.0, 268.0, 244.0, 231.0, 215.0, 205.0, 200.0)),
        NO_ROWS,
    )
    deep = (500.0, 700.0, 900.0, 1100.0, 1400.0, 1800.0, 2200.0, 2700.0)
    salty = (34.60, 34.42, 34.31, 34.36, 34.52, 34.64, 34.70, 34.72)
    yield Case("spike", "a salinity minimum", bottles(deep, SALNTY=salty, CTDSAL=salty), NO_ROWS)
    fold = (34.60, 34.50, 34.45, 34.50, 34.55, 34.62, 34.78, 34.70)
    yield Case(
        "spike", "a feature that both salinities show", bottles(deep, SALNTY=fold, CTDSAL=fold), NO_ROWS
    )
    close = (1000.0, 1000.9, 1500.0, 1500.6, 2000.0, 2000.4, 2500.0, 2501.9)
    yield Case(
        "spike",
        "bottles closed in pairs within 2 dbar",
        bottles(close, NITRAT=(33.0, 33.1, 34.0, 33.9, 33.2, 33.25, 32.4, 32.3)),
        NO_ROWS,
    )


def gradients() -> Iterator[Case]:
    p, t, s = fine_cast()
    for fault in (9.0, -5.0):
        hit = t.copy()
        hit[-1] += fault
        yield Case("gradient", f"the deepest level is off by {fault:g} degC", levels(p, hit, s), {len(p) - 1})
        hit = t.copy()
        hit[0] += 3.0 * fault if fault < 0 else 1.5 * fault
        yield Case("gradient", f"the first level is {hit[0]:.1f} degC", levels(p, hit, s), {0})
    hit = s.copy()
    hit[500:] -= 12.0
    yield Case("gradient", "salinity steps down within the cast", levels(p, t, hit), {500})
    for seed in range(4):
        table = clean_samples(CRUISES[seed % 2])
        rows = rows_of(table, str(5 + 7 * seed))
        for name, off in (
            ("bottle_oxygen", -200.0),
            ("phosphate", 2.6),
            ("temperature", 20.0),
        ):
            value = float(floats(table, name)[rows[-1]] + off)
            hit_table = changed(table, {name: {rows[-1]: value}})
            yield Case("gradient", f"the deepest bottle: {name} {value:.4g}", hit_table, {rows[-1]})
    yield Case(
        "gradient",
        "a river plume",
        bottles(
            (2.0, 6.0, 12.0, 25.0, 60.0),
            CTDSAL=(1.5, 26.0, 33.0, 34.2, 34.5),
            SALNTY=(1.5, 26.0, 33.0, 34.2, 34.5),
        ),
        NO_ROWS,
    )
    yield Case(
        "gradient",
        "two bottles at one level in the thermocline",
        bottles((5.0, 60.0, 60.8, 100.0), CTDTMP=(22.0, 18.0, 16.2, 14.0), NITRAT=(0.0, 3.0, 5.5, 9.0)),
        NO_ROWS,
    )


def inversions() -> Iterator[Case]:
    for seed in range(4):
        random = np.random.default_rng([seed, 9])
        for kind, table in (
            ("samples", clean_samples(CRUISES[0])),
            ("casts", clean_casts(CRUISES[seed % 2])),
        ):
            rows = rows_of(table, str(random.integers(3, 40)))
            row = rows[int(random.integers(len(rows) // 2, len(rows) - 2))]
            warm = float(floats(table, "temperature")[row]) + 6.0
            yield Case(
                "density-inversion",
                f"{kind}: row {row} is 6 degC too warm",
                changed(table, {"temperature": {row: warm}}),
                {row},
            )
            salt = float(floats(table, "ctd_salinity")[row]) + 0.9
            both = {
                name: {row: salt}
                for name in ("ctd_salinity", "bottle_salinity")
                if name in table.column_names
            }
            yield Case(
                "density-inversion", f"{kind}: row {row} is 0.9 too salty", changed(table, both), {row}
            )
        rows = rows_of(clean_samples(), str(random.integers(3, 40)))
        row = rows[len(rows) // 2]
        fresh = float(floats(clean_samples(), "bottle_salinity")[row]) - 1.2
        yield Case(
            "density-inversion",
            f"the bottle salinity of row {row} is 1.2 too low",
            changed(clean_samples(), {"bottle_salinity": {row: fresh}}),
            {row},
        )
    yield Case(
        "density-inversion", "deep water that is unstable by sigma0 alone", sigma0_seems_unstable(), NO_ROWS
    )
    yield Case(
        "density-inversion",
        "two bottles at one level, out of order by the heave of the ship",
        bottles((5.0, 60.0, 61.5, 100.0), CTDTMP=(22.0, 16.0, 16.6, 14.0), CTDSAL=(34.5,) * 4),
        NO_ROWS,
    )
    yield Case(
        "density-inversion",
        "a layer that the night has cooled",
        bottles((3.0, 20.0, 40.0, 80.0), CTDTMP=(20.00, 20.08, 20.05, 17.0), CTDSAL=(35.1,) * 4),
        NO_ROWS,
    )


def sigma0_seems_unstable() -> pa.Table:
    """Return a cast of warm salty water over cold fresh water, stable in place and not by sigma0."""
    salt = (34.930, 34.910, 34.760, 34.670)
    return bottles(
        (2000.0, 2800.0, 3800.0, 4800.0), CTDTMP=(3.05, 2.75, 1.10, 0.55), CTDSAL=salt, SALNTY=salt
    )
