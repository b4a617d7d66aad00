"""Faults planted in what was delivered: keys, flags, ranges, pressures, positions, times and the sea floor."""

from __future__ import annotations

from datetime import timedelta
from typing import TYPE_CHECKING

import numpy as np

from pipeline.tables import floats
from tests.checking.cases import CRUISES, Case, changed, clean_casts, clean_samples, rows_of
from tests.invented import bottle_file, read

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    import pyarrow as pa

NO_ROWS: frozenset[int] = frozenset()


def cases() -> Iterator[Case]:
    """Yield every case of this module."""
    yield from keys_and_flags()
    yield from pressures()
    yield from floors()
    yield from positions()
    yield from times()


def keys_and_flags() -> Iterator[Case]:
    for seed in range(3):
        table = clean_samples(CRUISES[seed % 2])
        rows = rows_of(table, str(3 + 9 * seed))
        row, other = rows[3 + seed], rows[15]
        twice = changed(table, {"sample": {other: table.column("sample")[row].as_py()}})
        yield Case("duplicate-sample", f"row {other} has the number of row {row}", twice, None)
        again = changed(
            table, {"station": dict.fromkeys(rows, str(30 + seed)), "cast": dict.fromkeys(rows, 2)}
        )
        yield Case("repeated-station", f"a far station is called {30 + seed} too", again, None)
        for name in ("nitrate", "bottle_oxygen", "silicate"):
            flag = f"{name}_flag"
            yield Case("unknown-flag", f"{flag} 65", changed(table, {flag: {row: 65}}), {row})
            yield Case("flag-without-value", f"no {name}", changed(table, {name: {row: None}}), {row})
            yield Case("value-under-missing-flag", f"{flag} 9", changed(table, {flag: {row: 9}}), {row})
            whole = changed(table, {flag: dict.fromkeys(range(table.num_rows), 4)})
            yield Case("all-flagged-bad", f"every {flag} is 4", whole, None)
            for value in (-777.0, 12_623.0):
                yield Case("gross-range", f"{name} {value:g}", changed(table, {name: {row: value}}), {row})
            bad = changed(table, {name: {row: 12_623.0}, flag: {row: 4}})
            yield Case("gross-range", f"{name} is garbage, and flagged so", bad, NO_ROWS)
    extra = {"DOC": "UMOL/KG", "DOC_FLAG_I": ""}
    doubtful = [{"DOC": "45.0", "DOC_FLAG_I": flag} for flag in ("1", "3", "4")]
    yield Case(
        "igoss-flag", "DOC is doubtful and erroneous", read(bottle_file(*doubtful, extra=extra)).table, {1, 2}
    )
    good = read(bottle_file(*doubtful[:1], extra=extra)).table
    yield Case("igoss-flag", "DOC is good", good, NO_ROWS)


def pressures() -> Iterator[Case]:
    for seed in range(3):
        casts = clean_casts(CRUISES[seed % 2])
        rows = rows_of(casts, str(5 + 11 * seed))
        row = rows[40 + seed]
        pressure = floats(casts, "pressure")
        same = changed(casts, {"pressure": {row: float(pressure[row - 1])}})
        yield Case("duplicate-pressure", f"row {row} repeats the pressure before", same, {row})
        swapped = {row: float(pressure[row - 1]), row - 1: float(pressure[row])}
        yield Case("pressure-order", f"row {row} turns back", changed(casts, {"pressure": swapped}), {row})
        up = casts.take(rows[::-1])
        yield Case("pressure-order", "an upcast", up, NO_ROWS)
    yield Case(
        "duplicate-pressure",
        "bottles may share a pressure",
        read(bottle_file({"CTDPRS": "10.0"}, {"CTDPRS": "10.0"})).table,
        NO_ROWS,
    )


def floors() -> Iterator[Case]:
    for seed in range(3):
        for table in (clean_samples(CRUISES[seed % 2]), clean_casts(CRUISES[seed % 2])):
            rows = rows_of(table, str(8 + 10 * seed))
            floor = float(floats(table, "bottom_depth")[rows[0]])
            for value in (-50.0, 15_000.0, floor - 400.0, floor / 2.0, 0.0):
                wrong = changed(table, {"bottom_depth": dict.fromkeys(rows, value)})
                yield Case("bottom-depth", f"{value:.0f} m in place of {floor:.0f} m", wrong, None)
            # the sounding was made with another speed of sound
            near = changed(table, {"bottom_depth": dict.fromkeys(rows, 0.98 * floor)})
            yield Case("bottom-depth", "a sounding 2 % short", near, NO_ROWS)
            none = changed(table, {"bottom_depth": dict.fromkeys(rows, None)})
            yield Case("bottom-depth", "no sounding", none, NO_ROWS)


