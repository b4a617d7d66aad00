"""Spoiled tables of every kind: refused with a sentence, or read with every row accounted for; never a traceback."""

from __future__ import annotations

import random
import resource
import subprocess
import sys
import zipfile
from io import BytesIO
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.problems import DeliveryProblem
from tests.reading.tables import CRUISE, as_parquet, as_text, as_workbook, read_table

ROOT = Path(__file__).parent.parent.parent
TEXT, WORKBOOK, PARQUET = as_text(), as_workbook(CRUISE * 3), as_parquet(CRUISE * 3)


def survives(data: bytes, name: str) -> None:
    said = None
    try:
        delivery = read_table(data, name)
    except DeliveryProblem as problem:
        said = str(problem)
    if said is None:
        assert delivery.rows == delivery.table.num_rows + len(delivery.rejects)
    else:
        assert "\n" not in said
        assert name in said


def luck(seed: int) -> random.Random:
    """Return chances that are the same every time."""
    return random.Random(seed)  # noqa: S311 - no secrets here


def spoiled(data: bytes, chance: random.Random) -> bytes:
    """Return data cut, or with bytes changed, left out or put in."""
    at = chance.randrange(len(data))
    match chance.randrange(4):
        case 0:
            return data[:at]
        case 1:
            return data[:at] + data[at + chance.randrange(1, 60) :]
        case 2:
            return data[:at] + chance.randbytes(chance.randrange(1, 30)) + data[at:]
    changed = bytearray(data)
    for _ in range(chance.choice([1, 1, 1, 2, 5, 20])):
        changed[chance.randrange(len(changed))] = chance.randrange(256)
    return bytes(changed)


@settings(max_examples=200, deadline=None, derandomize=True)
@given(
    at=st.integers(0, len(TEXT)),
    cut=st.integers(0, 30),
    junk=st.binary(max_size=8) | st.sampled_from([b'"', b"\n", b","]),
)
def test_text(at: int, cut: int, junk: bytes) -> None:
    survives(TEXT[:at] + junk + TEXT[at + cut :], "cruise.txt")


@pytest.mark.parametrize("seed", range(150))
def test_spreadsheets(seed: int) -> None:
    survives(spoiled(WORKBOOK, luck(seed)), "cruise.xlsx")


PARTS = {
    name: zipfile.ZipFile(BytesIO(WORKBOOK)).read(name)
    for name in zipfile.ZipFile(BytesIO(WORKBOOK)).namelist()
}


@pytest.mark.parametrize("seed", range(150))
def test_parts_of_spreadsheets(seed: int) -> None:
    chance = luck(seed)
    part = chance.choice([name for name in PARTS if name.startswith("xl/") and "theme" not in name])
    data = spoiled(PARTS[part], chance)
    for number in (b"1048577", b"99999999999", b"-1", b"1e308", b"NaN"):
        if chance.random() < 0.2:
            data = data.replace(b'"%d"' % chance.randrange(1, 20), b'"%s"' % number, 1)
            data = data.replace(b">%d<" % chance.randrange(1, 20), b">%s<" % number, 1)
    buffer = BytesIO()
    with zipfile.ZipFile(buffer, "w") as new:
        for name, content in PARTS.items():
            new.writestr(name, data if name == part else content)
    survives(buffer.getvalue(), "cruise.xlsx")


def test_parquet_in_a_process_of_its_own_within_bounded_memory() -> None:
    done = subprocess.run(
        [sys.executable, "-m", __name__], cwd=ROOT, capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr[-2000:]
    assert "400 survived" in done.stdout


if __name__ == "__main__":
    resource.setrlimit(resource.RLIMIT_AS, (4 << 30, 4 << 30))
    resource.setrlimit(resource.RLIMIT_CPU, (120, 120))
    for seed in range(400):
        survives(spoiled(PARQUET, luck(seed)), "cruise.parquet")
    sys.stdout.write("400 survived\n")
