"""Crossovers of archives, from the command to the corrected archive and back."""

from __future__ import annotations

import json
import re
import tomllib
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pyarrow.parquet as pq
import pytest

from fixtures.ocean.delivery import bottle_sheet
from fixtures.ocean.section import first_cruise, second_cruise
from tests.flows.conftest import FIXTURES, call, hashes
from tests.invented import ROW, bottle_file

if TYPE_CHECKING:
    from pathlib import Path

ONE, OTHER = "ZZV120090306", "ZZV220210218"


def deep_cruise(expocode: str, date: str, *, oxygen: float = 0.0, silicate: float = 1.0) -> bytes:
    """Return a bottle file of four stations whose deep water is the same in all of them."""
    rows: list[dict[str, str]] = []
    for station in range(4):
        for k in range(10):
            pressure = 1400.0 + 300.0 * k + 40.0 * station
            rows.append(
                {
                    "EXPOCODE": expocode, "STNNBR": str(station + 1), "SAMPNO": str(k + 1), "DATE": date,
                    "LATITUDE": f"{-35.0 - 0.2 * station:.4f}", "LONGITUDE": "-12.2500", "DEPTH": "5000",
                    "CTDPRS": f"{pressure:.1f}", "CTDTMP": f"{4.0 - pressure / 1500:.4f}",
                    "CTDSAL": f"{34.5 + pressure / 10000:.4f}", "SALNTY": f"{34.5 + pressure / 10000:.4f}",
                    "OXYGEN": f"{180 + pressure / 100 + oxygen:.2f}", "NITRAT": f"{34 - pressure / 1000:.3f}",
                    "PHSPHT": f"{2.3 - pressure / 20000:.4f}", "SILCAT": f"{(60 + pressure / 60) * silicate:.2f}",
                    "SILCAT_FLAG_W": "2",
                }
            )  # fmt: skip
    assert set(rows[0]) - set(ROW) == {"SILCAT", "SILCAT_FLAG_W"}
    return bottle_file(*rows, extra={"SILCAT": "UMOL/KG", "SILCAT_FLAG_W": ""})


@pytest.fixture
def inbox(tmp_path: Path) -> Path:
    folder = tmp_path / "inbox"
    folder.mkdir()
    (folder / "one_hy1.csv").write_bytes(deep_cruise(ONE, "20090306"))
    (folder / "other_hy1.csv").write_bytes(deep_cruise(OTHER, "20210218", oxygen=8.0, silicate=1.06))
    (folder / "third_hy1.csv").write_bytes(deep_cruise("ZZV320150101", "20150101"))
    return folder


def run(inbox: Path, *more: str | Path) -> Path:
    archive = inbox.parent / "archive"
    outcome = call("run", inbox, "--archive", archive, *more)
    assert outcome.status == 0, outcome.err
    return archive


