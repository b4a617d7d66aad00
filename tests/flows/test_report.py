"""The command ``seawhence report``."""

from __future__ import annotations

import shutil
from typing import TYPE_CHECKING

from tests.flows.conftest import FIXTURES, call, hashes

if TYPE_CHECKING:
    from pathlib import Path

CRUISE = "ZZV320140610"


def small_archive(folder: Path) -> Path:
    inbox = folder / "inbox"
    inbox.mkdir()
    for path in (FIXTURES / "inbox").rglob("*"):
        if path.is_file() and path.stat().st_size < 20_000:
            shutil.copy(path, inbox / path.name)
    call("run", inbox, "--archive", folder / "archive", "--sources", FIXTURES / "sources.toml")
    return folder / "archive"


def test_pages_are_written_the_same_again_and_outside_the_archive(tmp_path: Path) -> None:
    archive = small_archive(tmp_path)
    before = hashes(archive)
    outcome = call("report", archive, "--out", tmp_path / "out")
    assert outcome.status == 0, outcome.err
    assert "4 cruise pages and the page of the archive. Open" in outcome.out
    first = hashes(tmp_path / "out")
    assert {f"cruise_{CRUISE}.html", "index.html", f"data/{CRUISE}_waters.csv"} <= set(first)
    assert call("report", archive, "--out", tmp_path / "out").status == 0
    assert hashes(tmp_path / "out") == first
    assert hashes(archive) == before

    inside = call("report", archive, "--out", archive / "pages")
    assert inside.status == 2
    assert "lies in the archive" in inside.err
    unknown = call("report", archive, "ZZX", "--out", tmp_path / "out")
    assert (unknown.status, "there is no cruise 'ZZX'" in unknown.err) == (2, True)


def test_one_cruise_alone_and_one_that_is_damaged(tmp_path: Path) -> None:
    archive = small_archive(tmp_path)
    (archive / "casts" / f"{CRUISE}.parquet").write_bytes(b"no table")
    outcome = call("report", archive, "ZZV420110203", "--out", tmp_path / "out")
    assert outcome.status == 1
    assert outcome.err.startswith("left out  ")
    assert outcome.out.startswith("1 cruise page and")
    more = call("report", archive, "ZZV519960914", "--out", tmp_path / "out")
    assert more.out.startswith("1 cruise page and")
    index = (tmp_path / "out" / "index.html").read_text(encoding="utf-8")
    assert index.count('href="cruise_ZZV420110203.html"') == 1
    assert index.count('href="cruise_ZZV519960914.html"') == 1
    assert f"{CRUISE}.parquet" in (tmp_path / "out" / "index.html").read_text(encoding="utf-8")
    assert not (tmp_path / "out" / f"cruise_{CRUISE}.html").exists()
    (tmp_path / "file").write_text("", encoding="utf-8")
    assert call("report", archive, "--out", tmp_path / "file").status == 2
