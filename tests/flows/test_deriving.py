"""Sources derived from the archive of the invented ocean, whose true sources are known."""

from __future__ import annotations

import shutil
import tomllib
from argparse import Namespace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from flows.deriving import derive
from pipeline.mixing.catalogue import read_catalogue
from pipeline.problems import ArchiveProblem, CatalogueProblem, Problem, UsageProblem
from tests.flows.conftest import FIXTURES, Outcome, call

if TYPE_CHECKING:
    from pathlib import Path

# Waters that the ocean has nearly pure: bottom and deep water up to 97 %, central water up to 94 %.
RULES = """\
[rules]
title = "Sources of the invented ocean, from its cruises"
properties = ["conservative_temperature", "preformed_salinity", "oxygen", "phosphate", "nitrate", "silicate"]

[[source]]
code = "BOT"
name = "Sunder bottom water"
[source.where]
sigma4 = [46.05, 46.2]
[source.extremum]
property = "conservative_temperature"
kind = "minimum"

[[source]]
code = "DEP"
name = "Hollow deep water"
[source.where]
pressure = [1500.0, 4000.0]
[source.extremum]
property = "silicate"
kind = "maximum"

[[source]]
code = "CEN"
name = "Tarn central water"
[source.where]
pressure = [200.0, 500.0]
[source.extremum]
property = "conservative_temperature"
kind = "maximum"

[[set]]
name = "interior"
sources = ["BOT", "DEP", "CEN"]
properties = ["conservative_temperature", "preformed_salinity", "oxygen", "phosphate", "nitrate", "silicate"]
respiration = "non_negative"
[set.valid]
pressure = [200.0, 6000.0]
"""
RESPIRED = {"oxygen": -170.0, "phosphate": 1.0, "nitrate": 16.0}  # of the ocean, Anderson and Sarmiento 1994


@pytest.fixture
def rules(tmp_path: Path) -> Path:
    path = tmp_path / "rules.toml"
    path.write_text(RULES, encoding="utf-8")
    return path


def run(archive: Path, rules: Path, out: Path) -> int:
    return derive(Namespace(archive=archive, rules=rules, out=out, settings=None))


def refusal(archive: Path, rules: Path, out: Path, kind: type[Problem]) -> str:
    with pytest.raises(kind) as told:
        run(archive, rules, out)
    return str(told.value)


def test_sources_of_the_invented_ocean_are_found_again(
    demonstration: tuple[Path, Outcome], rules: Path, tmp_path: Path
) -> None:
    assert run(demonstration[0], rules, tmp_path / "derived.toml") == 0
    found = read_catalogue(tmp_path / "derived.toml").sources
    true = read_catalogue(FIXTURES / "sources.toml").sources
    shares = pd.read_csv(FIXTURES / "truth/shares.csv")
    for code, source in found.items():
        # The purest samples of it hold a little of the others, and were respired since they were the source.
        purest = shares[shares["clean"]].nlargest(30, code)
        for name, one in source.properties.items():
            mixture = sum(purest[other] * water.properties[name].value for other, water in true.items())
            expected = (mixture + RESPIRED.get(name, 0.0) * purest["respiration"]).median()
            stated = np.hypot(one.uncertainty, true[code].properties[name].uncertainty)
            assert abs(one.value - expected) <= stated, (code, name, one, expected)


@pytest.mark.parametrize("code", ["BOT", "DEP"])
def test_what_respiration_leaves_alone_is_within_the_stated_uncertainties(
    code: str, demonstration: tuple[Path, Outcome], rules: Path, tmp_path: Path
) -> None:
    run(demonstration[0], rules, tmp_path / "derived.toml")
    found = read_catalogue(tmp_path / "derived.toml").sources[code].properties
    true = read_catalogue(FIXTURES / "sources.toml").sources[code].properties
    for name in ("conservative_temperature", "preformed_salinity", "silicate"):
        stated = np.hypot(found[name].uncertainty, true[name].uncertainty)
        assert abs(found[name].value - true[name].value) <= stated, name