def test_from_the_offset_to_the_corrected_archive_and_back(inbox: Path, tmp_path: Path) -> None:
    archive, out = run(inbox), tmp_path / "out"
    outcome = call("crossovers", archive, "--out", out)
    assert (outcome.status, outcome.err) == (0, "")
    assert re.search(
        rf"^propose  {OTHER} oxygen times 0\.9\d+ \+- 0\.\d+ would agree", outcome.out, re.MULTILINE
    )
    assert "3 cruises, 3 of them comparable; 15 offsets, 2 corrections proposed." in outcome.out

    page = (out / "crossovers.md").read_text(encoding="utf-8")
    block = page.split("```toml\n")[1].split("```")[0]
    assert set(tomllib.loads(block)["corrections"][OTHER]) == {"bottle_oxygen", "silicate"}
    settings = tmp_path / "settings.toml"
    settings.write_text('[crossovers]\nvalues = "corrected"\n' + block, encoding="utf-8")

    before = hashes(archive / "samples")
    told = call("run", inbox, "--archive", archive, "--settings", settings).out
    assert f"{OTHER}  revised, revision 2" in told
    assert told.count("revised") == 1  # corrections of one cruise do not make others anew
    after = hashes(archive / "samples")
    assert [name for name in before if before[name] != after[name]] == [f"{OTHER}.parquet"]

    table = pq.read_table(archive / "samples" / f"{OTHER}.parquet")
    delivered, corrected = (
        np.asarray(table.column(name)) for name in ("bottle_oxygen", "bottle_oxygen_corrected")
    )
    factor = tomllib.loads(block)["corrections"][OTHER]["bottle_oxygen"]["factor"]
    np.testing.assert_allclose(corrected, factor * delivered)
    np.testing.assert_array_equal(np.asarray(table.column("oxygen")), corrected)
    footer = json.loads(table.schema.metadata[b"seawhence"])
    assert footer["corrections"]["bottle_oxygen"]["factor"] == factor
    assert "crossovers with" in footer["corrections"]["silicate"]["reason"]

    again = call("crossovers", archive, "--out", out, "--settings", settings)
    assert "0 corrections proposed" in again.out
    assert f"{OTHER} bottle_oxygen, {OTHER} silicate" in (out / "crossovers.md").read_text(encoding="utf-8")
    # Values as delivered are compared unless the settings say otherwise, and what remains is told beside them.
    told = call("crossovers", archive, "--out", out).out
    assert "0 corrections proposed" in told
    assert re.search(
        rf"^in force {OTHER} oxygen times {factor}; what remains: times (1\.00|0\.99)\d* \+- 0\.\d+, not"
        r" worth another correction\.$",
        told,
        re.MULTILINE,
    )
    offsets = [line for line in told.splitlines() if line.startswith("offset ") and OTHER in line]
    assert len(offsets) == 4  # oxygen and silicate, against two cruises
    assert all(" With the corrections in force it agrees: " in line for line in offsets)
    page = (out / "crossovers.md").read_text(encoding="utf-8")
    assert f"- {OTHER} oxygen times {factor}; what remains: times" in page
    rows = pq.read_table(out / "offsets.parquet").to_pylist()
    for row in rows:
        touched = OTHER in {row["expocode"], row["other_expocode"]}
        if touched and row["variable"] in {"bottle_oxygen", "silicate"}:
            assert abs(row["offset"]) > 2 * row["offset_uncertainty"]
            assert abs(row["offset_remaining"]) < 2 * row["offset_remaining_uncertainty"]
            assert abs(row["offset_remaining"]) < 0.4 * abs(row["offset"])
        else:
            assert row["offset_remaining"] is None
    standing = {
        (p["expocode"], p["variable"]): p
        for p in pq.read_table(out / "proposals.parquet").to_pylist()
        if p["correction_in_force"]
    }
    assert set(standing) == {(OTHER, "bottle_oxygen"), (OTHER, "silicate")}
    one = standing[OTHER, "bottle_oxygen"]
    assert one["correction_in_force"] == f"times {factor}"
    assert one["correction_remaining"] == pytest.approx(1.0, abs=one["correction_remaining_uncertainty"])
    assert one["why_not"] == "a correction is in force, and what remains is not worth another"


def test_a_correction_in_force_that_is_too_small_is_proposed_in_full(inbox: Path, tmp_path: Path) -> None:
    settings = tmp_path / "settings.toml"
    settings.write_text(
        f'[corrections.{OTHER}.bottle_oxygen]\nadd = -2.0\nreason = "invented"\n', encoding="utf-8"
    )
    archive = run(inbox, "--settings", settings)
    told = call("crossovers", archive, "--out", tmp_path / "out").out
    assert re.search(rf"^propose  {OTHER} oxygen times 0\.97\d* ", told, re.MULTILINE)
    assert re.search(
        rf"^in force {OTHER} oxygen plus -2\.0 umol kg-1; what remains: times 0\.98\d* \+- 0\.\d+;"
        r" another is proposed in its place\.$",
        told,
        re.MULTILINE,
    )
    assert "With the corrections in force it is off still" in told
    page = (tmp_path / "out" / "crossovers.md").read_text(encoding="utf-8")
    assert "in place of earlier ones of the same cruise and quantity" in page


def test_the_tables_and_the_page_are_the_same_bytes_every_time(inbox: Path, tmp_path: Path) -> None:
    archive = run(inbox)
    untouched = hashes(archive)
    call("crossovers", archive, "--out", tmp_path / "first")
    call("crossovers", archive, "--out", tmp_path / "second")
    assert hashes(tmp_path / "first") == hashes(tmp_path / "second")
    assert set(hashes(tmp_path / "first")) == {"offsets.parquet", "proposals.parquet", "crossovers.md"}
    assert hashes(archive) == untouched


