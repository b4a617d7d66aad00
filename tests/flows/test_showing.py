"""What ``seawhence show`` tells of an archive: every row step by step, and what is damaged or missing."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
from typing import TYPE_CHECKING, Any

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from tests.flows.conftest import FIXTURES, ROOT, call
from tests.invented import EXPOCODE, bottle_file, cast_file, zipped

if TYPE_CHECKING:
    from pathlib import Path

WITHOUT_TRACERS = {
    name: value
    for quantity in ("OXYGEN", "NITRAT", "PHSPHT")
    for name, value in ((quantity, "-999.0"), (f"{quantity}_FLAG_W", "9"))
}


@pytest.fixture
def archive(tmp_path: Path) -> Path:
    """An archive of one cruise in two revisions, of a bottle file and a zip of casts."""
    inbox = tmp_path / "inbox"
    inbox.mkdir()
    (inbox / "a_ct1.zip").write_bytes(zipped({"a_ct1.csv": cast_file(), "../b_ct1.csv": cast_file()}))
    sources = ("--sources", FIXTURES / "sources.toml")
    for changed in ({}, {"NITRAT": "31.00"}):
        rows = ({"SALNTY": "12623"}, {"STNNBR": ""}, changed, WITHOUT_TRACERS)
        (inbox / "a_hy1.csv").write_bytes(bottle_file(*rows))
        call("run", inbox, "--archive", tmp_path / "archive", *sources)
    return tmp_path / "archive"


def told(archive: Path, *arguments: str) -> dict[str, Any]:
    values: dict[str, Any] = json.loads(call("show", archive, *arguments, "--format", "json").out)
    return values


def test_every_row_is_accounted_for_file_by_file(archive: Path) -> None:
    outcome = call("show", archive, EXPOCODE)
    assert outcome.status == 0
    lines = outcome.out.splitlines()
    start = lines.index("rows of a_hy1.csv, step by step")
    steps = [line.split() for line in lines[start + 1 : start + 12]]
    assert [" ".join(step) for step in steps] == [
        "in the file 4",
        "rejected 1 no-station 1",
        "kept 3",
        "with bad values 1 a check calls at least one value bad",
        "with doubtful values 0 and none bad",
        "without either 2",
        "with TEOS-10 3",
        "with tracers 2",
        "given to mixing 3",
        "resolved 2",
        "not resolved 1 incomplete 1",
    ]
    zipped_file = lines.index("rows of a_ct1.zip, step by step")
    assert "    rejected              1  member-path 1" in lines[zipped_file:]
    assert "    given to mixing       -" in lines[zipped_file:]


def test_what_is_shown_as_json(archive: Path) -> None:
    whole = told(archive)
    assert [(one["cruise"], one["revision"], one["whole"]) for one in whole["cruises"]] == [
        (EXPOCODE, 2, True)
    ]
    one = told(archive, EXPOCODE)
    assert (one["revision"], one["earlier_revisions"], one["whole"]) == (2, [1], True)
    by_name = {file["name"]: file["account"] for file in one["made_from"]["deliveries"]}
    assert by_name["a_hy1.csv"]["rejected"] == {"no-station": 1}
    assert by_name["a_hy1.csv"]["mixing"] == {"incomplete": 1, "solved": 2}
    assert by_name["a_ct1.zip"]["mixing"] == {}
    assert one["tags"]["incomplete"] == 1
    assert sum(one["tags"].values()) == one["rows"]["samples"] == 3


def without_accounts(archive: Path) -> None:
    """Rewrite the tables as an archive of before accounts were kept has them."""
    for path in archive.glob("*/*.parquet"):
        table = pq.read_table(path)
        metadata = dict(table.schema.metadata)
        record = json.loads(metadata[b"seawhence"])
        for file in record["deliveries"]:
            del file["account"]
        metadata[b"seawhence"] = json.dumps(record).encode()
        pq.write_table(table.replace_schema_metadata(metadata), path, write_page_checksum=True)


def test_an_archive_of_before_accounts_were_kept_can_be_read(archive: Path) -> None:
    without_accounts(archive)
    outcome = call("show", archive, EXPOCODE)
    assert outcome.status == 0
    lines = [line.split() for line in outcome.out.splitlines()]
    assert ["with", "TEOS-10", "-"] in lines
    assert ["rejected", "1"] in lines
    assert call("changes", archive, EXPOCODE).status == 0


def test_a_doubt_sets_the_exit_status(archive: Path) -> None:
    assert call("show", archive).status == 0
    (archive / f"casts/{EXPOCODE}.parquet").unlink()
    for arguments in ([], [EXPOCODE], [EXPOCODE, "--format", "json"]):
        outcome = call("show", archive, *arguments)
        assert outcome.status == 1
        assert "no table of casts is published" in outcome.out
    assert "1 something is damaged or missing" in call("show", "--help").out


def test_the_doubt_of_another_cruise_does_not_count(archive: Path) -> None:
    shutil.copytree(archive / "superseded" / EXPOCODE / "r0001", archive / "superseded" / "ZZV9" / "r0001")
    assert call("show", archive, EXPOCODE).status == 0
    assert call("show", archive).status == 1


def test_a_whole_archive_is_verified(archive: Path) -> None:
    outcome = call("show", archive, "--verify")
    assert outcome.status == 0
    # two editions of the bottle file, the zip, settings and sources; five tables of two revisions
    assert outcome.out.endswith(
        "\nverified: 5 kept files hashed, each what its name says; 10 tables read to the end, each whole and of the"
        " right revision.\n"
    )
    verified = told(archive, "--verify")["verified"]
    assert verified == {"deliveries": 5, "tables": 10, "troubles": [], "strangers": []}


def raw_file(archive: Path, name: str) -> Path:
    (sha256,) = {
        file["sha256"] for file in told(archive, EXPOCODE)["made_from"]["deliveries"] if file["name"] == name
    }
    return archive / f"raw/{sha256[:2]}/{sha256}"


def flip(path: Path, position: int) -> None:
    content = bytearray(path.read_bytes())
    content[position] ^= 1
    path.write_bytes(content)


def test_each_damage_is_told_in_a_sentence(archive: Path) -> None:
    spoiled, gone = raw_file(archive, "a_hy1.csv"), raw_file(archive, "a_ct1.zip")
    flip(spoiled, 100)
    gone.unlink()
    (archive / "raw/notes.txt").write_text("mine", encoding="utf-8")
    (archive / "raw/ab").mkdir(exist_ok=True)
    (archive / "raw/ab/other").write_text("mine", encoding="utf-8")
    flip(archive / f"casts/{EXPOCODE}.parquet", 40)
    flip(archive / f"superseded/{EXPOCODE}/r0001/samples.parquet", 40)
    assert call("show", archive).status == 0  # seen by looking at every byte only
    outcome = call("show", archive, "--verify")
    assert outcome.status == 1
    doubts = sorted(
        line.removeprefix("doubt  ") for line in outcome.out.splitlines() if line.startswith("doubt")
    )
    assert len(doubts) == 4
    told_of = {str(path): next(one for one in doubts if one.startswith(f"{path}: ")) for path in (
        spoiled, gone, archive / f"casts/{EXPOCODE}.parquet",
        archive / f"superseded/{EXPOCODE}/r0001/samples.parquet",
    )}  # fmt: skip
    assert told_of[str(spoiled)].endswith(f"It is the delivered file a_hy1.csv of {EXPOCODE}, revision 2.")
    assert "the delivered file a_ct1.zip of ZZV120090214, revision 2 is no longer there" in told_of[str(gone)]
    assert "note  raw/notes.txt: not a delivered file of the archive." in outcome.out
    assert "note  raw/ab/other: not a delivered file of the archive." in outcome.out
    assert call("show", archive, EXPOCODE, "--verify").status == 1


@pytest.mark.parametrize("spoil", [b"", b"PAR1", b"x" * 200])
def test_an_earlier_revision_that_does_not_open_is_told(archive: Path, spoil: bytes) -> None:
    path = archive / f"superseded/{EXPOCODE}/r0001/casts.parquet"
    path.write_bytes(spoil)
    outcome = call("show", archive, EXPOCODE, "--verify")
    assert outcome.status == 1
    assert f"doubt  {path}: damaged, this earlier revision cannot be read any more." in outcome.out


def test_a_revision_in_the_wrong_place_is_told(archive: Path) -> None:
    aside = archive / f"superseded/{EXPOCODE}/r0001"
    shutil.copy(archive / f"casts/{EXPOCODE}.parquet", aside / "casts.parquet")
    shutil.copy(aside / "samples.parquet", aside / "findings.parquet")
    pq.write_table(pa.table({"a": [1]}), aside / "rejects.parquet")
    outcome = call("show", archive, "--verify")
    assert outcome.status == 1
    assert "holds the casts of ZZV120090214, revision 2; expected revision 1" in outcome.out
    assert "holds the samples of ZZV120090214, revision 1" in outcome.out
    assert "rejects.parquet: this Parquet file was not written by seawhence" in outcome.out


def test_check_does_not_wait_for_a_pipe(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe_hy1.csv")
    code = "import sys; from flows.cli import main; sys.exit(main(sys.argv[1:]))"
    done = subprocess.run(
        [sys.executable, "-c", code, "check", str(tmp_path / "pipe_hy1.csv"), str(tmp_path)],
        capture_output=True, text=True, check=False, cwd=ROOT, timeout=60,
    )  # fmt: skip
    assert done.returncode == 1
    assert done.stdout.splitlines() == [
        "refused: pipe_hy1.csv: found no regular file; give a delivered file.",
        f"refused: {tmp_path.name}: found no regular file; give a delivered file.",
    ]


def test_show_tells_what_the_settings_corrected(tmp_path: Path) -> None:
    inbox, archive, chosen = tmp_path / "inbox", tmp_path / "archive", tmp_path / "settings.toml"
    inbox.mkdir()
    (inbox / "cruise_hy1.csv").write_bytes(bottle_file({}, {}))
    chosen.write_text(
        f'[corrections.{EXPOCODE}.bottle_oxygen]\nadd = -3.0\nreason = "crossovers"\n', encoding="utf-8"
    )
    assert call("run", inbox, "--archive", archive, "--settings", chosen).status == 0
    assert "  corrected  bottle_oxygen -3: crossovers" in call("show", archive, EXPOCODE).out


def test_verify_tells_of_an_earlier_revision_that_is_gone(tmp_path: Path) -> None:
    inbox, archive = tmp_path / "inbox", tmp_path / "archive"
    inbox.mkdir()
    for nitrate in ("30.00", "31.00"):
        (inbox / "cruise_hy1.csv").write_bytes(bottle_file({"NITRAT": nitrate}))
        assert call("run", inbox, "--archive", archive).status == 0
    assert call("show", archive, "--verify").status == 0
    (archive / f"superseded/{EXPOCODE}/r0001/samples.parquet").unlink()
    told = call("show", archive, "--verify")
    assert told.status == 1
    assert "the samples of revision 1 are no longer there; no run makes an earlier revision again" in told.out
