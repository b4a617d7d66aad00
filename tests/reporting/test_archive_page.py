from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pyarrow.parquet as pq
import pytest

from pipeline.reporting import Summary, archive_page
from pipeline.reporting.archive_page import central_longitude
from tests.reporting.invented import EXPOCODE, LATER, TITLE
from tests.reporting.reading import Page

if TYPE_CHECKING:
    from pathlib import Path


def test_list_of_cruises_is_the_archives(archive: Path, pages: Path) -> None:
    page = Page(pages / "index.html")
    rows = {row[0]: row[1:] for row in page.rows("cruises")}
    assert list(rows) == [EXPOCODE, LATER]
    samples = pq.read_table(archive / "samples" / f"{LATER}.parquet").to_pandas()
    tagged = samples["tag"].isin(["OVF", "BOT", "DEP", "MID", "CEN"]).sum()
    assert rows[LATER][:8] == ["V<1>", "2021-02-18", "2021-02-18", "1", "9", str(len(samples)), "0", "1"]
    assert rows[LATER][-2:] == [str(tagged), TITLE]


def test_changes_between_visits_are_told_with_their_scatter(pages: Path) -> None:
    page = Page(pages / "index.html")
    assert (
        f"V<1>: {EXPOCODE} (2009) and {LATER} (2021), at 9 places: the largest changes are those of"
        in page.words
    )
    (comparison,) = page.data["comparisons"]
    fallen = {c["code"]: c for c in comparison["changes"] if c["top"] == 3000.0}
    assert fallen["OVF"]["difference"] < -5 * fallen["OVF"]["error"]
    assert fallen["OVF"]["later"] - fallen["OVF"]["earlier"] == pytest.approx(
        fallen["OVF"]["difference"], abs=2e-5
    )
    assert (
        f"OVF by \u2212{-fallen['OVF']['difference']:.2f} ± {fallen['OVF']['error']:.2f} between 3000"
        in page.words
    )


def test_a_cruise_that_cannot_be_read_is_told_and_has_no_link(tmp_path: Path) -> None:
    broken = Summary("ZZX1", troubles=("ZZX1: no table of casts is published.",))
    (tmp_path / "index.html").write_bytes(
        archive_page([broken], frozenset(), ["samples/<b>: not ours."])["index.html"]
    )
    page = Page(tmp_path / "index.html")
    assert page.rows("cruises") == [["ZZX1", "ZZX1: no table of casts is published."]]
    assert "samples/<b>: not ours." in page.words
    assert not [a for tag, a in page.tags if tag == "a" and "cruise_" in (a["href"] or "")]


def test_an_archive_without_cruises_has_a_page() -> None:
    assert b"0 cruises" in archive_page([], frozenset())["index.html"]


@pytest.mark.parametrize(
    ("longitudes", "middle"),
    [([], 0.0), ([10.0], 10.0), ([170.0, -170.0], 180.0), ([-30.0, 50.0], 10.0), ([-179.0, 100.0], 140.5)],
)
def test_map_turns_to_where_the_cruises_are(longitudes: list[float], middle: float) -> None:
    turned = central_longitude(np.array(longitudes)) - middle
    assert abs((turned + 180) % 360 - 180) < 1e-9