def section(positions: Sequence[tuple[float, float]], hours: float = 12.0) -> pa.Table:
    """Return one bottle at each position, so many hours after one another."""
    rows = []
    for i, (latitude, longitude) in enumerate(positions):
        minutes = round(60 * hours * i)
        day, minute = divmod(minutes, 1440)
        rows.append(
            {
                "STNNBR": str(i + 1),
                "LATITUDE": f"{latitude:.4f}",
                "LONGITUDE": f"{longitude:.4f}",
                "DATE": f"200902{1 + day:02d}",
                "TIME": f"{minute // 60:02d}{minute % 60:02d}",
            }
        )
    return read(bottle_file(*rows)).table


def positions() -> Iterator[Case]:
    for seed in range(3):
        table = clean_samples(CRUISES[seed % 2])
        rows = rows_of(table, str(10 + 8 * seed))
        latitude, longitude = (float(floats(table, name)[rows[0]]) for name in ("latitude", "longitude"))
        zero = changed(table, {name: dict.fromkeys(rows, 0.0) for name in ("latitude", "longitude")})
        yield Case("position-zero", "a position that was not filled in", zero, {min(rows)})
        for north, east, what in (
            (-latitude, longitude, "the sign of latitude is lost"),
            (latitude + 14.0, longitude, "a test station"),
        ):
            moved = changed(
                table, {"latitude": dict.fromkeys(rows, north), "longitude": dict.fromkeys(rows, east)}
            )
            yield Case("off-section", what, moved, {min(rows)})
            yield Case("station-speed", what, moved, {min(rows)})
    line = [(-40.0, 176.0 + 0.5 * i if i < 8 else -184.0 + 0.5 * i) for i in range(16)]
    yield Case("off-section", "over the date line", section(line, 4.0), NO_ROWS)
    yield Case("station-speed", "over the date line", section(line, 4.0), NO_ROWS)
    yield Case(
        "off-section",
        "the sign of longitude is lost",
        section(
            [(40.0, -30.0 + i) for i in range(5)] + [(40.0, 25.0)] + [(40.0, -24.0 + i) for i in range(4)]
        ),
        {5},
    )
    yield Case(
        "off-section",
        "an ocean crossed with few stations",
        section([(0.0, -150.0 + 7 * i) for i in range(8)], 40.0),
        NO_ROWS,
    )
    yield Case(
        "off-section",
        "two sections with a passage between them",
        section([(-30.0, 2.0 * i) for i in range(6)] + [(-45.0, 2.0 * i) for i in range(6)], 30.0),
        NO_ROWS,
    )
    equator = [(0.0, -4.0 + i) for i in range(9)]
    yield Case("position-zero", "a station on the equator at Greenwich", section(equator, 10.0), NO_ROWS)


def times() -> Iterator[Case]:
    for seed in range(3):
        table = clean_samples(CRUISES[seed % 2])
        rows = rows_of(table, str(12 + 6 * seed))
        clock = table.column("time").to_pylist()
        for days in (-30, 31):
            late = changed(table, {"time": {row: clock[row] + timedelta(days=days) for row in rows}})
            yield Case("clock-order", f"a station is dated {days} days off", late, {min(rows)})
        for years in (-1, 10):
            wrong = changed(
                table, {"time": {row: clock[row] + timedelta(days=365.25 * years) for row in rows}}
            )
            yield Case("departure-date", f"a station is dated {years} years off", wrong, {min(rows)})
        yield Case("departure-date", "a clean cruise", table, NO_ROWS)
        old = changed(table, {"expocode": dict.fromkeys(range(table.num_rows), "VES138_7")})
        yield Case("departure-date", "an expocode of the old kind", old, NO_ROWS)
        half = {row: clock[row] + timedelta(hours=30) for row in rows[:12]}
        yield Case("cast-time", "half a cast is dated later", changed(table, {"time": half}), None)
        quick = {row: clock[row] - timedelta(hours=11) for row in rows}
        yield Case("station-speed", "a clock that is half a day slow", changed(table, {"time": quick}), None)
        backwards = table.take(np.arange(table.num_rows)[::-1])
        yield Case("clock-order", "a list with the last cast first", backwards, NO_ROWS)
        shuffled = np.argsort(
            [str(station) for station in table.column("station").to_pylist()], kind="stable"
        )
        yield Case("clock-order", "a list by the letters of the stations", table.take(shuffled), NO_ROWS)
        yield Case("clock-order", "a clean cruise", table, NO_ROWS)
