from __future__ import annotations

import csv
import io
import re
from dataclasses import replace
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pyarrow.parquet as pq
import pytest

from pipeline.archive import open_archive, read_contents
from pipeline.reporting import cruise_page, gather
from pipeline.reporting.embedding import script_hash
from pipeline.reporting.thinning import thinned
from pipeline.settings import UseSettings
from tests.reporting.invented import EXPOCODE, SCRIPT, STATIONS, TITLE
from tests.reporting.reading import Page

if TYPE_CHECKING:
    from pathlib import Path


@pytest.fixture(scope="module")
def page(pages: Path) -> Page:
    return Page(pages / f"cruise_{EXPOCODE}.html")


@pytest.fixture(scope="module")
def samples(archive: Path) -> pd.DataFrame:
    return pd.DataFrame(pq.read_table(archive / "samples" / f"{EXPOCODE}.parquet").to_pandas())


@pytest.fixture(scope="module")
def mixtures(archive: Path) -> pd.DataFrame:
    return pd.DataFrame(pq.read_table(archive / "mixtures" / f"{EXPOCODE}.parquet").to_pandas())


def values(page: Page, key: str) -> np.ndarray:
    (found,) = (one["values"] for one in page.data["quantities"] if one["key"] == key)
    return np.array([np.nan if value is None else value for value in found])


@pytest.mark.parametrize(
    "name", ["pressure", "absolute_salinity", "oxygen", "silicate", "respiration", "sigma2"]
)
def test_embedded_values_are_the_archives(page: Page, samples: pd.DataFrame, name: str) -> None:
    np.testing.assert_allclose(values(page, name), samples[name].to_numpy(float), rtol=1e-6, atol=1e-12)


def test_values_that_may_not_be_used_stand_apart(page: Page, samples: pd.DataFrame) -> None:
    (nitrate,) = (one for one in page.data["quantities"] if one["key"] == "nitrate")
    bad = samples.index[samples["nitrate_flag"] == 4]
    assert [row for row, _ in nitrate["refused"]] == bad.to_list()
    assert nitrate["values"][bad[0]] is None
    good = samples["nitrate"].where(samples["nitrate_flag"] == 2)
    np.testing.assert_allclose(values(page, "nitrate"), good.to_numpy(float), rtol=1e-6)


def test_embedded_shares_are_the_archives(page: Page, samples: pd.DataFrame, mixtures: pd.DataFrame) -> None:
    keys = ["station", "cast", "sample", "line"]
    for code in ("OVF", "CEN"):
        mine = mixtures[mixtures["source"] == code].set_index(keys)
        for column in ("share", "share_uncertainty"):
            wanted = mine[column].reindex(pd.MultiIndex.from_frame(samples[keys])).to_numpy(float)
            assert np.isfinite(wanted).sum() > 40
            np.testing.assert_allclose(values(page, f"{column}:{code}"), wanted, rtol=1e-6, atol=1e-12)


def test_table_of_deliveries_is_the_account(page: Page) -> None:
    rows = {row[0]: row[1:9] for row in page.rows("deliveries")}
    assert rows["one_hy1.csv"][:5] == ["bottle", "90", "89", "1", "0"]
    assert rows["one_ct1.zip"][:5] == ["ctd", "340", "340", "0", "0"]
    assert int(rows["one_hy1.csv"][7]) == sum(value > -1 for value in page.data["samples"]["leader"])


def test_table_of_sources_is_computed_from_the_mixtures(
    page: Page, samples: pd.DataFrame, mixtures: pd.DataFrame
) -> None:
    rows = {row[0]: row[1:] for row in page.rows("by-source")}
    assert list(rows) == ["OVF", "BOT", "DEP", "MID", "CEN"]  # as in the catalogue
    mine = mixtures[mixtures["source"] == "MID"]
    present = mine[mine["share"] >= 0.05]
    leads = samples["leading_source"] == "MID"
    assert rows["MID"] == [
        str(len(present)),
        str(leads.sum()),
        str((leads & (samples["leading_probability"] >= 0.9)).sum()),
        f"{mine['share'].max():.3f}",
        f"{present['share_uncertainty'].median():.3f}",
        f"{present['share_uncertainty'].max():.3f}",
    ]


def test_sentence_of_a_source_says_where_it_is_largest(
    page: Page, samples: pd.DataFrame, mixtures: pd.DataFrame
) -> None:
    most = mixtures[mixtures["source"] == "OVF"].nlargest(1, "share").iloc[0]
    pressure = samples.set_index("line").loc[most["line"], "pressure"]
    assert (
        f"OVF (Ondrel overflow water) reaches {most['share']:.2f} ± {most['share_uncertainty']:.2f} at station"
        f" {most['station']}, {pressure:g} dbar" in page.words
    )
    assert re.search(
        r"OVF [^.]*\.[^;]*; along V<1> it is above 0\.5 in \d of 9 casts, between station 1 \(0 km\)",
        page.words,
    )


