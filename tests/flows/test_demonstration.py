"""The whole way over the invented cruises: every row accounted for, every planted fault found, shares right."""

from __future__ import annotations

import csv
import json
import re
from functools import cache
from typing import TYPE_CHECKING

import gsw
import numpy as np
import pandas as pd
import pyarrow.parquet as pq
import pytest

from pipeline.tables import TABLE_NAMES
from pipeline.variables import EXCHANGE_NAMES, REGISTRY
from tests.flows.conftest import FIXTURES, Outcome, call, hashes

if TYPE_CHECKING:
    from pathlib import Path

PLANTED = list(
    csv.DictReader((FIXTURES / "truth/planted_faults.csv").read_text(encoding="utf-8").splitlines())
)
KEY = ["expocode", "station", "cast", "sample"]


@cache
def table(archive: Path, name: str) -> pd.DataFrame:
    """Return one table of all cruises."""
    return pd.concat([pd.read_parquet(path) for path in sorted((archive / name).glob("*.parquet"))])


def test_every_delivery_is_used(demonstration: tuple[Path, Outcome]) -> None:
    archive, outcome = demonstration
    assert outcome.status == 0
    assert outcome.err == ""
    lines = outcome.out.splitlines()
    assert len(lines) == 7
    assert lines[-1] == f"6 cruises written. The tables are in {archive}."
    assert lines[0].startswith("ZZV120090306  new, revision 1: ")
    assert "samples tagged" in lines[0]


def test_the_summary_file_says_the_same(demonstration: tuple[Path, Outcome]) -> None:
    archive, _ = demonstration
    summary = json.loads((archive.parent / "summary.json").read_text(encoding="utf-8"))
    assert summary["exit_status"] == 0
    for cruise in summary["cruises"]:
        assert cruise["rows"] == cruise["kept"] + cruise["rejected"]
        made = json.loads(
            pq.read_metadata(archive / f"samples/{cruise['expocode']}.parquet").metadata[b"seawhence"]
        )
        assert sum(file["rows"] for file in made["deliveries"]) == cruise["rows"]
        tables = made["tables"]
        assert tables["samples"] + tables["casts"] == cruise["kept"]
        assert tables["rejects"] == cruise["rejected"]


def test_shares_are_those_the_ocean_was_made_of(demonstration: tuple[Path, Outcome]) -> None:
    archive, _ = demonstration
    truth = pd.read_csv(FIXTURES / "truth/shares.csv", dtype={"station": str, "sample": str})
    truth = truth[truth["clean"].astype(bool)].set_index(KEY)
    mixtures = table(archive, "mixtures").drop_duplicates(
        [*KEY, "source"]
    )  # a sample delivered twice is not clean
    shares = mixtures.pivot(index=KEY, columns="source", values="share")
    sources = list(shares.columns)
    assert len(sources) == 5
    joined = truth.join(shares.add_suffix("_found"), how="left")
    solved = joined[[f"{code}_found" for code in sources]].notna().all(axis=1)
    assert solved.mean() > 0.99
    difference = np.abs(joined[[f"{c}_found" for c in sources]].to_numpy() - joined[sources].to_numpy())[
        solved
    ]
    assert difference.mean() <= 0.03
    assert np.abs(shares.dropna().sum(axis=1) - 1).max() < 1e-12
    assert (shares.dropna() >= 0).all(axis=None)


@pytest.mark.parametrize("fault", [f for f in PLANTED if f["expected"] == "finding"], ids=lambda f: f["id"])
def test_every_planted_finding_is_found(fault: dict[str, str], demonstration: tuple[Path, Outcome]) -> None:
    findings = table(demonstration[0], "findings")
    mine = findings[(findings["file"] == _shown(fault)) & (findings["check"] == fault["check"])]
    assert len(mine)
    if fault["sample"] and fault["check"] != "station-speed":  # speed is told of the station after the jump
        assert fault["line"] in {f"{line:.0f}" for line in mine["line"].dropna()}


@pytest.mark.parametrize("fault", [f for f in PLANTED if f["expected"] == "reject"], ids=lambda f: f["id"])
def test_every_planted_reject_is_rejected(fault: dict[str, str], demonstration: tuple[Path, Outcome]) -> None:
    rejects = table(demonstration[0], "rejects")
    (row,) = rejects[
        (rejects["file"] == _shown(fault)) & (rejects["line"] == int(fault["line"]))
    ].itertuples()
    assert row.reason == fault["check"]
    delivered = FIXTURES / fault["file"]
    if delivered.suffix == ".csv":
        written = delivered.read_bytes().decode("latin-1").splitlines()[int(fault["line"]) - 1]
        assert row.raw == written


