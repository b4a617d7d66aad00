"""Runs over inboxes in which a cruise.toml says what the files beside it are."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

import pyarrow.parquet as pq
import pytest

from tests.flows.conftest import call, hashes
from tests.invented import EXPOCODE, bottle_file

if TYPE_CHECKING:
    from pathlib import Path

NUTRIENTS = """\
Lat;Lon;Station;Niskin;Tag;Druck;Nitrat
-35,5;-12,25;7;1;14.02.2009;100,0;20,5
-35,5;-12,25;7;2;14.02.2009;200,0;25,5
"""
DESCRIBED = f"""\
[[file]]
files = "nutrients.csv"
kind = "bottle"
decimal = ","
[file.columns]
Lat = "latitude"
Lon = "longitude"
Station = "station"
Niskin = "sample"
Tag = {{ quantity = "date", format = "DD.MM.YYYY" }}
Druck = {{ quantity = "pressure", unit = "dbar" }}
Nitrat = {{ quantity = "nitrate", unit = "umol/kg" }}
[file.constants]
expocode = "{EXPOCODE}"
"""


@pytest.fixture
def inbox(tmp_path: Path) -> Path:
    folder = tmp_path / "inbox"
    folder.mkdir()
    return folder


def nitrate(archive: Path) -> list[float]:
    values: list[float] = pq.read_table(archive / f"samples/{EXPOCODE}.parquet").column("nitrate").to_pylist()
    return values


def test_a_described_table_becomes_a_cruise_and_stays_as_it_is(inbox: Path, tmp_path: Path) -> None:
    (inbox / "nutrients.csv").write_text(NUTRIENTS, encoding="utf-8")
    (inbox / "cruise.toml").write_text(DESCRIBED, encoding="utf-8")
    archive = tmp_path / "archive"
    assert call("run", inbox, "--archive", archive).status == 0
    assert nitrate(archive) == [20.5, 25.5]
    before = hashes(archive)
    assert "Nothing was new" in call("run", inbox, "--archive", archive).out
    assert hashes(archive) == before


def test_another_description_makes_the_cruise_anew(inbox: Path, tmp_path: Path) -> None:
    (inbox / "nutrients.csv").write_text(NUTRIENTS, encoding="utf-8")
    (inbox / "cruise.toml").write_text(DESCRIBED, encoding="utf-8")
    archive = tmp_path / "archive"
    call("run", inbox, "--archive", archive)
    (inbox / "cruise.toml").write_text(DESCRIBED.replace('"umol/kg"', '"nmol/kg"'), encoding="utf-8")
    assert "revised, revision 2" in call("run", inbox, "--archive", archive).out
    assert nitrate(archive) == pytest.approx([0.0205, 0.0255])


def test_a_described_file_is_read_again_from_the_archive_with_its_description(
    inbox: Path, tmp_path: Path
) -> None:
    (inbox / "nutrients.csv").write_text(NUTRIENTS, encoding="utf-8")
    (inbox / "cruise.toml").write_text(DESCRIBED, encoding="utf-8")
    archive = tmp_path / "archive"
    call("run", inbox, "--archive", archive)
    for path in inbox.iterdir():
        path.unlink()
    (inbox / "more_hy1.csv").write_bytes(bottle_file({"STNNBR": "9"}))
    assert call("run", inbox, "--archive", archive).status == 0
    assert sorted(nitrate(archive)) == [20.5, 25.5, 30.0]


def test_a_broken_description_holds_back_the_files_beside_it_and_no_others(
    inbox: Path, tmp_path: Path
) -> None:
    (inbox / "a").mkdir()
    (inbox / "a/nutrients.csv").write_text(NUTRIENTS, encoding="utf-8")
    (inbox / "a/cruise.toml").write_text(DESCRIBED.replace("kind", "sort"), encoding="utf-8")
    (inbox / "b_hy1.csv").write_bytes(bottle_file())
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 1
    assert f"{EXPOCODE}  new, revision 1: 1 row in" in outcome.out
    (told,) = [line for line in outcome.out.splitlines() if line.startswith("refused")]
    assert told.startswith("refused  a/nutrients.csv: not used, because the cruise.toml beside it cannot be:")
    assert "a/cruise.toml, line 3: found the unknown key 'sort'" in told


def test_of_two_editions_the_one_that_is_said_to_stand_is_used(inbox: Path, tmp_path: Path) -> None:
    (inbox / "first_hy1.csv").write_bytes(bottle_file({}, {}))
    (inbox / "second_hy1.csv").write_bytes(bottle_file({"NITRAT": "31.00"}, {}))
    archive = tmp_path / "archive"
    refused = call("run", inbox, "--archive", archive)
    assert refused.status == 1
    assert "name the one that does in a cruise.toml beside them" in refused.out
    (inbox / "cruise.toml").write_text('[cruise]\nstands = ["second_hy1.csv"]\n', encoding="utf-8")
    assert call("run", inbox, "--archive", archive).status == 0
    assert nitrate(archive) == [31.0, 30.0]
    findings = pq.read_table(archive / f"findings/{EXPOCODE}.parquet").to_pylist()
    (told,) = [row for row in findings if row["check"] == "edition-set-aside"]
    assert "first_hy1.csv: holds 2 of the same samples as second_hy1.csv, which stands" in told["message"]
    assert "Nothing was new" in call("run", inbox, "--archive", archive).out


def test_two_editions_that_both_stand_are_refused(inbox: Path, tmp_path: Path) -> None:
    (inbox / "first_hy1.csv").write_bytes(bottle_file({}, {}))
    (inbox / "second_hy1.csv").write_bytes(bottle_file({"NITRAT": "31.00"}, {}))
    (inbox / "cruise.toml").write_text(
        '[cruise]\nstands = ["second_hy1.csv", "first_hy1.csv"]\n', encoding="utf-8"
    )
    assert call("run", inbox, "--archive", tmp_path / "archive").status == 1


def two_editions(inbox: Path, toml: str) -> None:
    (inbox / "first_hy1.csv").write_bytes(bottle_file({}, {}))
    (inbox / "second_hy1.csv").write_bytes(bottle_file({"NITRAT": "31.00"}, {}))
    (inbox / "cruise.toml").write_text(toml, encoding="utf-8")


def test_two_editions_are_told_once_and_counted_as_two_files(inbox: Path, tmp_path: Path) -> None:
    two_editions(inbox, "")
    (inbox / "cruise.toml").unlink()
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.out.count("both hold 2 of the same samples") == 1
    assert "2 deliveries refused" in outcome.out


def test_a_standing_edition_that_is_not_there_is_named(inbox: Path, tmp_path: Path) -> None:
    two_editions(inbox, '[cruise]\nstands = ["third_hy1.csv"]\n')
    out = call("run", inbox, "--archive", tmp_path / "archive").out
    assert (
        "expected one edition of a cruise; cruise.toml names 'third_hy1.csv' as the one that stands, and there is no"
        " such file; name one of these two there." in out
    )


def test_that_both_editions_are_said_to_stand_is_told(inbox: Path, tmp_path: Path) -> None:
    two_editions(inbox, '[cruise]\nstands = ["first_hy1.csv", "second_hy1.csv"]\n')
    out = call("run", inbox, "--archive", tmp_path / "archive").out
    assert (
        "expected one edition of a cruise; cruise.toml says of both that they stand; leave one of them there."
        in out
    )


def test_a_pattern_that_fits_no_file_is_told(inbox: Path, tmp_path: Path) -> None:
    (inbox / "nutrients.csv").write_text(NUTRIENTS, encoding="utf-8")
    (inbox / "cruise.toml").write_text(DESCRIBED.replace("nutrients.csv", "nutriens*.csv"), encoding="utf-8")
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 1
    assert (
        "note  cruise.toml, line 2: describes 'nutriens*.csv', and no file beside it is called so; correct the name, or"
        " remove what is said of it." in outcome.out
    )
    assert "The cruise.toml beside it describes 'nutriens*.csv' and not this file." in outcome.out
    checked = call("check", inbox / "nutrients.csv")
    assert "The cruise.toml beside it describes 'nutriens*.csv' and not this file." in checked.out


def test_a_description_of_no_file_is_told_where_all_files_can_be_read_without_it(
    inbox: Path, tmp_path: Path
) -> None:
    (inbox / "first_hy1.csv").write_bytes(bottle_file({}, {}))
    (inbox / "cruise.toml").write_text(
        '[cruise]\nstands = ["gone_hy1.csv"]\n[[file]]\nfiles = "fisrt_hy1.csv"\n[file.constants]\nsection = "V2"\n',
        encoding="utf-8",
    )
    checked = call("check", inbox / "first_hy1.csv").out
    assert "\nnote  cruise.toml, line 4: describes 'fisrt_hy1.csv', and no file" in checked
    outcome = call("run", inbox, "--archive", tmp_path / "archive", "--summary", tmp_path / "summary.json")
    assert outcome.status == 0
    assert "note  cruise.toml, line 4: describes 'fisrt_hy1.csv', and no file" in outcome.out
    assert (
        "note  cruise.toml, line 2: says that 'gone_hy1.csv' stands, and no file beside it is called so"
        in (outcome.out)
    )
    assert len(json.loads((tmp_path / "summary.json").read_text(encoding="utf-8"))["notes"]) == 2
