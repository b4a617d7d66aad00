"""The command ``seawhence speciation``: the forms of carbon over pH, as a table and as a figure."""

from __future__ import annotations

import csv
import io
import json
import sys
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

import numpy as np

from flows.records import ExitStatus
from pipeline.problems import UsageProblem
from pipeline.seawater import Domain
from pipeline.settings import read_settings
from pipeline.tracers.equilibria import PRESSURE, SALINITY, TEMPERATURE
from pipeline.tracers.speciation import (
    OCEAN_PH,
    Speciation,
    constants,
    constants_words,
    outside_words,
    speciation,
)

if TYPE_CHECKING:
    import argparse
    from pathlib import Path

    from pipeline.carbonate_settings import CarbonateSettings

_TABLE_PH, _FINE_PH = np.linspace(4.0, 11.0, 29), np.linspace(4.0, 11.0, 281)
_COLUMNS = ("ph", "aqueous_co2", "bicarbonate", "carbonate", "borate", "hydroxide")
_HEADINGS = ("pH", "CO2", "HCO3-", "CO3--", "B(OH)4-", "OH- umol/kg")
_UNITS = {
    "salinity": "practical salinity", "temperature": "degC", "pressure": "dbar", "ph": "total scale",
    "aqueous_co2": "part of DIC", "bicarbonate": "part of DIC", "carbonate": "part of DIC",
    "borate": "part of total boron", "hydroxide": "umol/kg",
}  # fmt: skip
# The columns of the file, which names no units elsewhere.
_FILE_COLUMNS = ("ph", "aqueous_co2", "bicarbonate", "carbonate", "borate_of_boron", "hydroxide_umol_kg")
_SURFACE = Domain(0.0, PRESSURE.high)  # water lies under the surface
_ENDINGS = (".svg", ".png", ".csv")


def print_speciation(chosen: argparse.Namespace) -> int:
    """Print the table, and write the figure or the table where one was asked for.

    Parameters
    ----------
    chosen
        ``salinity``, ``temperature`` (degC) and ``pressure`` (dbar) are numbers, ``out`` and ``settings`` paths or
        None, ``format`` is ``text`` or ``json``.

    """
    settings = read_settings(chosen.settings).carbonate
    water = (chosen.salinity, chosen.temperature, chosen.pressure)
    for value, domain, name in zip(
        water,
        (SALINITY, TEMPERATURE, _SURFACE),
        ("--salinity", "--temperature (degC)", "--pressure (dbar)"),
        strict=True,
    ):
        if not domain.low <= value <= domain.high:
            raise UsageProblem(
                f"{name}: found {value:g}, expected {domain.low:g} to {domain.high:g}; correct it."
            )
    if chosen.out is not None and chosen.out.suffix.lower() not in _ENDINGS:
        raise UsageProblem(
            f"{chosen.out}: found another ending, expected {', '.join(_ENDINGS)}; give such a file as --out."
        )
    found = speciation(_TABLE_PH, *water, settings)
    if chosen.format == "json":
        print(json.dumps(_as_json(found, water, settings), indent=2))
    else:
        print("\n".join([*_heading(found, water, settings), "", *_rows(found)]))
    if chosen.out is not None:
        _write(chosen.out, speciation(_FINE_PH, *water, settings), water, settings)
        print(f"Written: {chosen.out}", file=sys.stderr)
    return ExitStatus.GOOD


def _heading(found: Speciation, water: tuple[float, float, float], settings: CarbonateSettings) -> list[str]:
    """Return in sentences what water this is, and where in the table the ocean lies."""
    ocean = speciation(np.array(OCEAN_PH), *water, settings)
    parts = ", ".join(
        f"{words} {getattr(ocean, name)[0]:.1%} to {getattr(ocean, name)[1]:.1%}"
        for name, words in (
            ("aqueous_co2", "CO2"),
            ("bicarbonate", "bicarbonate"),
            ("carbonate", "carbonate"),
        )
    )
    equal = 0.5 * (found.pk1 + found.pk2)
    pks = (("pK1", found.pk1), ("pK2", found.pk2), ("pKB", found.pk_borate), ("pKW", found.pk_water))
    return [
        f"Sea water of salinity {water[0]:g}, {water[1]:g} degC, {water[2]:g} dbar; pH on the total scale.",
        "   ".join(f"{name} {value:.4f}" for name, value in pks),
        f"Constants: {constants_words(settings)}.",
        (
            "CO2, HCO3- and CO3-- are parts of DIC, B(OH)4- is a part of total boron. Below pK1 most carbon is CO2,"
            f" above pK2 most is carbonate; bicarbonate is largest at {equal:.2f}, where CO2 and carbonate are equal."
        ),
        f"Nearly all ocean water lies between pH {OCEAN_PH[0]:g} and {OCEAN_PH[1]:g}: {parts} of DIC.",
        *(f"note  {note}" for note in outside_words(water, settings)),
    ]


def _rows(found: Speciation) -> list[str]:
    lines = ["  ".join([f"{_HEADINGS[0]:>5}", *(f"{heading:>11}" for heading in _HEADINGS[1:])])]
    for row in zip(*(getattr(found, name) for name in _COLUMNS), strict=True):
        mark = "  ocean" if OCEAN_PH[0] <= row[0] <= OCEAN_PH[1] else ""
        parts = (*(f"{value:11.6f}" for value in row[1:5]), f"{row[5]:11.5g}")
        lines.append(f"{row[0]:5.2f}  " + "  ".join(parts) + mark)
    return lines


def _as_json(
    found: Speciation, water: tuple[float, float, float], settings: CarbonateSettings
) -> dict[str, Any]:
    values = asdict(found)
    return {
        "water": dict(zip(("salinity", "temperature", "pressure"), water, strict=True)),
        "constants": constants(settings),
        "notes": outside_words(water, settings),
        "units": _UNITS,
        **{name: values[name] for name in ("pk1", "pk2", "pk_borate", "pk_water")},
        "ocean_ph": OCEAN_PH,
        **{name: values[name].tolist() for name in _COLUMNS},
    }


def _write(
    path: Path, found: Speciation, water: tuple[float, float, float], settings: CarbonateSettings
) -> None:
    ending = path.suffix.lower()
    try:
        if ending == ".csv":
            text = io.StringIO()
            writer = csv.writer(text, lineterminator="\n")
            notes = outside_words(water, settings)
            whole = (*(f"{value:.9g}" for value in water), constants_words(settings), " ".join(notes))
            writer.writerow(
                [*_FILE_COLUMNS, "salinity", "temperature_degc", "pressure_dbar", "constants", "notes"]
            )
            writer.writerows(
                [*(f"{value:.9g}" for value in row), *whole]
                for row in zip(*(getattr(found, name) for name in _COLUMNS), strict=True)
            )
            path.write_text(text.getvalue(), encoding="utf-8")
        else:
            from flows.speciation_figure import draw  # noqa: PLC0415 - half a second that only a figure needs

            words = [f"constants {constants_words(settings)}", *outside_words(water, settings)]
            path.write_bytes(draw(found, water, words, ending.removeprefix(".")))
    except OSError as error:
        raise UsageProblem(
            f"{path}: cannot be written ({error.strerror}); give another file as --out."
        ) from error