def test_the_same_archive_and_rules_give_the_same_bytes(
    demonstration: tuple[Path, Outcome], rules: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    run(demonstration[0], rules, tmp_path / "one.toml")
    told = capsys.readouterr()
    assert told.err == ""
    assert told.out.startswith("BOT  ")
    assert told.out.splitlines()[-2].startswith("The sources are samples of the archive and may be mixtures")
    assert told.out.splitlines()[-1] == (
        f"3 sources derived from 5 of 6 cruises. The catalogue is {tmp_path / 'one.toml'}."
    )
    moved = tmp_path / "elsewhere"
    shutil.copytree(demonstration[0], moved)
    (tmp_path / "other").mkdir()
    renamed = tmp_path / "other/renamed.toml"
    renamed.write_text("# with a remark\n" + RULES, encoding="utf-8")
    run(moved, renamed, tmp_path / "two.toml")
    assert (tmp_path / "one.toml").read_bytes() == (tmp_path / "two.toml").read_bytes()


def test_a_catalogue_tells_what_it_was_derived_from(
    demonstration: tuple[Path, Outcome], rules: Path, tmp_path: Path
) -> None:
    out = tmp_path / "derived.toml"
    run(demonstration[0], rules, out)
    written = tomllib.loads(out.read_text(encoding="utf-8"))
    assert written["catalogue"]["title"] == "Sources of the invented ocean, from its cruises"
    assert "from 5 cruises of an archive (SHA-256" in written["catalogue"]["reference"]
    assert "shares and respiration are relative to these samples" in written["catalogue"]["reference"]
    assert str(tmp_path) not in out.read_text(encoding="utf-8")
    assert "ZZV120090306" in written["source"][0]["note"]
    assert written["source"][0]["covariance"]["properties"] == list(written["source"][0]["properties"])
    assert written["set"] == tomllib.loads(RULES)["set"]


def test_a_run_with_the_derived_sources_does_not_change_what_is_derived(rules: Path, tmp_path: Path) -> None:
    inbox = tmp_path / "inbox"
    inbox.mkdir()
    shutil.copy(FIXTURES / "inbox/ZZV120090306_hy1.csv", inbox)
    archive, out = tmp_path / "archive", tmp_path / "derived.toml"
    call("run", inbox, "--archive", archive)
    assert run(archive, rules, out) == 0
    first = out.read_bytes()
    outcome = call("run", inbox, "--archive", archive, "--sources", out)
    assert outcome.status == 0
    assert run(archive, rules, out) == 0  # over the catalogue as it was written
    assert out.read_bytes() == first


def test_what_was_changed_by_hand_is_not_written_over(
    demonstration: tuple[Path, Outcome], rules: Path, tmp_path: Path
) -> None:
    out = tmp_path / "derived.toml"
    run(demonstration[0], rules, out)
    out.write_bytes(out.read_bytes().replace(b"Sunder", b"Asunder"))
    for mine in (out, rules):
        before = mine.read_bytes()
        assert "written or changed by hand" in refusal(demonstration[0], rules, mine, UsageProblem)
        assert mine.read_bytes() == before
    assert "give another file as --out" in refusal(demonstration[0], rules, tmp_path, UsageProblem)
    nowhere = tmp_path / "nowhere/derived.toml"
    assert "cannot be written" in refusal(demonstration[0], rules, nowhere, UsageProblem)


def test_a_rule_that_finds_nothing_is_told_with_its_line(
    demonstration: tuple[Path, Outcome], rules: Path, tmp_path: Path
) -> None:
    rules.write_text(RULES.replace("[46.05, 46.2]", "[47.05, 47.2]"), encoding="utf-8")
    out = tmp_path / "derived.toml"
    words = refusal(demonstration[0], rules, out, CatalogueProblem)
    assert words.startswith(f"{rules}, line 8: source 'BOT': found no sample for which all")
    assert "sigma4 for 0, being below the mixed layer (which holds unless mixed_layer = 'include' is" in words
    assert not out.exists()


def test_sources_that_come_out_the_same_are_refused_with_the_line_of_the_set(
    demonstration: tuple[Path, Outcome], rules: Path, tmp_path: Path
) -> None:
    twice = RULES.replace('["BOT", "DEP", "CEN"]', '["BOT", "DEP", "CEN", "OLD"]').replace(
        "[[set]]",
        '[[source]]\ncode = "OLD"\nname = "The same"\n[source.where]\npressure = [1500.0, 4000.0]\n'
        '[source.extremum]\nproperty = "silicate"\nkind = "maximum"\n\n[[set]]',
    )
    rules.write_text(twice, encoding="utf-8")
    words = refusal(demonstration[0], rules, tmp_path / "derived.toml", CatalogueProblem)
    assert words.startswith(f"{rules}, line 43: set 'interior': found the same value of every property")


def test_a_cruise_that_is_not_whole_is_left_out_and_told(
    demonstration: tuple[Path, Outcome], rules: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    archive = tmp_path / "archive"
    shutil.copytree(demonstration[0], archive)
    (archive / "casts/ZZV220210218.parquet").unlink()
    samples = archive / "samples/ZZV420110203.parquet"
    data = bytearray(samples.read_bytes())
    data[60:4000] = bytes(3940)  # its footer still opens
    samples.write_bytes(data)
    out = tmp_path / "derived.toml"
    assert run(archive, rules, out) == 1
    told = capsys.readouterr().out
    assert "left out  ZZV220210218: no table of casts is published" in told
    assert "ZZV420110203.parquet: damaged" in told
    assert "ZZV220210218" not in out.read_text(encoding="utf-8")


def test_an_archive_without_a_cruise_is_refused(rules: Path, tmp_path: Path) -> None:
    (tmp_path / "inbox").mkdir()
    call("run", tmp_path / "inbox", "--archive", tmp_path / "archive")
    words = refusal(tmp_path / "archive", rules, tmp_path / "derived.toml", ArchiveProblem)
    assert "found an archive without a cruise" in words


@pytest.mark.parametrize(
    ("data", "expected"), [(b"\xff\xfe", "UTF-8"), (b"#" * 1_000_001, "bytes"), (None, "name a file")]
)
def test_rules_that_are_no_rules_are_refused(
    data: bytes | None, expected: str, demonstration: tuple[Path, Outcome], rules: Path, tmp_path: Path
) -> None:
    rules.unlink() if data is None else rules.write_bytes(data)
    assert expected in refusal(demonstration[0], rules, tmp_path / "derived.toml", CatalogueProblem)
