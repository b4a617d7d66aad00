"""What a run tells those who look later, and what the nightly command asks of its arguments."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest
from markdown_it import MarkdownIt

from flows import telling
from flows.records import CruiseRecord, Refusal, RunSummary, State
from flows.serving import cron_of, deployment_name
from pipeline.problems import UsageProblem
from pipeline.settings import Settings, read_settings
from tests.flows.conftest import FIXTURES, call
from tests.invented import bottle_file

if TYPE_CHECKING:
    from collections.abc import Sequence


def summary(seconds: Sequence[float] = (), *others: CruiseRecord) -> RunSummary:
    """Return the summary of a run that made cruises of so many seconds."""
    made = [
        CruiseRecord(f"ZZV12009{number:04d}", State.NEW, 1, rows=5, kept=5, seconds=one)
        for number, one in enumerate(seconds)
    ]
    return RunSummary("archive", (*made, *others), ())


def test_a_cruise_is_slow_that_stands_out() -> None:
    assert [c.seconds for c in summary([1.0, 1.2, 0.9, 1.1, 60.0, 11.0, 200.0]).slow] == [200.0, 60.0, 11.0]
    assert summary([1.0, 1.0, 1.0, 1.0, 9.9]).slow == (), "ten seconds are nothing"
    assert summary([20.0, 21.0, 22.0, 23.0, 90.0]).slow == (), (
        "four times the others may be four times as large"
    )
    assert summary([0.1, 60.0]).slow == (), "two cannot be compared"
    (line,) = summary([1.0, 1.2, 0.9, 1.1, 60.0]).slow_lines()
    assert line == "slow  ZZV120090004: took 60 s, far more than the others."


def test_the_brief_lines_count_what_is_as_it_was() -> None:
    unchanged = [CruiseRecord(f"ZZV22021{number:04d}", State.UNCHANGED, 3) for number in range(1000)]
    lines = telling.brief_lines(summary([1.0], *unchanged))
    assert lines == [
        "ZZV120090000  new, revision 1: 5 rows in, 5 kept, 0 rejected; 0 findings; no bottle samples",
        "unchanged  1000 cruises",
        "1 cruise written. The tables are in archive.",
    ]


def test_the_page_shows_what_others_wrote_as_it_is() -> None:
    odd = Refusal("a|b", "odd", "a|b: <script>alert(1)</script> *and* [a link](http://x) | more")
    failed = CruiseRecord("ZZV1", State.FAILED, message="the disk\nis full")
    refused = CruiseRecord("ZZV2", State.REFUSED, refusals=(odd,), message=odd.message)
    text = telling.page(summary([1.0, 2.0], failed, refused))
    html = MarkdownIt("commonmark").enable("table").render(text)
    assert "<script>" not in html
    assert "<a " not in html
    assert html.count("<table>") == 1
    assert [line for line in text.splitlines() if line.startswith("#")] == [
        "# 2 cruises written, 1 delivery refused, 1 cruise failed. The tables are in archive.",
        "## Failed",
        "## Refused",
        "## New",
    ]
    assert "(2.0 s)" in text


def test_the_page_and_the_table_of_a_large_run_stay_small() -> None:
    many = summary([0.1] * 3000, CruiseRecord("ZZV9", State.FAILED, message="x" * 5000))
    rows = telling.rows(many)
    assert len(rows) == 1000
    assert rows[0]["cruise"] == "ZZV9"
    assert len(rows[0]["line"]) == 300
    assert telling.page(many).splitlines()[-1] == "- and 2800 more"


@pytest.mark.parametrize(
    ("at", "cron"),
    [
        ("02:30", "30 2 * * *"),
        ("2:05", "5 2 * * *"),
        ("23:59", "59 23 * * *"),
        ("0 4  * * 1-5", "0 4 * * 1-5"),
    ],
)
def test_a_time_of_day_is_cron(at: str, cron: str) -> None:
    assert cron_of(at) == cron


@pytest.mark.parametrize("at", ["", "2", "24:00", "12:60", "noon", "1 2 3", "-1:00"])
def test_what_is_no_time_is_refused(at: str) -> None:
    with pytest.raises(
        UsageProblem, match="expected a time of day such as 02:30, or the five fields of cron"
    ):
        cron_of(at)


def test_each_archive_has_a_name_of_its_own_on_a_server() -> None:
    assert deployment_name(Path("/data/sea whence/archive")) == "data-sea-whence-archive"
    assert deployment_name(Path("/")) == "root"


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ([], "one of the arguments --at --once is required"),
        (["--at", "02:30", "--once"], "not allowed with argument --at"),
        (["--at", "25:00"], "--at: found '25:00', expected a time of day such as 02:30"),
        (
            ["--at", "02:30", "--timezone", "Nowhere/Land"],
            "--timezone: found 'Nowhere/Land', expected a name of",
        ),
        (["--at", "02:30", "--timezone", "../../etc"], "--timezone: found '../../etc', expected a name of"),
        (["--at", "02:30", "--sources", "none.toml"], "none.toml"),
        (["--at", "02:30", "--settings", "none.toml"], "none.toml"),
        (["--at", "02:30", "--pool", "nights"], "--pool: no Prefect server is named; set PREFECT_API_URL"),
    ],
)
def test_wrong_usage_is_told_at_once(arguments: list[str], words: str, tmp_path: Path) -> None:
    outcome = call("nightly", FIXTURES / "inbox", "--archive", tmp_path / "archive", *arguments)
    assert outcome.status == 2
    assert words in outcome.err
    assert outcome.out == ""


def test_an_inbox_that_is_not_there_is_told_before_the_night(tmp_path: Path) -> None:
    outcome = call("nightly", tmp_path / "none", "--archive", tmp_path / "archive", "--at", "02:30")
    assert outcome.status == 2
    assert "there is no such directory" in outcome.err


def test_a_night_with_nothing_new_reads_each_delivered_file_once(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    inbox = tmp_path / "inbox"
    inbox.mkdir()
    for number in range(1, 6):
        (inbox / f"{number}_hy1.csv").write_bytes(bottle_file({"EXPOCODE": f"ZZV{number}20090214"}))
    assert call("run", inbox, "--archive", tmp_path / "archive").status == 0
    opened: list[str] = []
    real = Path.open

    def watched(path: Path, *arguments: Any, **named: Any) -> Any:
        opened.append(path.name)
        return real(path, *arguments, **named)

    monkeypatch.setattr(Path, "open", watched)
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.out.endswith(f"Nothing was new. The tables are in {tmp_path}/archive.\n")
    assert sorted(name for name in opened if name.endswith("_hy1.csv")) == [
        f"{n}_hy1.csv" for n in range(1, 6)
    ]


def test_no_table_depends_on_how_a_run_goes_on() -> None:
    impatient = read_settings(None, {"SEAWHENCE_RUN__CRUISE_SECONDS": "5", "SEAWHENCE_RUN__WAITS": "[]"})
    assert impatient.run.cruise_seconds == 5
    assert impatient.sha256 == Settings().sha256
