from __future__ import annotations

import csv
import json
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow.parquet as pq
import pytest

from pipeline.archive import open_archive, read_table
from pipeline.census.section import make_section
from pipeline.census.taking import lay_out
from pipeline.settings import Settings
from pipeline.tables import CENSUS
from pipeline.variables import REGISTRY

from .conftest import FIXTURES, Outcome, call

if TYPE_CHECKING:
    from pathlib import Path

BEFORE, AFTER = "ZZV120090306", "ZZV220210218"
BOUNDARIES = ("--boundaries", "36.5", "36.9", "37.0")
CODES = ("OVF", "BOT", "DEP", "MID", "CEN")


@pytest.fixture(scope="module")
def both(
    demonstration: tuple[Path, Outcome], tmp_path_factory: pytest.TempPathFactory
) -> tuple[Outcome, Path]:
    out = tmp_path_factory.mktemp("census") / "census.parquet"
    return call("census", demonstration[0], BEFORE, AFTER, *BOUNDARIES, "--out", out), out


def true_shares(archive: Path, cruise: str) -> tuple[Any, np.ndarray]:
    """Return a cruise's samples, and what each source truly makes up of the resolved section."""
    with (FIXTURES / "truth" / "shares.csv").open(encoding="utf-8") as file:
        truth = {
            (row["expocode"], row["station"], row["cast"], row["sample"]): [
                float(row[code]) for code in CODES
            ]
            for row in csv.DictReader(file)
        }
    table = read_table(open_archive(archive), cruise, "samples")
    section = make_section(cruise, table, "sigma2", Settings())
    weights = section.of_samples(lay_out(section, np.zeros(0)).weights)[0]
    keys = zip(*(table.column(name).to_pylist() for name in ("station", "cast", "sample")), strict=True)
    shares = np.array([truth[cruise, station, str(cast), sample] for station, cast, sample in keys])
    return table, weights @ shares / weights.sum()


def test_the_census_of_the_demonstration_is_right_within_its_uncertainty(
    demonstration: tuple[Path, Outcome], both: tuple[Outcome, Path]
) -> None:
    assert both[0].status == 0, both[0].err
    rows = pq.read_table(both[1]).to_pylist()
    for cruise in (BEFORE, AFTER):
        told = {
            row["source"]: row for row in rows
            if row["expocode"] == cruise and row["census_part"] == "source" and row["density_class"] == "all"
        }  # fmt: skip
        _, truth = true_shares(demonstration[0], cruise)
        assert sum(row["area_share"] for row in told.values()) == pytest.approx(1)
        for code, true in zip(CODES, truth, strict=True):
            assert abs(told[code]["area_share"] - true) < 2 * told[code]["area_share_uncertainty"], code
            assert 0.001 < told[code]["area_share_uncertainty"] < 0.03


def test_the_thinning_of_the_overflow_is_seen_and_its_uncertainty_is_that_of_the_difference(
    both: tuple[Outcome, Path],
) -> None:
    rows = [row for row in pq.read_table(both[1]).to_pylist() if row["census_part"] == "change"]
    whole = {row["source"]: row for row in rows if row["density_class"] == "all"}
    assert whole["OVF"]["area_share_change"] == pytest.approx(-0.025, abs=0.005)
    # Truly, by its samples, -0.0236.
    assert abs(whole["OVF"]["area_share_change"] + 0.0236) < 2 * whole["OVF"]["area_share_change_uncertainty"]
    assert sum(row["area_share_change"] for row in whole.values()) == pytest.approx(0, abs=1e-12)
    densest = next(row for row in rows if row["density_class"] == "4" and row["source"] == "OVF")
    assert densest["area_share_change"] < -2 * densest["area_share_change_uncertainty"]


def test_it_is_told_in_sentences(both: tuple[Outcome, Path]) -> None:
    said = both[0].out
    assert (
        "OVF: from 12.9 to 10.4 %, a change of -2.5 ± 1.3 %; that is 1.9 times the uncertainty: a hint"
        in said
    )
    assert "BOT: " in said
    assert "less than the uncertainty: no change can be told" in said
    assert "Between station 1 and station 2 there are 978 km: not filled." in said
    assert "12.0 years apart" in said
    assert "OVF from 37" in said