def test_findings_come_with_the_gravest_first_and_refused_rows_with_their_text(page: Page) -> None:
    kinds = [
        a["class"] for tag, a in page.tags if tag == "span" and (a.get("class") or "").startswith("badge")
    ]
    assert kinds == [kind for kind in ("badge fault", "badge doubt", "badge note") if kind in kinds]
    assert kinds[0] == "badge fault"
    assert "NITRAT is '3O.31'; expected a number" in page.words
    assert "the position is '-999.0000, -12.0000'" in page.words
    assert "1 row could not be used." in page.words


def test_text_of_others_is_text(page: Page, pages: Path) -> None:
    assert TITLE in page.words
    assert SCRIPT in page.data["casts"]["name"]
    assert set(STATIONS) - set(page.data["casts"]["name"]) == {"\u202ereversed"}
    assert "\\u202ereversed" in page.data["casts"]["name"]  # a code that turns the writing is shown as one
    source = (pages / f"cruise_{EXPOCODE}.html").read_text(encoding="utf-8")
    assert "alert(1)</script>" not in source
    assert "\u202e" not in source
    assert [attributes for attributes, _ in page.scripts] == [
        {"type": "application/json", "id": "data"},
        {},
        {},
        {},
    ]


def test_only_the_pages_own_scripts_may_run_and_nothing_is_fetched(page: Page) -> None:
    (policy,) = (a["content"] for tag, a in page.tags if tag == "meta" and "http-equiv" in a)
    assert policy is not None
    assert "default-src 'none'" in policy
    assert "unsafe-eval" not in policy
    ours = [script_hash(text) for attributes, text in page.scripts if not attributes]
    assert re.findall(r"'sha256-[^']+'", policy) == ours
    links = [value for _, a in page.tags for key, value in a.items() if key in {"src", "href"} and value]
    assert not [link for link in links if ":" in link and link != "data:,"]


def test_every_link_and_label_leads_somewhere(page: Page, pages: Path) -> None:
    ids = {a["id"] for _, a in page.tags if a.get("id")}
    for tag, attributes in page.tags:
        if tag == "a" and (target := attributes["href"]):
            assert (
                target.removeprefix("#") in ids if target.startswith("#") else (pages / target).is_file()
            ), target
        for key in ("aria-labelledby", "aria-describedby"):
            assert attributes.get(key, "keys") in ids | {"keys"}
        if attributes.get("role") == "application":
            assert len(attributes["aria-label"] or "") > 20


def test_headings_go_down_by_one(page: Page) -> None:
    levels = [int(tag[1]) for tag, _ in page.tags if re.fullmatch(r"h[1-6]", tag)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(later - earlier <= 1 for earlier, later in pairwise(levels))


def test_csv_files_hold_every_digit(pages: Path, samples: pd.DataFrame, mixtures: pd.DataFrame) -> None:
    rows = list(
        csv.DictReader(io.StringIO((pages / "data" / f"{EXPOCODE}_sections.csv").read_text(encoding="utf-8")))
    )
    assert [row["station"] for row in rows] == samples["station"].to_list()
    np.testing.assert_array_equal([float(row["silicate"]) for row in rows], samples["silicate"])
    distances = np.array([float(row["distance_km"]) for row in rows])
    assert distances[0] == 0.0
    assert distances[-1] == pytest.approx(8 * 55.9, abs=5.0)
    shares = list(
        csv.DictReader(io.StringIO((pages / "data" / f"{EXPOCODE}_shares.csv").read_text(encoding="utf-8")))
    )
    np.testing.assert_array_equal([float(row["share"]) for row in shares], mixtures["share"])


def test_a_cruise_without_rows_and_one_of_ctd_casts_alone_have_pages(archive: Path, tmp_path: Path) -> None:
    store = open_archive(archive)
    cruise = gather(store, read_contents(store).cruises[EXPOCODE], UseSettings())
    nothing = replace(
        cruise,
        samples=cruise.samples.slice(0, 0),
        casts=cruise.casts.slice(0, 0),
        mixtures=cruise.mixtures.slice(0, 0),
    )
    alone = replace(cruise, samples=thinned(cruise.casts, 50), mixtures=cruise.mixtures.slice(0, 0))
    for made, words in ((nothing, "0 bottle samples"), (alone, "CTD levels, 50 of them, are drawn")):
        (tmp_path / "page.html").write_bytes(cruise_page(made)[f"cruise_{EXPOCODE}.html"])
        page = Page(tmp_path / "page.html")
        assert words in page.words
        assert "by-source" not in page.tables


def test_the_same_archive_gives_the_same_bytes(archive: Path, pages: Path) -> None:
    store = open_archive(archive)
    cruise = gather(store, read_contents(store).cruises[EXPOCODE], UseSettings())
    made = cruise_page(cruise)
    assert {name for name in made if EXPOCODE in name} == set(made)
    for name, content in made.items():
        assert (pages / name).read_bytes() == content, name
