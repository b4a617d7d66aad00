"""A small invented cruise whose names try to break a page, resolved into the sources of the demonstration."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from tests.invented import bottle_file, cast_file, zipped

if TYPE_CHECKING:
    from pathlib import Path

SCRIPT = "<script>alert(1)</script>"
FORMULA = "$$x^2$$"
TITLE = """Sources of the "Mirrel" sea & others' </script><script>alert(2)</script> \N{WATER WAVE}"""
EXPOCODE = "ZZV120090306"
LATER = "ZZV220210218"
STATIONS = ("1", SCRIPT, "quo'te", FORMULA, "\N{WATER WAVE}", "a;b", "=1+1", "\u202ereversed", "9")
LEVELS = np.array([5.0, 150.0, 300.0, 600.0, 900.0, 1200.0, 1600.0, 2200.0, 2800.0, 3400.0])

# Conservative Temperature, practical salinity, oxygen, phosphate, nitrate, silicate of some of the sources.
_OVF = np.array([1.6, 34.92, 292.0, 0.96, 13.8, 11.0])
_DEP = np.array([2.5, 34.74, 172.0, 2.16, 31.6, 138.0])
_MID = np.array([3.9, 34.12, 258.0, 1.66, 22.8, 16.0])
_CEN = np.array([14.0, 35.28, 230.0, 0.62, 8.8, 4.0])


def water(pressure: float, overflow: float) -> list[float]:
    """Return a mixture that goes from central water above to overflow or deep water below."""
    deep = overflow * _OVF + (1 - overflow) * _DEP
    mixed = [
        np.interp(pressure, [0.0, 900.0, 3400.0], values) for values in zip(_CEN, _MID, deep, strict=True)
    ]
    return [float(value) for value in mixed]


def bottles(expocode: str = EXPOCODE, date: str = "20090306", overflow: float = 0.8) -> bytes:
    """Return a bottle file of nine stations along a line, with a value that is no number and a rejected row."""
    rows = []
    for number, station in enumerate(STATIONS):
        for sample, pressure in enumerate(LEVELS):
            t, s, oxygen, phosphate, nitrate, silicate = water(float(pressure), overflow * (1 - number / 10))
            rows.append(
                {
                    "EXPOCODE": expocode, "SECT_ID": "V<1>", "STNNBR": station, "SAMPNO": str(sample + 1),
                    "DATE": date, "TIME": f"{8 + number:02d}00", "LATITUDE": f"{-35.0 + 0.1 * number:.4f}",
                    "LONGITUDE": f"{-12.0 + 0.6 * number:.4f}", "DEPTH": "3600", "CTDPRS": f"{pressure:.1f}",
                    "CTDTMP": f"{t + 1e-4 * pressure:.4f}", "CTDSAL": f"{s:.4f}", "SALNTY": f"{s:.4f}",
                    "OXYGEN": f"{oxygen:.2f}", "NITRAT": f"{nitrate:.3f}", "PHSPHT": f"{phosphate:.4f}",
                    "SILCAT": f"{silicate:.3f}", "SILCAT_FLAG_W": "2",
                }
            )  # fmt: skip
    rows[4]["NITRAT"] = "3O.31"
    rows[5]["LATITUDE"] = "-999.0000"
    rows[14]["NITRAT_FLAG_W"] = "4"
    return bottle_file(*rows, extra={"SILCAT": "UMOL/KG", "SILCAT_FLAG_W": ""})


def profile(expocode: str = EXPOCODE) -> bytes:
    """Return a zip with the CTD profile of the first station."""
    levels = [
        f"{p:.1f},2,{water(p, 0.8)[0] + 1e-4 * p:.4f},2,{water(p, 0.8)[1]:.4f},2"
        for p in np.arange(0.0, 3400.0, 10.0)
    ]
    header = {
        "EXPOCODE": expocode,
        "SECT_ID": "V<1>",
        "DATE": "20090306",
        "LATITUDE": "-35.0",
        "LONGITUDE": "-12.0",
    }
    return zipped({"one_ct1.csv": cast_file(levels, header=header)})


def inbox(folder: Path, catalogue: Path) -> tuple[Path, Path]:
    """Write an inbox of two visits and the catalogue with a title of its own; return both places."""
    place = folder / "inbox"
    place.mkdir()
    (place / "one_hy1.csv").write_bytes(bottles())
    (place / "one_ct1.zip").write_bytes(profile())
    (place / "later_hy1.csv").write_bytes(bottles(LATER, "20210218", overflow=0.5))
    text = catalogue.read_text(encoding="utf-8")
    lines = [f"title = '''{TITLE}'''" if line.startswith("title = ") else line for line in text.splitlines()]
    sources = folder / "sources.toml"
    sources.write_text("\n".join(lines), encoding="utf-8")
    return place, sources