def test_the_tables_describe_themselves(inbox: Path, tmp_path: Path) -> None:
    call("crossovers", run(inbox), "--out", tmp_path / "out")
    offsets = pq.read_table(tmp_path / "out" / "offsets.parquet")
    assert offsets.num_rows == 15
    row = next(
        row
        for row in offsets.to_pylist()
        if (row["expocode"], row["other_expocode"], row["variable"]) == (ONE, OTHER, "silicate")
    )
    assert row["kind"] == "multiplicative"
    assert row["offset"] == pytest.approx(1 / 1.06 - 1, abs=2 * row["offset_uncertainty"])
    assert (row["surface"], row["difference_unit"]) == ("sigma4", "umol kg-1")
    assert row["mean_difference"] == pytest.approx(-0.06 * 110, rel=0.1)
    assert all(field.metadata[b"long_name"] for field in offsets.schema)
    record = json.loads(offsets.schema.metadata[b"seawhence"])
    assert set(record["cruises"]) == {ONE, OTHER, "ZZV320150101"}
    proposals = pq.read_table(tmp_path / "out" / "proposals.parquet").to_pylist()
    assert {(p["expocode"], p["variable"]) for p in proposals if p["proposed"] == "yes"} == {
        (OTHER, "bottle_oxygen"),
        (OTHER, "silicate"),
    }
    assert all((p["why_not"] is None) == (p["proposed"] == "yes") for p in proposals)


def test_one_cruise_alone_has_nothing_to_be_compared_with(inbox: Path, tmp_path: Path) -> None:
    for name in ("other_hy1.csv", "third_hy1.csv"):
        (inbox / name).unlink()
    outcome = call("crossovers", run(inbox), "--out", tmp_path / "out")
    assert outcome.status == 0
    assert outcome.out.startswith("1 cruise, 0 of them comparable; 0 offsets, 0 corrections proposed.")
    assert "No two cruises could be compared." in (tmp_path / "out" / "crossovers.md").read_text(
        encoding="utf-8"
    )
    assert pq.read_table(tmp_path / "out" / "offsets.parquet").num_rows == 0


def test_what_cannot_be_done_is_said_in_a_sentence(inbox: Path, tmp_path: Path) -> None:
    archive = run(inbox)
    inside = call("crossovers", archive, "--out", archive / "samples")
    assert (inside.status, inside.err.count("\n")) == (2, 1)
    assert "it lies in the archive; give a directory outside it as --out." in inside.err
    (tmp_path / "file").write_text("", encoding="utf-8")
    blocked = call("crossovers", archive, "--out", tmp_path / "file")
    assert blocked.status == 2
    assert "the tables cannot be written there (File exists); give another directory as --out." in blocked.err
    settings = tmp_path / "settings.toml"
    settings.write_text('[crossovers]\nreference = ["ZZV9"]\n', encoding="utf-8")
    unknown = call("crossovers", archive, "--out", tmp_path / "out", "--settings", settings)
    assert unknown.status == 2
    assert (
        f"names ZZV9, which the archive does not have; its cruises are: {ONE}, {OTHER}, ZZV3" in unknown.err
    )
    assert not (tmp_path / "out").exists()
    nowhere = call("crossovers", tmp_path / "none", "--out", tmp_path / "out")
    assert nowhere.status == 2
    assert "there is no archive here" in nowhere.err


def test_a_cruise_that_cannot_be_read_is_left_out_and_told(inbox: Path, tmp_path: Path) -> None:
    archive = run(inbox)
    path = archive / "samples" / f"{ONE}.parquet"
    path.write_bytes(path.read_bytes()[:-20])
    outcome = call("crossovers", archive, "--out", tmp_path / "out")
    assert outcome.status == 1
    assert "left out" in outcome.out
    assert "2 cruises, 2 of them comparable; 5 offsets" in outcome.out


def test_a_correction_of_a_cruise_that_the_inbox_does_not_hold_is_told(inbox: Path, tmp_path: Path) -> None:
    settings = tmp_path / "settings.toml"
    settings.write_text(
        '[corrections.ZZV999.nitrate]\nfactor = 0.98\nreason = "invented"\n', encoding="utf-8"
    )
    outcome = call("run", inbox, "--archive", tmp_path / "archive", "--settings", settings)
    assert outcome.status == 0
    assert "the settings correct cruise ZZV999, of which the inbox holds no file" in outcome.err