@pytest.mark.parametrize("fault", [f for f in PLANTED if f["expected"] == "refused"], ids=lambda f: f["id"])
def test_every_planted_refusal_is_refused(fault: dict[str, str]) -> None:
    outcome = call("check", FIXTURES / fault["file"], "--format", "json")
    assert outcome.status == 1
    (said,) = json.loads(outcome.out)["files"]
    assert said["refused"]["reason"] == fault["check"]


_RIGHT = re.compile(r"right: (missing|-?\d+(?:\.\d+)?|\d{4}-\d\d-\d\dT[\d:]+Z)( \(.+\))?$")
ODD = [
    f
    for f in PLANTED
    if f["expected"] == "read" and f["variable"] in EXCHANGE_NAMES and _RIGHT.search(f["detail"])
]


@pytest.mark.parametrize("fault", [f for f in ODD if f["kind"] != "not-calibrated"], ids=lambda f: f["id"])
def test_what_looks_odd_is_read_right(fault: dict[str, str], demonstration: tuple[Path, Outcome]) -> None:
    name = EXCHANGE_NAMES[fault["variable"]].name
    if name == "bottle_salinity" and fault["kind"] == "sparse-bottle-values":
        name = "practical_salinity"
    rows = table(demonstration[0], "samples" if "_hy1" in fault["file"] else "casts")
    rows = rows[rows["file"] == _shown(fault)]
    on_line = rows[rows["line"] == int(fault["line"])]
    row = (on_line if len(on_line) else rows).iloc[0]  # a header line speaks of every row
    right = _RIGHT.search(fault["detail"])[1]  # type: ignore[index]
    if right == "missing":
        assert pd.isna(row[name])
    elif right.endswith("Z"):
        assert row["time"] == pd.Timestamp(right)
    elif isinstance(row[name], str):
        assert row[name] == right
    else:
        assert round(row[name], len(right.partition(".")[2])) == float(right)


def test_most_of_what_looks_odd_stands_on_a_row() -> None:
    assert len(ODD) >= 35


def test_no_row_is_lost_and_every_kept_row_has_its_line(demonstration: tuple[Path, Outcome]) -> None:
    archive, _ = demonstration
    for name in ("samples", "casts"):
        rows = table(archive, name)
        assert not rows.duplicated(["file", "line"]).any()
        assert rows["line"].notna().all()


def test_absolute_salinity_is_gsws(demonstration: tuple[Path, Outcome]) -> None:
    samples = table(demonstration[0], "samples")
    expected = gsw.SA_from_SP(
        *(samples[name].to_numpy() for name in ("practical_salinity", "pressure", "longitude", "latitude"))
    )
    np.testing.assert_array_equal(samples["absolute_salinity"].to_numpy(), expected)


def test_every_written_column_is_in_the_registry_or_was_delivered(
    demonstration: tuple[Path, Outcome],
) -> None:
    for name in TABLE_NAMES:
        for path in (demonstration[0] / name).glob("*.parquet"):
            for field in pq.read_schema(path):
                if field.name in REGISTRY:
                    assert (field.metadata or {}).get(b"units", b"").decode() == REGISTRY[field.name].unit
                else:
                    assert field.metadata[b"long_name"].endswith(b"as delivered")


def test_running_again_changes_no_byte_and_says_so(demonstration: tuple[Path, Outcome]) -> None:
    archive, _ = demonstration
    before = hashes(archive)
    outcome = call("run", FIXTURES / "inbox", "--archive", archive, "--sources", FIXTURES / "sources.toml")
    assert outcome.status == 0
    assert outcome.out.splitlines()[-1] == f"Nothing was new. The tables are in {archive}."
    assert hashes(archive) == before


def test_the_same_inputs_give_the_same_bytes(demonstration: tuple[Path, Outcome], tmp_path: Path) -> None:
    call("run", FIXTURES / "inbox", "--archive", tmp_path / "a", "--sources", FIXTURES / "sources.toml")
    assert hashes(tmp_path / "a") == hashes(demonstration[0])


def _shown(fault: dict[str, str]) -> str:
    name = fault["file"].removeprefix("inbox/")
    return f"{name}:{fault['member']}" if fault["member"] else name
