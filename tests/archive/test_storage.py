from __future__ import annotations

import errno
import os
import pickle
from typing import TYPE_CHECKING

import pytest

from pipeline.archive import Disk, open_archive, publish, read_contents
from pipeline.archive.refusals import refused
from pipeline.problems import ArchiveProblem

from .invented import digests, provenance, tables

if TYPE_CHECKING:
    from pathlib import Path


def test_an_archive_is_made_where_there_is_none(tmp_path: Path) -> None:
    store = open_archive(tmp_path / "deep" / "down", create=True)
    assert sorted(path.name for path in store.root.iterdir()) == [
        ".staging", "casts", "findings", "mixtures", "raw", "rejects", "samples", "superseded",
    ]  # fmt: skip
    assert open_archive(tmp_path / "deep" / "down") == store


@pytest.mark.parametrize("made", [[], [".staging"], ["samples"], ["samples", "casts", ".lock"]])
def test_one_whose_making_was_cut_short_is_finished(tmp_path: Path, made: list[str]) -> None:
    for name in made:
        (tmp_path / name).mkdir()
    with pytest.raises(ArchiveProblem, match="there is no archive here"):
        open_archive(tmp_path)
    assert (open_archive(tmp_path, create=True).root / "rejects").is_dir()


@pytest.mark.parametrize("create", [True, False])
@pytest.mark.parametrize("names", [["letters"], ["samples", "songs"], [".profile"]])
def test_a_directory_that_holds_other_things_is_refused(
    tmp_path: Path, names: list[str], create: bool
) -> None:
    for name in names:
        (tmp_path / name).mkdir()
    with pytest.raises(ArchiveProblem, match=rf"holds other things \('{names[-1]}'\) and no archive"):
        open_archive(tmp_path, create=create)
    assert sorted(path.name for path in tmp_path.iterdir()) == sorted(names)


def test_other_things_beside_an_archive_do_no_harm(tmp_path: Path) -> None:
    open_archive(tmp_path, create=True)
    (tmp_path / "README.txt").touch()
    assert open_archive(tmp_path, create=True).root == tmp_path


def test_a_file_is_no_archive(tmp_path: Path) -> None:
    (tmp_path / "a.csv").touch()
    with pytest.raises(ArchiveProblem, match="found a file, expected the directory of an archive"):
        open_archive(tmp_path / "a.csv", create=True)
    with pytest.raises(ArchiveProblem, match="a file stands where a directory should"):
        open_archive(tmp_path / "a.csv" / "archive", create=True)


def test_a_missing_archive_is_not_made_by_looking(tmp_path: Path) -> None:
    with pytest.raises(ArchiveProblem, match="there is no archive here; give the directory that"):
        open_archive(tmp_path / "none")
    assert list(tmp_path.iterdir()) == []


def test_an_archive_can_be_handed_to_another_process(tmp_path: Path) -> None:
    store = open_archive(tmp_path, create=True)
    assert pickle.loads(pickle.dumps(store)) == store  # noqa: S301 - our own bytes


@pytest.mark.parametrize(
    ("number", "said"),
    [
        (errno.ENOSPC, "no space is left; free some space"),
        (errno.EDQUOT, "the quota is used up"),
        (errno.EROFS, "the file system is read-only"),
        (errno.EACCES, "permission is missing"),
        (errno.ESTALE, "the disk or network share does not answer"),
        (errno.ELOOP, os.strerror(errno.ELOOP)),
    ],
)
def test_what_the_system_said_is_told_in_one_sentence(number: int, said: str) -> None:
    with pytest.raises(ArchiveProblem) as caught, refused("/archive/casts/x", "write"):
        raise OSError(number, "said by the system")
    assert str(caught.value).startswith(f"/archive/casts/x: cannot write this, {said}")
    assert str(caught.value).endswith(".")
    assert isinstance(caught.value.__cause__, OSError)


@pytest.mark.skipif(os.geteuid() == 0, reason="nothing is forbidden to root")
def test_a_read_only_archive_is_read_and_not_written(tmp_path: Path) -> None:
    store = open_archive(tmp_path, create=True)
    publish(store, provenance(), tables())
    before = digests(tmp_path)
    for path in (tmp_path / ".staging", tmp_path / "samples"):
        path.chmod(0o555)
    try:
        with pytest.raises(ArchiveProblem, match="permission is missing"):
            publish(store, provenance(seed=1), tables(seed=1))
        assert read_contents(store).cruises["77XX20260101"].is_whole
    finally:
        for path in (tmp_path / ".staging", tmp_path / "samples"):
            path.chmod(0o755)
    assert digests(tmp_path) == before


def test_empty_places_are_removed_but_not_those_of_the_archive(tmp_path: Path) -> None:
    store: Disk = open_archive(tmp_path, create=True)
    store.write("superseded/A/r0001/samples.parquet", lambda sink: sink.write(b"x"))
    store.write("superseded/A/r0002/samples.parquet", lambda sink: sink.write(b"x"))
    store.remove("superseded/A/r0001/samples.parquet")
    assert store.names("superseded/A") == ["r0002"]
    store.move("superseded/A/r0002/samples.parquet", "samples/A.parquet")
    assert store.names("superseded") == []
    store.remove("samples/A.parquet")
    assert (tmp_path / "samples").is_dir()
    assert (tmp_path / "superseded").is_dir()
