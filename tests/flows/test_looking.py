"""``check`` notices in a file what a run notices in it, with nothing written."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

import pyarrow.parquet as pq
import pytest

from tests.flows.conftest import call
from tests.invented import EXPOCODE, bottle_file

if TYPE_CHECKING:
    from pathlib import Path

CARBON = {"TCARBN": "UMOL/KG", "ALKALI": "UMOL/KG", "PH_TOT": "", "PH_TMP": "DEG C", "DELC13": "/MILLE"}
GOOD = {"TCARBN": "2175.0", "ALKALI": "2320.0", "PH_TOT": "7.7", "PH_TMP": "25.0", "DELC13": "0.5"}


def file_of(*changed: dict[str, str], expocodes: tuple[str, ...] = (EXPOCODE,)) -> bytes:
    rows = [
        {**GOOD, "EXPOCODE": expocode, "CTDPRS": str(100.0 * (i + 1)), **one}
        for expocode in expocodes
        for i, one in enumerate(changed)
    ]
    return bottle_file(*rows, extra=CARBON)


@pytest.mark.parametrize(
    ("changed", "words"),
    [
        ({"PH_TOT": "8.2"}, "PH_TOT disagrees with TCARBN and ALKALI"),
        ({"PH_TMP": "-999"}, "PH_TOT has 1 values without the temperature they were measured at"),
        ({"PH_TOT": "14"}, "PH_TOT is 14; expected 6.5 to 9"),
        ({"PH_TMP": "298.15"}, "PH_TMP is 298.15; expected -4 to 45 degC"),
        ({"ALKALI": "150"}, "ALKALI is 150 with 2320 above it"),
        ({"DATE": "20350612"}, "1 of 3 samples with a DELC13 are of 2035"),
    ],
)
def test_a_look_tells_what_a_run_tells_of_carbon(changed: dict[str, str], words: str, tmp_path: Path) -> None:
    inbox = tmp_path / "inbox"
    inbox.mkdir()
    (inbox / "a_hy1.csv").write_bytes(file_of({}, changed, {}))
    told = json.loads(call("check", inbox / "a_hy1.csv", "--format", "json").out)["files"][0]["findings"]
    assert call("run", inbox, "--archive", tmp_path / "archive").status == 0
    kept = pq.read_table(tmp_path / "archive" / "findings" / f"{EXPOCODE}.parquet").to_pylist()
    assert any(words in finding["message"] for finding in told)
    assert sorted(f["message"] for f in told) == sorted(f["message"] for f in kept)
    assert {(f["check"], f["severity"], f["variable"], f["count"]) for f in told} == {
        (f["check"], f["severity"], f["variable"], f["count"]) for f in kept
    }


def test_the_page_for_the_group_asks_about_them(tmp_path: Path) -> None:
    path = tmp_path / "a_hy1.csv"
    path.write_bytes(file_of({}, {"PH_TOT": "8.2"}, {}))
    page = call("check", path, "--format", "markdown").out
    assert "we found nothing" not in page
    assert (
        "PH\\_TOT disagrees with TCARBN and ALKALI" in page
        or "PH_TOT disagrees with TCARBN and ALKALI" in page
    )


def test_of_a_file_of_several_cruises_each_is_looked_at_as_a_run_does(tmp_path: Path) -> None:
    inbox, other = tmp_path / "inbox", "ZZV120120306"
    inbox.mkdir()
    delivered = file_of({}, {"PH_TOT": "8.2"}, expocodes=(EXPOCODE, other))
    (inbox / "a_hy1.csv").write_bytes(delivered)
    told = json.loads(call("check", inbox / "a_hy1.csv", "--format", "json").out)["files"][0]["findings"]
    call("run", inbox, "--archive", tmp_path / "archive")
    kept = [
        row["message"]
        for expocode in (EXPOCODE, other)
        for row in pq.read_table(tmp_path / "archive" / "findings" / f"{expocode}.parquet").to_pylist()
    ]
    consistency = [f["message"] for f in told if "disagrees with TCARBN" in f["message"]]
    assert len(consistency) == 2
    assert {f["message"] for f in told} >= {message for message in kept if "PH_TOT" in message}