def test_two_cruises_of_the_demonstration_twelve_years_apart(tmp_path: Path) -> None:
    # Between them the overflow weakened and the deep water changed, which no calibration explains; the bottom
    # water did not, and there the planted offset is found.
    inbox = tmp_path / "inbox"
    inbox.mkdir()
    (inbox / f"{ONE}_hy1.csv").write_bytes((FIXTURES / "inbox" / f"{ONE}_hy1.csv").read_bytes())
    (inbox / f"{OTHER}_hy1.csv").write_bytes(
        planted(f"{OTHER}_hy1.csv", {"OXYGEN": (1.0, 3.0), "SILCAT": (1.02, 0.0)})
    )
    archive = run(inbox)
    call("crossovers", archive, "--out", tmp_path / "deep")
    page = (tmp_path / "deep" / "crossovers.md").read_text(encoding="utf-8")
    (oxygen,) = re.findall(rf"^- {ONE} oxygen .*$", page, re.MULTILINE)
    assert "12.0 years apart" in oxygen
    assert "the ocean may have changed" in oxygen
    settings = tmp_path / "settings.toml"
    settings.write_text("[crossovers]\npressure = 4300.0\nleast_levels = 2\n", encoding="utf-8")
    call("crossovers", archive, "--out", tmp_path / "bottom", "--settings", settings)
    rows = {
        row["variable"]: row for row in pq.read_table(tmp_path / "bottom" / "offsets.parquet").to_pylist()
    }
    oxygen_row = rows["bottle_oxygen"]
    assert -oxygen_row["mean_difference"] == pytest.approx(
        3.0, abs=2 * oxygen_row["mean_difference_uncertainty"]
    )
    assert -rows["silicate"]["offset"] == pytest.approx(0.02, abs=2 * rows["silicate"]["offset_uncertainty"])


@pytest.mark.parametrize("seed", [2, 3])
def test_the_same_ocean_in_the_same_year_shows_nothing_but_what_was_planted(
    tmp_path: Path, seed: int
) -> None:
    inbox = tmp_path / "inbox"
    inbox.mkdir()
    first, second = first_cruise(), second_cruise()
    stations = tuple(replace(s, time=s.time.replace(year=2009)) for s in second.stations)
    (inbox / "one_hy1.csv").write_bytes(bottle_sheet(first).bytes())
    again = bottle_sheet(replace(second, stations=stations, seed=seed)).bytes()
    (inbox / "other_hy1.csv").write_bytes(
        with_errors(again.decode(), {"OXYGEN": (1.0, 3.0), "SILCAT": (1.02, 0.0)})
    )
    settings = tmp_path / "settings.toml"
    settings.write_text(f'[crossovers]\nreference = ["{ONE}"]\n', encoding="utf-8")
    call("crossovers", run(inbox), "--out", tmp_path / "out", "--settings", settings)
    rows = {row["variable"]: row for row in pq.read_table(tmp_path / "out" / "offsets.parquet").to_pylist()}
    oxygen, silicate = rows.pop("bottle_oxygen"), rows.pop("silicate")
    assert -oxygen["mean_difference"] == pytest.approx(3.0, abs=2 * oxygen["mean_difference_uncertainty"])
    assert -silicate["offset"] == pytest.approx(0.02, abs=2 * silicate["offset_uncertainty"])
    assert all(abs(row["offset"]) < 2 * row["offset_uncertainty"] for row in rows.values())
    proposals = pq.read_table(tmp_path / "out" / "proposals.parquet").to_pylist()
    proposed = {p["variable"] for p in proposals if p["proposed"] == "yes"}
    assert proposed <= {"bottle_oxygen", "silicate"}
    assert "bottle_oxygen" in proposed


def planted(name: str, changes: dict[str, tuple[float, float]]) -> bytes:
    """Return a bottle file of the demonstration with a factor and an addition on some of its columns."""
    return with_errors((FIXTURES / "inbox" / name).read_text(encoding="utf-8-sig"), changes)


def with_errors(text: str, changes: dict[str, tuple[float, float]]) -> bytes:
    """Return a bottle file with a factor and an addition on some of its columns."""
    lines = text.splitlines()
    head = next(k for k, line in enumerate(lines) if line.lstrip().startswith("EXPOCODE"))
    names = [cell.strip() for cell in lines[head].split(",")]
    for k in range(head + 2, len(lines)):
        cells = lines[k].split(",")
        if len(cells) != len(names):
            continue
        for column, (factor, added) in changes.items():
            at = names.index(column)
            try:
                value = float(cells[at])
            except ValueError:
                continue
            if value > -9:
                cells[at] = f"{factor * value + added:.2f}"
        lines[k] = ",".join(cells)
    return ("\n".join(lines) + "\n").encode()
