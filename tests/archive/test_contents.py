from __future__ import annotations

import shutil
from typing import TYPE_CHECKING

import pytest

from pipeline.archive import (
    Disk,
    Reason,
    judge,
    open_archive,
    publish,
    read_contents,
    read_cruise,
    read_table,
    revisions,
)
from pipeline.problems import ArchiveProblem
from pipeline.tables import TABLE_NAMES

from .invented import CASTS, REJECTS, SAMPLES, Dying, Killed, provenance, tables

if TYPE_CHECKING:
    from pathlib import Path

ONE, TWO = "77XX20260101", "316N138/12"


@pytest.fixture
def archive(tmp_path: Path) -> Disk:
    store = open_archive(tmp_path / "archive", create=True)
    for expocode in (ONE, TWO):
        publish(store, provenance(expocode), tables(expocode))
    return store


def test_what_is_in_the_archive(archive: Disk) -> None:
    contents = read_contents(archive)
    assert list(contents.cruises) == [TWO, ONE]
    cruise = contents.cruises[TWO]
    assert cruise.is_whole
    assert cruise.fingerprint == provenance(TWO).fingerprint
    assert cruise.provenance is not None
    assert cruise.provenance.revision == 1
    assert cruise.rows == {
        "samples": SAMPLES,
        "casts": CASTS,
        "mixtures": 0,
        "findings": 0,
        "rejects": REJECTS,
    }
    assert contents.delivered_with("c" * 64) == (TWO, ONE)
    assert contents.delivered_with("d" * 64) == ()


def test_a_new_archive_is_empty(tmp_path: Path) -> None:
    contents = read_contents(open_archive(tmp_path, create=True))
    assert contents.cruises == {}
    assert contents.strangers == ()


def test_missing_tables_are_told(archive: Disk) -> None:
    for table in ("casts", "rejects"):
        (archive.root / table / f"{ONE}.parquet").unlink()
    cruise = read_cruise(archive, ONE)
    assert cruise.fingerprint is None
    (trouble,) = cruise.troubles
    assert trouble == (
        f"{ONE}: no table of casts, rejects is published: a run was cut short or files were removed; "
        "run again to make them anew."
    )
    assert cruise.rows == {"samples": SAMPLES, "mixtures": 0, "findings": 0}
    assert read_contents(archive).cruises[TWO].is_whole


@pytest.mark.parametrize(
    "spoil", [b"", b"PAR1", b"PAR1" + b"\xff" * 40 + b"\x20\x00\x00\x00PAR1", b"x" * 999]
)
def test_damaged_tables_are_told_and_hurt_no_other_cruise(archive: Disk, spoil: bytes) -> None:
    (archive.root / "casts" / f"{ONE}.parquet").write_bytes(spoil)
    contents = read_contents(archive)
    assert contents.cruises[TWO].is_whole
    (trouble,) = contents.cruises[ONE].troubles
    assert trouble.startswith(f"{archive.root}/casts/{ONE}.parquet: damaged, it does not open as Parquet (")
    with pytest.raises(ArchiveProblem, match="damaged, it cannot be read"):
        read_table(archive, ONE, "casts")


def test_a_flipped_bit_is_noticed(archive: Disk) -> None:
    path = archive.root / "casts" / f"{ONE}.parquet"
    content = bytearray(path.read_bytes())
    content[40] ^= 1
    path.write_bytes(content)
    with pytest.raises(ArchiveProblem, match="damaged, it cannot be read"):
        read_table(archive, ONE, "casts")


def test_tables_put_in_from_elsewhere_are_told(archive: Disk, tmp_path: Path) -> None:
    other = open_archive(tmp_path / "other", create=True)
    for seed in range(2):
        publish(other, provenance(ONE, seed), tables(ONE, seed))
    shutil.copy(other.root / "casts" / f"{ONE}.parquet", archive.root / "casts")
    cruise = read_cruise(archive, ONE)
    assert cruise.fingerprint is None
    assert "not of one publication (revisions 1, 2)" in cruise.troubles[0]
    shutil.copy(other.root / "casts" / f"{ONE}.parquet", archive.root / "samples")
    assert f"holds the casts of {ONE}" in read_cruise(archive, ONE).troubles[0]


def test_a_directory_in_place_of_a_table_is_told(archive: Disk) -> None:
    path = archive.root / "casts" / f"{ONE}.parquet"
    path.unlink()
    path.mkdir()
    assert not read_cruise(archive, ONE).is_whole
    with pytest.raises(ArchiveProblem):
        publish(archive, provenance(ONE, 1), tables(ONE, 1))
    assert read_cruise(archive, TWO).is_whole


def test_files_that_are_no_cruise_are_named(archive: Disk) -> None:
    (archive.root / "samples" / "notes.txt").touch()
    (archive.root / "casts" / "a b.parquet").touch()
    contents = read_contents(archive)
    assert contents.strangers == ("samples/notes.txt", "casts/a b.parquet")
    assert len(contents.cruises) == 2


def test_a_cruise_killed_between_two_revisions_is_still_known(archive: Disk) -> None:
    store = Dying(archive.root, 10)
    with pytest.raises(Killed):
        publish(store, provenance(ONE, 1), tables(ONE, 1))
    assert store.steps[-1] == "settle"
    cruise = read_contents(archive).cruises[ONE]
    assert cruise.provenance is None
    assert f"no table of {', '.join(TABLE_NAMES)} is published" in cruise.troubles[0]
    assert revisions(archive, ONE) == (1,)
    assert read_table(archive, ONE, "samples", revision=1).num_rows == SAMPLES


def test_reading_what_is_not_there(archive: Disk) -> None:
    with pytest.raises(ArchiveProblem, match="the archive has no samples of nobody; 'seawhence show' lists"):
        read_table(archive, "nobody", "samples")
    with pytest.raises(ArchiveProblem, match=r"no casts of 316N138/12 in revision 7"):
        read_table(archive, TWO, "casts", revision=7)
    assert len(read_cruise(archive, "nobody").troubles) == 1
    assert revisions(archive, "nobody") == ()


def test_which_cruises_are_due(archive: Disk) -> None:
    publish(archive, provenance("spoiled"), tables("spoiled"))
    (archive.root / "samples" / "spoiled.parquet").write_bytes(b"")
    contents = read_contents(archive)
    wanted = {
        ONE: provenance(ONE, 1).fingerprint,
        "new": "f" * 64,
        "spoiled": provenance("spoiled").fingerprint,
    }
    verdict = judge(wanted, contents)
    assert verdict.due == {"new": Reason.NEW, "spoiled": Reason.INCOMPLETE, ONE: Reason.CHANGED}
    assert list(verdict.due) == sorted(verdict.due)
    assert verdict.current == ()
    assert verdict.unasked == (TWO,)
    again = judge({ONE: provenance(ONE).fingerprint, TWO: provenance(TWO).fingerprint}, contents)
    assert (again.due, again.current, again.unasked) == ({}, (TWO, ONE), ("spoiled",))
