"""The command that tells how carbon is divided among its forms."""

from __future__ import annotations

import csv
import json
from typing import TYPE_CHECKING

import matplotlib as mpl
import numpy as np
import pytest

from flows.speciation_figure import draw
from pipeline.carbonate_settings import CarbonateSettings
from pipeline.tracers.speciation import speciation
from tests.flows.conftest import call

if TYPE_CHECKING:
    from pathlib import Path

WATER = ("--salinity", "35", "--temperature", "25")


def test_the_table_says_which_constants_and_where_the_ocean_lies() -> None:
    outcome = call("speciation", *WATER)
    assert outcome.status == 0
    assert "pK1 5.8472   pK2 8.9660   pKB 8.5975" in outcome.out
    assert "bicarbonate is largest at 7.41" in outcome.out
    assert "B(OH)4- is a part of total boron" in outcome.out
    assert (
        "Constants: carbonic lueker_2000, borate lee_2010, fluoride perez_fraga_1987, bisulfate dickson_1990."
        in outcome.out
    )
    assert "no source" not in outcome.out
    rows = [line for line in outcome.out.splitlines() if line[:5].strip().replace(".", "").isdigit()]
    assert len(rows) == 29
    assert [row.split()[0] for row in rows if row.endswith("ocean")] == ["7.50", "7.75", "8.00"]
    assert outcome.err == ""


def test_the_same_as_json_with_parts_that_add_up() -> None:
    told = json.loads(call("speciation", *WATER, "--pressure", "4000", "--format", "json").out)
    assert told["water"] == {"salinity": 35.0, "temperature": 25.0, "pressure": 4000.0}
    for parts in zip(told["aqueous_co2"], told["bicarbonate"], told["carbonate"], strict=True):
        assert sum(parts) == pytest.approx(1.0, abs=1e-12)
    assert told["pk1"] < 5.8472  # pressure makes acids stronger
    at_pk2 = min(range(len(told["ph"])), key=lambda i: abs(told["ph"][i] - told["pk2"]))
    assert told["carbonate"][at_pk2] == pytest.approx(0.5, abs=0.1)


def test_water_outside_the_measurements_of_a_constant_is_told() -> None:
    out = call("speciation", "--salinity", "35", "--temperature", "1").out
    assert (
        "note  The constants of Lueker et al. 2000 were measured for a salinity of 19 to 43 and 2 to 35 degC"
        in out
    )
    assert "note" not in call("speciation", *WATER).out


def test_every_form_says_the_constants_the_units_and_where_nobody_measured(tmp_path: Path) -> None:
    cold = ("--salinity", "35", "--temperature", "1")
    told = json.loads(call("speciation", *cold, "--format", "json", "--out", tmp_path / "a.svg").out)
    assert told["constants"]["borate"] == "lee_2010"
    assert told["units"]["hydroxide"] == "umol/kg"
    assert told["units"]["borate"] == "part of total boron"
    assert [note[:33] for note in told["notes"]] == [
        "The constants of Lueker et al. 20",
        "The constants of Perez and Fraga ",
    ]
    assert json.loads(call("speciation", *WATER, "--format", "json").out)["notes"] == []
    call("speciation", *cold, "--out", tmp_path / "a.csv")
    row = next(csv.DictReader((tmp_path / "a.csv").read_text(encoding="utf-8").splitlines()))
    assert (row["salinity"], row["temperature_degc"], row["pressure_dbar"]) == ("35", "1", "0")
    assert row["constants"].startswith("carbonic lueker_2000, borate lee_2010, ")
    assert row["notes"] == " ".join(told["notes"])
    assert 0 < float(row["borate_of_boron"]) < 1e-4


def test_the_figure_says_the_same() -> None:
    with mpl.rc_context({"svg.fonttype": "none"}):
        found = speciation(np.linspace(4.0, 11.0, 29), 35.0, 1.0, 0.0, CarbonateSettings())
        figure = draw(found, (35.0, 1.0, 0.0), ["constants of a test", "A note on them."], "svg").decode()
    for words in ("part of DIC, or of boron", "constants of a test", "A note on them."):
        assert words in figure


def test_constants_are_those_of_the_settings(tmp_path: Path) -> None:
    settings = tmp_path / "settings.toml"
    settings.write_text('[carbonate]\ncarbonic = "roy_1993"\n')
    assert "pK1 5.8563   pK2 8.9249" in call("speciation", *WATER, "--settings", settings).out


@pytest.mark.parametrize(
    ("ending", "begins"), [("svg", b"<?xml"), ("png", b"\x89PNG"), ("csv", b"ph,aqueous_co2,")]
)
def test_files_are_the_same_bytes_every_time(tmp_path: Path, ending: str, begins: bytes) -> None:
    files = [tmp_path / f"{number}.{ending}" for number in range(2)]
    for file in files:
        outcome = call("speciation", *WATER, "--out", file)
        assert outcome.status == 0
        assert outcome.err == f"Written: {file}\n"
    first, second = (file.read_bytes() for file in files)
    assert first.startswith(begins)
    assert first == second


def test_the_csv_opens_as_a_table(tmp_path: Path) -> None:
    file = tmp_path / "a.csv"
    call("speciation", *WATER, "--out", file)
    with file.open(newline="") as text:
        rows = list(csv.DictReader(text))
    assert len(rows) == 281
    assert float(rows[-1]["carbonate"]) > 0.99


@pytest.mark.parametrize(
    ("changed", "sentence"),
    [
        (("--salinity", "nan"), "--salinity: found nan, expected 1 to 50; correct it."),
        (("--temperature", "99"), "--temperature (degC): found 99, expected -4 to 45; correct it."),
        (("--pressure", "1e9"), "--pressure (dbar): found 1e+09, expected 0 to 12000; correct it."),
        (("--pressure", "-5"), "--pressure (dbar): found -5, expected 0 to 12000; correct it."),
        (
            ("--out", "a.pdf"),
            "a.pdf: found another ending, expected .svg, .png, .csv; give such a file as --out.",
        ),
        (("--out", "/no/such/a.csv"), "/no/such/a.csv: cannot be written (No such file or directory);"),
    ],
)
def test_wrong_usage_is_one_sentence(changed: tuple[str, str], sentence: str) -> None:
    outcome = call("speciation", *WATER, *changed)
    assert outcome.status == 2
    assert sentence in outcome.err
    assert "Traceback" not in outcome.err