def test_errors_that_are_each_measurements_own_average_out(
    demonstration: tuple[Path, Outcome], tmp_path: Path
) -> None:
    (tmp_path / "own.toml").write_text('[census]\nmeasurement_errors = "independent"\n', encoding="utf-8")
    told = call("census", demonstration[0], BEFORE, AFTER, "--settings", tmp_path / "own.toml")
    assert "-2.5 ± 0.1 %; that is more than the uncertainty" in told.out
    assert "what a whole cruise is off by is not in it" in told.out


def test_the_table_is_of_registry_columns_and_says_what_it_was_made_from(both: tuple[Outcome, Path]) -> None:
    table = pq.read_table(both[1])
    assert table.column_names == list(CENSUS)
    for field in table.schema:
        assert field.metadata[b"long_name"].decode() == REGISTRY[field.name].long_name
    made = json.loads(table.schema.metadata[b"seawhence"])
    assert set(made["cruises"]) == {BEFORE, AFTER}
    unresolved = {row["unresolved_reason"] for row in table.to_pylist() if row["census_part"] == "unresolved"}
    assert unresolved == {"outside", "incomplete", "depth_gap", "station_gap"}


def test_the_same_call_gives_the_same_bytes(
    demonstration: tuple[Path, Outcome], both: tuple[Outcome, Path], tmp_path: Path
) -> None:
    out = tmp_path / "again.parquet"
    assert call("census", demonstration[0], BEFORE, AFTER, *BOUNDARIES, "--out", out).out == both[0].out
    assert out.read_bytes() == both[1].read_bytes()


def test_json_and_markdown(demonstration: tuple[Path, Outcome]) -> None:
    told = json.loads(call("census", demonstration[0], BEFORE, "--format", "json").out)
    assert told["members"] == 100
    assert told["sections"][0]["resolved_km2"] == pytest.approx(11758, abs=1)
    assert {row["source"] for row in told["rows"] if "source" in row} == set(CODES)
    page = call("census", demonstration[0], BEFORE, AFTER, "--format", "markdown").out
    assert page.startswith(f"# {AFTER} against {BEFORE}\n")
    assert "| OVF |" in page


@pytest.mark.parametrize(
    ("arguments", "sentence"),
    [
        (("ZZV9",), "there is no cruise 'ZZV9'; its cruises are: ZZV120090306,"),
        (("ZZV620170405",), "has no bottle samples"),
        ((BEFORE, BEFORE), "cannot be compared with itself"),
        ((BEFORE, "--boundaries", "37", "36"), "from the lightest to the densest, each once; order them"),
        ((BEFORE, "--out", "census.csv"), "expected .parquet"),
    ],
)
def test_what_cannot_be_done_is_told_in_a_sentence(
    demonstration: tuple[Path, Outcome], arguments: tuple[str, ...], sentence: str
) -> None:
    told = call("census", demonstration[0], *arguments)
    assert told.status == 2
    assert sentence in told.err
    assert not told.out


def test_nothing_is_written_into_the_archive(demonstration: tuple[Path, Outcome]) -> None:
    told = call("census", demonstration[0], BEFORE, "--out", demonstration[0] / "census.parquet")
    assert told.status == 2
    assert "lies in the archive" in told.err
    assert not (demonstration[0] / "census.parquet").exists()


def test_an_archive_without_sources_says_so(tmp_path: Path) -> None:
    inbox = tmp_path / "inbox"
    inbox.mkdir()
    name = "ZZV320140610_hy1.csv"
    (inbox / name).write_bytes((FIXTURES / "inbox" / name).read_bytes())
    assert call("run", inbox, "--archive", tmp_path / "archive").status == 0
    told = call("census", tmp_path / "archive", "ZZV320140610")
    assert told.status == 2
    assert "made without source waters" in told.err


def test_cruises_of_other_source_waters_are_not_compared(tmp_path: Path) -> None:
    for number, name in enumerate(("ZZV320140610", "ZZV420110203")):
        inbox = tmp_path / str(number)
        inbox.mkdir()
        (inbox / "a_hy1.csv").write_bytes((FIXTURES / "inbox" / f"{name}_hy1.csv").read_bytes())
        sources = (
            (FIXTURES / "sources.toml")
            .read_text(encoding="utf-8")
            .replace("value = 292.0", f"value = 29{number}.0")
        )
        (tmp_path / "sources.toml").write_text(sources, encoding="utf-8")
        assert (
            call("run", inbox, "--archive", tmp_path / "a", "--sources", tmp_path / "sources.toml").status
            == 0
        )
    told = call("census", tmp_path / "a", "ZZV320140610", "ZZV420110203")
    assert told.status == 2
    assert "made with different source waters" in told.err
