from __future__ import annotations

import os
import unicodedata
from pathlib import PurePosixPath
from string import ascii_letters, digits

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from pipeline.archive import layout
from pipeline.problems import ArchiveProblem, BrokenPromise
from pipeline.tables import TABLE_NAMES

SOME = settings(deadline=None, derandomize=True, max_examples=400)
ANYTHING = st.text(st.characters(), max_size=80) | st.text("./\\%~ -_aZ9\0\n", max_size=30)


@SOME
@given(ANYTHING)
@example("../x")
@example("..")
@example(".")
@example("/etc/passwd")
@example("a/../../b")
@example("C:\\x")
@example("%2E%2E")
@example("\0")
@example("x" * 201)
def test_no_expocode_leads_out_of_the_archive(expocode: str) -> None:
    if not is_storable(expocode):
        with pytest.raises(ArchiveProblem, match="expocode"):
            layout.safe_name(expocode)
        return
    keys = [
        *(layout.table_key(table, expocode) for table in TABLE_NAMES),
        *(layout.superseded_key(expocode, 3, table) for table in TABLE_NAMES),
        *(layout.staging_key(expocode, table) for table in TABLE_NAMES),
        layout.held_key(expocode),
    ]
    for key in keys:
        parts = PurePosixPath(key).parts
        assert parts[0] in layout.PLACES
        assert os.path.normpath(key) == key
        assert key.isascii()
        assert key.isprintable()
        assert all(len(part) <= 255 and not part.startswith(".") for part in parts[1:])
    assert len({PurePosixPath(key) for key in keys}) == len(keys)


def is_storable(expocode: str) -> bool:
    """Whether it has characters, none of them half a character, and fits once it is encoded."""
    if any(unicodedata.category(character) == "Cs" for character in expocode):
        return False
    safe = ascii_letters + digits + "_.-"
    length = sum(1 if character in safe else 3 * len(character.encode()) for character in expocode)
    return 0 < length + 2 * expocode.startswith(".") <= layout.LONGEST_NAME


@SOME
@given(ANYTHING, ANYTHING)
def test_names_are_reversible_so_no_two_cruises_share_one(one: str, other: str) -> None:
    try:
        names = layout.safe_name(one), layout.safe_name(other)
    except ArchiveProblem:
        return
    assert layout.expocode_of(names[0]) == one
    assert (names[0] == names[1]) == (one == other)


@pytest.mark.parametrize(
    ("expocode", "name"),
    [
        ("77XX20260101", "77XX20260101"),
        ("316N138/12", "316N138%2F12"),
        ("..", "%2E."),
        (".hidden", "%2Ehidden"),
        ("a b", "a%20b"),
        ("50%", "50%25"),
        ("ø", "%C3%B8"),
        ("x~held", "x%7Eheld"),
    ],
)
def test_names(expocode: str, name: str) -> None:
    assert layout.safe_name(expocode) == name


@pytest.mark.parametrize("name", ["a b", "%2f", "%41", "", ".x", "%", "%zz", "%FF", "\udcff", "x" * 201])
def test_names_that_no_expocode_has(name: str) -> None:
    assert layout.expocode_of(name) is None


def test_cruises_and_strangers_in_a_directory() -> None:
    cruises, strangers = layout.cruises_in(["316N138%2F12.parquet", "notes.txt", "a b.parquet", ".parquet"])
    assert cruises == {"316N138/12": "316N138%2F12.parquet"}
    assert strangers == [".parquet", "a b.parquet", "notes.txt"]


@pytest.mark.parametrize(
    ("name", "revision"),
    [("r0001", 1), ("r12345", 12345), ("r001", None), ("r00012", None), ("0001", None), ("r0001x", None)],
)
def test_names_of_revisions(name: str, revision: int | None) -> None:
    assert layout.revision_of(name) == revision


@pytest.mark.parametrize("revision", [1, 42, 9999, 10000])
def test_a_revision_is_found_again(revision: int) -> None:
    assert layout.revision_of(layout.superseded_key("A", revision).rpartition("/")[2]) == revision


@pytest.mark.parametrize("sha256", ["", "../../x", "A" * 64, "a" * 63, "a" * 64 + "\n"])
def test_only_a_hash_names_raw_bytes(sha256: str) -> None:
    with pytest.raises(ArchiveProblem, match="SHA-256"):
        layout.raw_key(sha256)


def test_an_unknown_table_is_a_fault_of_ours() -> None:
    with pytest.raises(BrokenPromise, match="no table"):
        layout.table_key("../samples", "A")
