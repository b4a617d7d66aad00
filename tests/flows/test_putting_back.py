"""What the archive lost and the inbox holds is kept again; what the run does not remember is told."""

from __future__ import annotations

import hashlib
import json
from typing import TYPE_CHECKING

import pytest

from flows.direct import bring_archive_up_to_date
from flows.records import State
from flows.work import RunConfig, run_job
from pipeline.mixing import read_catalogue
from pipeline.settings import Settings
from tests.flows.conftest import FIXTURES, call, hashes
from tests.invented import EXPOCODE, bottle_file

if TYPE_CHECKING:
    from collections.abc import Sequence
    from pathlib import Path

    from flows.plan import Job
    from flows.records import CruiseRecord

CORRECTED = f'[corrections.{EXPOCODE}.nitrate]\nfactor = 0.98\nreason = "invented"\n'


@pytest.fixture
def inbox(tmp_path: Path) -> Path:
    folder = tmp_path / "inbox"
    folder.mkdir()
    (folder / "a_hy1.csv").write_bytes(bottle_file({}, {}))
    return folder


@pytest.fixture
def archive(inbox: Path) -> Path:
    archive = inbox.parent / "archive"
    assert call("run", inbox, "--archive", archive).status == 0
    return archive


def raw(archive: Path, data: bytes) -> Path:
    sha256 = hashlib.sha256(data).hexdigest()
    return archive / "raw" / sha256[:2] / sha256


def settings(folder: Path, text: str) -> Path:
    path = folder / "settings.toml"
    path.write_text(text, encoding="utf-8")
    return path


@pytest.mark.parametrize("left", [None, b"", b"longer " * 2000], ids=["gone", "empty", "another size"])
def test_a_lost_file_of_a_current_cruise_is_put_back(inbox: Path, archive: Path, left: bytes | None) -> None:
    whole = hashes(archive)
    path = raw(archive, bottle_file({}, {}))
    path.unlink()
    if left is not None:
        path.write_bytes(left)
    told = call("show", archive, "--verify")
    assert told.status != 0
    assert "run again with the file in the inbox." in told.out + told.err
    outcome = call("run", inbox, "--archive", archive)
    assert outcome.status == 0
    assert f"{EXPOCODE}  unchanged, revision 1" in outcome.out
    assert (
        "note  a_hy1.csv: its kept bytes were missing in the archive or damaged, and were put back."
        in outcome.out
    )
    assert hashes(archive) == whole
    assert call("show", archive, "--verify").status == 0
    assert "put back" not in call("run", inbox, "--archive", archive).out


def test_the_other_driver_of_a_run_puts_it_back_too(inbox: Path, archive: Path) -> None:
    raw(archive, bottle_file({}, {})).unlink()

    def make_nothing(jobs: Sequence[Job], config: RunConfig) -> list[CruiseRecord]:
        return [run_job(job, config) for job in jobs]

    summary = bring_archive_up_to_date(inbox, RunConfig(str(archive), Settings()), make_nothing)
    assert [note for note in summary.notes if "put back" in note]
    assert raw(archive, bottle_file({}, {})).read_bytes() == bottle_file({}, {})


def test_lost_texts_of_settings_and_sources_are_put_back(inbox: Path, tmp_path: Path) -> None:
    archive = tmp_path / "archive"
    arguments: list[str | Path] = [
        "run",
        inbox,
        "--archive",
        archive,
        "--settings",
        settings(tmp_path, CORRECTED),
    ]
    arguments += ["--sources", FIXTURES / "sources.toml"]
    call(*arguments)
    whole = hashes(archive)
    for path in (archive / "raw").glob("*/*"):
        path.unlink()
    assert "unchanged" in call(*arguments).out
    assert hashes(archive) == whole
    catalogue = read_catalogue(FIXTURES / "sources.toml")
    assert raw(archive, catalogue.text).exists()


def test_a_lost_description_is_put_back(inbox: Path, tmp_path: Path) -> None:
    (inbox / "b_hy1.csv").write_bytes(bottle_file({"NITRAT": "31.00"}, {}))
    (inbox / "cruise.toml").write_text('[cruise]\nstands = ["b_hy1.csv"]\n', encoding="utf-8")
    archive = tmp_path / "archive"
    outcome = call("run", inbox, "--archive", archive, "--summary", tmp_path / "summary.json")
    assert "4 rows in, 2 kept, 2 set aside, 0 rejected" in outcome.out
    (cruise,) = json.loads((tmp_path / "summary.json").read_text(encoding="utf-8"))["cruises"]
    assert (cruise["rows"], cruise["kept"], cruise["set_aside"], cruise["rejected"]) == (4, 2, 2, 0)
    assert "4 rows in, 2 kept, 2 set aside, 0 rejected" in call("run", inbox, "--archive", archive).out
    whole = hashes(archive)
    for path in (archive / "raw").glob("*/*"):
        path.unlink()
    assert "unchanged" in call("run", inbox, "--archive", archive).out
    assert hashes(archive) == whole


def test_corrections_that_a_run_leaves_out_are_a_doubt(inbox: Path, archive: Path, tmp_path: Path) -> None:
    corrected = call("run", inbox, "--archive", archive, "--settings", settings(tmp_path, CORRECTED))
    assert "note: made with other settings than revision 1: `seawhence changes` tells which" in corrected.out
    assert "doubt" not in corrected.out
    left_out = call("run", inbox, "--archive", archive)
    assert (
        "doubt: revision 2 had nitrate corrected by a factor of 0.98, this one has not; give the settings again to keep"
        " it" in left_out.out
    )
    assert "other settings" not in left_out.out
    kept = call("run", inbox, "--archive", archive)
    assert "doubt" not in kept.out


def test_a_cruise_made_anew_as_the_same_revision_says_so(inbox: Path, archive: Path, tmp_path: Path) -> None:
    whole = hashes(archive)
    table = archive / "samples" / f"{EXPOCODE}.parquet"
    table.unlink()
    outcome = call("run", inbox, "--archive", archive, "--summary", tmp_path / "summary.json")
    (cruise,) = json.loads((tmp_path / "summary.json").read_text(encoding="utf-8"))["cruises"]
    assert cruise["state"] == State.REMADE.value
    assert outcome.out.startswith(f"{EXPOCODE}  made anew, revision 1: 2 rows in")
    assert "1 cruise written" in outcome.out
    assert hashes(archive)[f"samples/{EXPOCODE}.parquet"] == whole[f"samples/{EXPOCODE}.parquet"]
