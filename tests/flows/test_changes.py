"""What ``seawhence changes`` tells of two revisions, from files delivered to words, JSON and Parquet."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

import pyarrow.parquet as pq
import pytest
from markdown_it import MarkdownIt

from pipeline.tables import CHANGES
from tests.flows.conftest import FIXTURES, call, hashes
from tests.invented import EXPOCODE, bottle_file, cast_file, zipped

if TYPE_CHECKING:
    from pathlib import Path


def deliver(tmp_path: Path, *options: str | Path, **files: bytes) -> Path:
    """Run over an inbox of these files, with their ending instead of what follows the last underscore."""
    inbox = tmp_path / "inbox"
    inbox.mkdir(exist_ok=True)
    for name, data in files.items():
        (inbox / (f"{name}.zip" if name.endswith("ct1") else f"{name}.csv")).write_bytes(data)
    outcome = call("run", inbox, "--archive", tmp_path / "archive", *options)
    assert outcome.status == 0, outcome
    return tmp_path / "archive"


def rows(count: int) -> list[dict[str, str]]:
    return [
        {
            "STNNBR": str(1 + n // 10),
            "SAMPNO": str(n % 10 + 1),
            "BTLNBR": str(n % 10 + 1),
            "NITRAT": f"{20 + n}.00",
        }
        for n in range(count)
    ]


@pytest.fixture
def reissued(tmp_path: Path) -> Path:
    """An archive whose cruise was delivered again with 5 changed values, 1 sample removed and 2 added."""
    first = rows(20)
    deliver(tmp_path, a_hy1=bottle_file(*first), a_ct1=zipped({"a_ct1.csv": cast_file()}))
    second = [dict(row) for row in first]
    second[0]["NITRAT"] = "20.50"
    second[3]["SALNTY"] = "34.6010"
    second[4]["SALNTY_FLAG_W"] = "3"
    second[7]["PHSPHT"] = "-999.0"
    second[12]["OXYGEN"] = "190.0"
    del second[15]
    second += [{"STNNBR": "2", "SAMPNO": "11"}, {"STNNBR": "3", "SAMPNO": "1"}]
    return deliver(tmp_path, a_hy1=bottle_file(*second))


EXPECTED = [
    ("gone", "2", "6", None, None, None),
    ("added", "2", "11", None, None, None),
    ("added", "3", "1", None, None, None),
    ("value", "1", "1", "nitrate", "20", "20.5"),
    ("value", "1", "4", "bottle_salinity", "34.501", "34.601"),
    ("flag", "1", "5", "bottle_salinity_flag", "2", "3"),
    ("vanished", "1", "8", "phosphate", "2", None),
    ("value", "2", "3", "bottle_oxygen", "200", "190"),
]


def test_a_reissue_is_told_exactly(reissued: Path) -> None:
    outcome = call("changes", reissued, EXPOCODE, "--format", "json")
    assert outcome.status == 0
    told = json.loads(outcome.out)
    names = ("change", "station", "sample", "variable", "before", "after")
    assert [tuple(row[name] for name in names) for row in told["changes"]] == EXPECTED
    assert (told["from"], told["to"]) == (1, 2)
    samples, casts = told["tables"]["samples"], told["tables"]["casts"]
    assert (samples["gone"], samples["added"], samples["in_both"]) == (1, 2, 19)
    assert casts["delivered"] == casts["computed"] == []
    assert told["made_from"]["delivery_changed"]
    assert not told["made_from"]["processing_changed"]
    computed = {one["column"]: one for one in samples["computed"]}
    assert computed["absolute_salinity"]["changed"] >= 1
    assert not set(computed) & {"nitrate", "bottle_salinity", "phosphate", "bottle_oxygen"}
    assert computed["preformed_nitrate"]["largest_difference"] is not None


def test_a_reissue_in_words(reissued: Path) -> None:
    lines = call("changes", reissued, EXPOCODE).out.splitlines()
    assert lines[0] == f"{EXPOCODE}: revision 2 against revision 1"
    assert lines[1] == "  The delivery changed; settings, source waters and program are the same."
    text = "\n".join(lines)
    assert "a_hy1.csv is another edition: 21 rows" in text
    assert "samples: 20 before, 21 now\n  1 gone, 2 added, 19 in both.\n" in text
    assert "  gone: station 2, cast 1, sample 6 (a_hy1.csv, line 19 of revision 1).\n" in text
    assert "  added: station 3, cast 1, sample 1 (a_hy1.csv, line 24 of revision 2).\n" in text
    assert "CTD levels: 2 before, 2 now\n  Nothing differs." in text
    (oxygen,) = [line for line in lines if line.startswith("  bottle_oxygen ")]
    assert oxygen.split()[1:5] == ["1", "0", "0", "-10"]
    assert oxygen.endswith("umol kg-1  station 2, cast 1, sample 3")
    assert "2           1       3  bottle_oxygen" in text
    assert all(len(line) < 200 for line in lines)


def test_a_reissue_as_markdown_and_as_a_table(reissued: Path, tmp_path: Path) -> None:
    before = hashes(reissued)
    out = tmp_path / "changes.parquet"
    outcome = call("changes", reissued, EXPOCODE, "--format", "markdown", "--out", out)
    html = MarkdownIt("commonmark").enable("table").render(outcome.out)
    assert html.count("<table>") == 4
    assert "<h1>ZZV120090214: revision 2 against revision 1</h1>" in html
    listed = pq.read_table(out)
    assert tuple(listed.column_names) == CHANGES
    assert listed.num_rows == len(EXPECTED)
    assert listed.schema.metadata[b"seawhence.to_revision"] == b"2"
    once = out.read_bytes()
    call("changes", reissued, EXPOCODE, "--out", out)
    assert out.read_bytes() == once
    assert hashes(reissued) == before


def test_which_revisions_are_compared(reissued: Path, tmp_path: Path) -> None:
    deliver(tmp_path, a_hy1=bottle_file(*rows(19)))
    for options, pair in (
        ([], (2, 3)), (["--from", "1"], (1, 3)), (["--to", "2"], (1, 2)), (["--from", "1", "--to", "2"], (1, 2)),
        (["--from", "3", "--to", "1"], (3, 1)), (["--from", "2", "--to", "2"], (2, 2)),
    ):  # fmt: skip
        told = json.loads(call("changes", reissued, EXPOCODE, *options, "--format", "json").out)
        assert (told["from"], told["to"]) == pair
    assert "Nothing differs." in call("changes", reissued, EXPOCODE, "--from", "2", "--to", "2").out


def test_settings_sources_and_columns_that_changed_are_named(tmp_path: Path) -> None:
    deliver(tmp_path, a_hy1=bottle_file(*rows(3)))
    settings = tmp_path / "settings.toml"
    settings.write_text("[use]\nwater_flags = [2]\n", encoding="utf-8")
    archive = deliver(tmp_path, "--settings", settings, "--sources", FIXTURES / "sources.toml")
    text = call("changes", archive, EXPOCODE).out
    assert "  The same files were delivered; the processing changed.\n" in text
    assert "  settings: use.water_flags was [2, 6], is [2].\n" in text
    assert "  source waters: were none, are 'Source waters of the" in text
    assert "delivered values" not in text
    deliver(tmp_path, "--settings", settings, a_hy1=bottle_file(*rows(3), extra={"MERCURY": "PMOL/L"}))
    text = call("changes", archive, EXPOCODE).out
    assert "  the column MERCURY is new (3 values).\n" in text
    back = call("changes", archive, EXPOCODE, "--from", "3", "--to", "2").out
    assert "  the column MERCURY is gone (it had 3 values).\n" in back
    assert (
        "Both the delivery and the processing changed."
        in call("changes", archive, EXPOCODE, "--from", "1").out
    )


def test_settings_whose_text_is_lost_are_told_as_changed(tmp_path: Path) -> None:
    deliver(tmp_path, a_hy1=bottle_file(*rows(3)))
    settings = tmp_path / "settings.toml"
    settings.write_text("[use]\nwater_flags = [2]\n", encoding="utf-8")
    archive = deliver(tmp_path, "--settings", settings)
    sha256 = json.loads(call("show", archive, EXPOCODE, "--format", "json").out)["made_from"][
        "settings_sha256"
    ]
    (archive / f"raw/{sha256[:2]}/{sha256}").unlink()
    assert (
        "settings: changed; the archive does not have the text of both"
        in call("changes", archive, EXPOCODE).out
    )


def test_many_changes_are_told_in_few_lines(tmp_path: Path) -> None:
    levels = [f"{n}.0,2,{10 + n / 1000:.4f},2,35.0000,2" for n in range(500)]
    deliver(tmp_path, a_ct1=zipped({"a_ct1.csv": cast_file(levels)}), a_hy1=bottle_file(*rows(200)))
    warmer = [f"{n}.0,2,{11 + n / 1000:.4f},2,35.0000,2" for n in range(450)]
    archive = deliver(tmp_path, a_ct1=zipped({"a_ct1.csv": cast_file(warmer)}), a_hy1=bottle_file(*rows(100)))
    text = call("changes", archive, EXPOCODE).out
    assert "  gone: station 1, cast 1: 50 CTD levels.\n" in text
    assert "  gone: station 11, cast 1: 10 samples.\n" in text
    assert "  ... and 400 more (--format json or --out FILE.parquet tells all).\n" in text
    assert len(text.splitlines()) < 150
    told = json.loads(call("changes", archive, EXPOCODE, "--format", "json").out)
    assert sum(row["variable"] == "temperature" for row in told["changes"]) == 450


def test_one_revision_is_told_and_is_no_error(tmp_path: Path) -> None:
    archive = deliver(tmp_path, a_hy1=bottle_file({}))
    outcome = call("changes", archive, EXPOCODE)
    assert outcome.status == 0
    assert outcome.out.startswith(
        f"{EXPOCODE}: the archive has one revision of it, 1, and nothing to compare it with;"
    )
    assert json.loads(call("changes", archive, EXPOCODE, "--format", "json").out)["revisions"] == [1]


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["ZZV9", "--from", "1"], "there is no cruise 'ZZV9'; its cruises are: ZZV120090214."),
        (
            [EXPOCODE, "--from", "7"],
            "ZZV120090214: there is no revision 7 that can be read; there are: 1, 2.",
        ),
        ([EXPOCODE, "--to", "1"], "no revision before 1 can be read; there are: 1, 2; give one as --from."),
        ([EXPOCODE, "--from", "one"], "invalid int value: 'one'"),
        ([EXPOCODE, "--out", "changes.csv"], "changes.csv: found another ending, expected .parquet"),
        (
            [EXPOCODE, "--out", "archive/samples/x.parquet"],
            "lies in the archive, which keeps its own tables only",
        ),
        ([EXPOCODE, "--out", "other.parquet"], "found something else than a table of changes there"),
        (
            [EXPOCODE, "--out", "nowhere/x.parquet"],
            "the changes cannot be written (No such file or directory)",
        ),
    ],
)
def test_wrong_usage(
    arguments: list[str], said: str, reissued: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "other.parquet").write_bytes(b"mine")
    before = hashes(reissued)
    outcome = call("changes", "archive", *arguments)
    assert outcome.status == 2
    assert said in outcome.err
    assert (tmp_path / "other.parquet").read_bytes() == b"mine"
    assert hashes(reissued) == before


def test_a_damaged_revision_is_told(reissued: Path) -> None:
    path = reissued / f"superseded/{EXPOCODE}/r0001/samples.parquet"
    path.write_bytes(path.read_bytes()[:-20])
    outcome = call("changes", reissued, EXPOCODE)
    assert outcome.status == 2
    assert "damaged, it cannot be read" in outcome.err


def test_help_has_an_example_and_the_exit_statuses() -> None:
    outcome = call("changes", "--help")
    assert outcome.status == 0
    assert "example:\n  seawhence changes" in outcome.out
    assert "0 the revisions were compared, or there is only one" in outcome.out
    assert all(len(line) <= 120 for line in outcome.out.splitlines())
