"""Where a user sees which samples were not resolved, and which lie outside what their sources can mix to."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pyarrow.compute as pc
import pyarrow.parquet as pq

from .conftest import FIXTURES, call

if TYPE_CHECKING:
    from pathlib import Path

    from .conftest import Outcome

CRUISE = "ZZV120090306"


def test_show_tells_which_samples_are_not_resolved_and_why(demonstration: tuple[Path, Outcome]) -> None:
    shown = call("show", demonstration[0], CRUISE)
    assert shown.status == 0
    tags = pq.read_table(demonstration[0] / "samples" / f"{CRUISE}.parquet", columns=["tag"]).column("tag")
    incomplete = pc.sum(pc.equal(tags, "incomplete")).as_py()
    assert (
        f"note  {incomplete} of {len(tags)} samples are not resolved into source waters: so many" in shown.out
    )
    assert "outside what its sources can mix to" not in shown.out


def test_a_source_that_is_missing_is_seen_in_the_samples_the_findings_and_what_is_shown(
    tmp_path: Path,
) -> None:
    sources = (FIXTURES / "sources.toml").read_text(encoding="utf-8")
    assert sources.count('"DEP", ') == 1
    (tmp_path / "sources.toml").write_text(sources.replace('"DEP", ', ""), encoding="utf-8")
    archive = tmp_path / "archive"
    made = call("run", FIXTURES / "inbox", "--archive", archive, "--sources", tmp_path / "sources.toml")
    assert made.status == 0
    samples = pq.read_table(archive / "samples" / f"{CRUISE}.parquet")
    assert pc.max(samples.column("hull_distance")).as_py() > 10
    assert samples.schema.field("hull_distance").metadata[b"units"] == b"1"
    findings = pq.read_table(archive / "findings" / f"{CRUISE}.parquet")
    (told,) = findings.filter(pc.equal(findings["check"], "outside-mixing-hull"))["message"].to_pylist()
    assert "where the share of OVF would have to be negative: a source water is missing" in told
    assert f"note  {told}" in call("show", archive, CRUISE).out
