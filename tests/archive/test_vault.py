from __future__ import annotations

import hashlib
import os
from typing import IO, TYPE_CHECKING, Any

import pytest

from pipeline.archive import Disk, open_archive, vault
from pipeline.problems import ArchiveProblem, DeliveryProblem

from .invented import Dying, Killed, leftovers

if TYPE_CHECKING:
    from pathlib import Path

BYTES = b"BOTTLE,20260101INVENTED\n" * 1000
SHA256 = hashlib.sha256(BYTES).hexdigest()


@pytest.fixture
def archive(tmp_path: Path) -> Disk:
    return open_archive(tmp_path / "archive", create=True)


def test_bytes_are_kept_under_their_hash(archive: Disk) -> None:
    assert vault.keep(archive, BYTES) == SHA256
    kept = archive.root / "raw" / SHA256[:2] / SHA256
    assert kept.read_bytes() == BYTES == vault.read(archive, SHA256)
    assert leftovers(archive.root) == []


def test_a_file_is_kept_as_its_bytes_are(archive: Disk, tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_bytes(BYTES)
    assert vault.keep(archive, tmp_path / "a.csv") == SHA256
    assert vault.read(archive, SHA256) == BYTES
    readable = (tmp_path / "a.csv").stat().st_mode
    assert (archive.root / "raw" / SHA256[:2] / SHA256).stat().st_mode == readable


def test_no_bytes_are_bytes_too(archive: Disk) -> None:
    assert vault.read(archive, vault.keep(archive, b"")) == b""


def test_what_is_kept_already_is_not_written_again(archive: Disk) -> None:
    vault.keep(archive, BYTES)
    counting = Dying(archive.root)
    assert vault.keep(counting, BYTES) == SHA256
    assert counting.steps == []


def test_what_was_cut_short_is_kept_anew(archive: Disk) -> None:
    vault.keep(archive, BYTES)
    (archive.root / "raw" / SHA256[:2] / SHA256).write_bytes(BYTES[:-1])
    with pytest.raises(
        ArchiveProblem, match=r"damaged, its bytes hash to [0-9a-f]{12}\.\.\. and not to its name"
    ):
        vault.read(archive, SHA256)
    vault.keep(archive, BYTES)
    assert vault.read(archive, SHA256) == BYTES


@pytest.mark.parametrize("moment", ["before", "amid", "after"])
@pytest.mark.parametrize("fatal", [0, 1, 2])
def test_killed_anywhere_no_half_file_has_the_name(archive: Disk, fatal: int, moment: str) -> None:
    with pytest.raises(Killed):
        vault.keep(Dying(archive.root, fatal, moment), BYTES)
    kept = archive.root / "raw" / SHA256[:2] / SHA256
    assert not kept.exists() or kept.read_bytes() == BYTES
    vault.keep(archive, BYTES)
    assert vault.read(archive, SHA256) == BYTES


def test_a_refused_write_leaves_nothing_behind(archive: Disk) -> None:
    with pytest.raises(ArchiveProblem, match="full"):
        vault.keep(Dying(archive.root, 0, "amid", ArchiveProblem("the disk is full")), BYTES)
    assert leftovers(archive.root) == []


def test_what_was_never_kept_is_told(archive: Disk) -> None:
    with pytest.raises(ArchiveProblem, match="are not in the archive"):
        vault.read(archive, "a" * 64)
    with pytest.raises(ArchiveProblem, match="is no SHA-256"):
        vault.read(archive, "../../secret")


def test_a_file_that_vanished_is_a_matter_of_the_delivery(archive: Disk, tmp_path: Path) -> None:
    with pytest.raises(DeliveryProblem, match=r"gone\.csv: cannot be read \(No such file") as caught:
        vault.keep(archive, tmp_path / "gone.csv")
    assert caught.value.reason == "unreadable-file"


def test_a_pipe_does_not_hang_the_run(archive: Disk, tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe.csv")
    for place in (tmp_path / "pipe.csv", tmp_path):
        with pytest.raises(DeliveryProblem, match="no regular file") as caught:
            vault.keep(archive, place)
        assert caught.value.reason == "not-a-file"


class Growing(Disk):
    """A store during whose writing the delivered file grows."""

    def write(self, key: str, fill: Any) -> None:
        delivered = self.root.parent / "a.csv"

        def later(sink: IO[bytes]) -> None:
            delivered.write_bytes(BYTES + BYTES)
            fill(sink)

        super().write(key, later)


def test_a_file_that_is_still_being_written_is_refused(archive: Disk, tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_bytes(BYTES)
    with pytest.raises(DeliveryProblem, match="changed while it was read"):
        vault.keep(Growing(archive.root), tmp_path / "a.csv")
    assert leftovers(archive.root) == []
    assert not (archive.root / "raw" / SHA256[:2] / SHA256).exists()
