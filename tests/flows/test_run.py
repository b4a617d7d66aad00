"""Runs over small inboxes: what is new, what is refused, what a reissue does, and what the shell is told."""

from __future__ import annotations

import hashlib
import json
import os
import signal
import subprocess
import sys
from contextlib import suppress
from typing import TYPE_CHECKING

import pyarrow.parquet as pq
import pytest

from flows.plan import Job, pack
from flows.stopping import stoppable
from tests.flows.conftest import FIXTURES, ROOT, call, hashes
from tests.invented import EXPOCODE, bottle_file, cast_file, zipped

if TYPE_CHECKING:
    from pathlib import Path


@pytest.fixture
def inbox(tmp_path: Path) -> Path:
    folder = tmp_path / "inbox"
    folder.mkdir()
    return folder


def samples(archive: Path, expocode: str = EXPOCODE) -> list[dict[str, object]]:
    rows: list[dict[str, object]] = pq.read_table(archive / f"samples/{expocode}.parquet").to_pylist()
    return rows


def test_a_bad_file_takes_no_other_down(inbox: Path, tmp_path: Path) -> None:
    (inbox / "good_hy1.csv").write_bytes(bottle_file({}, {}))
    (inbox / "empty.csv").write_bytes(b"")
    (inbox / "spoiled_hy1.csv").write_bytes(bottle_file({"EXPOCODE": "3.2062E+11"}))
    (inbox / ".hidden").write_bytes(b"no delivery")
    archive = tmp_path / "archive"
    outcome = call("run", inbox, "--archive", archive, "--summary", tmp_path / "summary.json")
    assert outcome.status == 1
    lines = outcome.out.splitlines()
    assert lines[0] == (
        f"{EXPOCODE}  new, revision 1: 2 rows in, 2 kept, 0 rejected; 0 findings; no sources given, so no sample is"
        " tagged"
    )
    assert lines[1].startswith("refused  empty.csv: found an empty file")
    assert lines[2].startswith(
        "refused  spoiled_hy1.csv, line 4: the EXPOCODE '3.2062E+11' was turned into a number"
    )
    assert lines[3] == f"1 cruise written, 2 deliveries refused. The tables are in {archive}."
    assert outcome.err == ""
    summary = json.loads((tmp_path / "summary.json").read_text(encoding="utf-8"))
    assert [refusal["reason"] for refusal in summary["refused"]] == ["empty-file", "spoiled-expocode"]
    kept = {path.name for path in (archive / "raw").glob("*/*")}
    assert {hashlib.sha256(path.read_bytes()).hexdigest() for path in inbox.glob("[!.]*")} <= kept


def test_a_delivery_after_the_inbox_was_emptied_adds_to_the_cruise(inbox: Path, tmp_path: Path) -> None:
    archive = tmp_path / "archive"
    (inbox / "a_hy1.csv").write_bytes(bottle_file({}, {}))
    call("run", inbox, "--archive", archive)
    (inbox / "a_hy1.csv").unlink()
    (inbox / "a_ct1.zip").write_bytes(zipped({"a_ct1.csv": cast_file()}))
    outcome = call("run", inbox, "--archive", archive)
    assert outcome.out.startswith(f"{EXPOCODE}  revised, revision 2: 4 rows in, 4 kept")
    assert len(samples(archive)) == 2
    assert pq.read_metadata(archive / f"superseded/{EXPOCODE}/r0001/samples.parquet").num_rows == 2
    assert call("run", inbox, "--archive", archive).out.splitlines()[-1].startswith("Nothing was new")


def test_a_reissue_replaces_the_earlier_edition(inbox: Path, tmp_path: Path) -> None:
    archive = tmp_path / "archive"
    (inbox / "a_hy1.csv").write_bytes(bottle_file({}, {}, {}))
    call("run", inbox, "--archive", archive)
    (inbox / "a_hy1.csv").unlink()
    (inbox / "a_second_hy1.csv").write_bytes(bottle_file({}, {"NITRAT": "31.00"}))
    outcome = call("run", inbox, "--archive", archive)
    assert "revised, revision 2: 2 rows in" in outcome.out
    assert [row["nitrate"] for row in samples(archive)] == [30.0, 31.0]


def test_two_editions_in_one_inbox_are_refused_and_both_named(inbox: Path, tmp_path: Path) -> None:
    (inbox / "a_hy1.csv").write_bytes(bottle_file({}, {}))
    (inbox / "b_hy1.csv").write_bytes(bottle_file({"NITRAT": "31.00"}))
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 1
    assert "a_hy1.csv and b_hy1.csv: both hold 1 of the same samples of cruise" in outcome.out
    assert not list((tmp_path / "archive/samples").iterdir())


def test_two_files_of_one_cruise_that_share_nothing_are_one_cruise(inbox: Path, tmp_path: Path) -> None:
    (inbox / "leg_a_hy1.csv").write_bytes(bottle_file({}, {}))
    (inbox / "leg_b_hy1.csv").write_bytes(bottle_file({"STNNBR": "2"}))
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 0
    assert [row["station"] for row in samples(tmp_path / "archive")] == ["1", "1", "2"]


def test_the_same_bytes_twice_are_read_once(inbox: Path, tmp_path: Path) -> None:
    for name in ("a_hy1.csv", "copy_of_a_hy1.csv"):
        (inbox / name).write_bytes(bottle_file())
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 0
    assert "note  copy_of_a_hy1.csv: the same bytes as a_hy1.csv; read once." in outcome.out


def test_two_cruises_in_one_file_become_two_cruises(inbox: Path, tmp_path: Path) -> None:
    (inbox / "both_hy1.csv").write_bytes(
        bottle_file({}, {"EXPOCODE": "316N138/12"}, {"EXPOCODE": "316N138/12"})
    )
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 0
    assert "316N138/12  new, revision 1: 2 rows in, 2 kept" in outcome.out
    assert call("show", tmp_path / "archive", "316N138/12").status == 0


def test_a_refused_member_is_told_every_time(inbox: Path, tmp_path: Path) -> None:
    (inbox / "a_ct1.zip").write_bytes(zipped({"a_ct1.csv": cast_file(), "../b_ct1.csv": cast_file()}))
    first = call("run", inbox, "--archive", tmp_path / "archive")
    again = call("run", inbox, "--archive", tmp_path / "archive")
    assert (first.status, again.status) == (1, 1)
    assert "unchanged" in again.out
    for outcome in (first, again):
        assert "a_ct1.zip: the member '../b_ct1.csv' has a path in its name" in outcome.out
    assert sorted(path.name for path in tmp_path.iterdir()) == ["archive", "inbox"]


def test_a_changed_setting_makes_cruises_anew(inbox: Path, tmp_path: Path) -> None:
    (inbox / "a_hy1.csv").write_bytes(bottle_file())
    (tmp_path / "settings.toml").write_text("[use]\nwater_flags = [2]\n", encoding="utf-8")
    archive = tmp_path / "archive"
    call("run", inbox, "--archive", archive)
    outcome = call("run", inbox, "--archive", archive, "--settings", tmp_path / "settings.toml")
    assert "revised, revision 2" in outcome.out


@pytest.mark.parametrize(
    ("arguments", "status", "words"),
    [
        (["run", "nowhere", "--archive", "archive"], 2, "seawhence: nowhere: there is no such directory"),
        (["run", "inbox"], 2, "the following arguments are required: --archive"),
        (["run", "inbox", "--archive", "archive", "--sources", "none.toml"], 2, "none.toml"),
        (["show", "nowhere"], 2, "nowhere: there is no archive here"),
        (["dance"], 2, "invalid choice: 'dance'"),
        ([], 2, "the following arguments are required: COMMAND"),
    ],
)
def test_wrong_usage(
    arguments: list[str],
    status: int,
    words: str,
    inbox: Path,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.chdir(tmp_path)
    outcome = call(*arguments)
    assert outcome.status == status
    assert words in outcome.err
    assert outcome.out == ""
    assert inbox.is_dir()


@pytest.mark.parametrize("command", [[], ["run"], ["check"], ["show"]])
def test_help_has_an_example_or_lists_the_commands(command: list[str]) -> None:
    outcome = call(*command, "--help")
    assert outcome.status == 0
    assert "example:\n  seawhence" in outcome.out or not command
    assert all(len(line) <= 120 for line in outcome.out.splitlines())


def test_check_writes_nothing_and_tells_all(inbox: Path, tmp_path: Path) -> None:
    (inbox / "a_hy1.csv").write_bytes(bottle_file({"SALNTY": "12623"}, {"STNNBR": ""}))
    before = hashes(tmp_path)
    text = call("check", inbox / "a_hy1.csv")
    assert text.status == 0
    assert text.out.splitlines()[0] == f"a_hy1.csv: bottle file of {EXPOCODE}; 2 rows, 1 kept, 1 rejected"
    assert "  fault     a_hy1.csv, line 4: SALNTY is 12623, off by more than the whole range" in text.out
    said = json.loads(call("check", inbox / "a_hy1.csv", "--format", "json").out)["files"][0]
    assert (said["rows"], said["kept"], said["rejected"]) == (2, 1, 1)
    assert said["rejects"][0]["reason"] == "no-station"
    assert said["findings"][0]["check"] == "gross-range"
    assert hashes(tmp_path) == before


def test_check_of_a_file_that_is_not_there(tmp_path: Path) -> None:
    outcome = call("check", tmp_path / "none.csv")
    assert outcome.status == 1
    assert "the file cannot be read (No such file or directory)" in outcome.out


def test_show_tells_where_a_cruise_came_from(inbox: Path, tmp_path: Path) -> None:
    (inbox / "a_hy1.csv").write_bytes(bottle_file())
    call("run", inbox, "--archive", tmp_path / "archive", "--sources", FIXTURES / "sources.toml")
    whole = call("show", tmp_path / "archive")
    assert whole.out.splitlines()[1].split()[:3] == [EXPOCODE, "1", "1"]
    one = call("show", tmp_path / "archive", EXPOCODE)
    assert one.out.startswith(f"{EXPOCODE}, revision 1\n")
    assert "a_hy1.csv  bottle" in one.out
    assert "samples by tag" in one.out
    assert "100.0 %" in one.out


def test_a_fault_of_ours_is_told_and_the_other_cruises_go_on(
    inbox: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (inbox / "a_hy1.csv").write_bytes(bottle_file())
    (inbox / "b_hy1.csv").write_bytes(bottle_file({"EXPOCODE": "ZZV220210301"}))

    def broken(expocode: str, *arguments: object) -> object:
        if expocode == EXPOCODE:
            raise ZeroDivisionError("planted")
        return process_cruise(expocode, *arguments)  # type: ignore[arg-type]

    from flows.large import AtOnce  # noqa: PLC0415
    from pipeline.process import process_cruise  # noqa: PLC0415

    monkeypatch.setattr(AtOnce, "process", staticmethod(broken))
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 3
    assert (
        f"{EXPOCODE}  failed: a fault of seawhence, not of the files: ZeroDivisionError: planted"
        in outcome.out
    )
    assert "ZZV220210301  new, revision 1" in outcome.out


def test_an_archive_held_by_another_run_is_left_alone(inbox: Path, tmp_path: Path) -> None:
    from pipeline.archive import locked, open_archive  # noqa: PLC0415

    (inbox / "a_hy1.csv").write_bytes(bottle_file())
    with locked(open_archive(tmp_path / "archive", create=True)):
        code = "import sys; from flows.cli import main; sys.exit(main(sys.argv[1:]))"
        done = subprocess.run(
            [sys.executable, "-c", code, "run", str(inbox), "--archive", str(tmp_path / "archive")],
            capture_output=True, text=True, check=False, cwd=ROOT, env={**os.environ},
        )  # fmt: skip
    assert done.returncode == 2
    assert ".lock: held by process" in done.stderr


def test_an_archive_in_the_inbox_is_no_delivery(inbox: Path) -> None:
    (inbox / "a_hy1.csv").write_bytes(bottle_file())
    for _ in range(2):
        outcome = call("run", inbox, "--archive", inbox / "archive")
        assert outcome.status == 0
    assert outcome.out.splitlines()[-1].startswith("Nothing was new")


def test_an_inbox_in_the_archive_is_refused(inbox: Path) -> None:
    outcome = call("run", inbox, "--archive", inbox.parent)
    assert outcome.status == 2
    assert "the inbox lies in the archive" in outcome.err


def test_a_pipe_in_the_inbox_is_refused_and_nothing_waits_for_it(inbox: Path, tmp_path: Path) -> None:
    (inbox / "a_hy1.csv").write_bytes(bottle_file())
    os.mkfifo(inbox / "pipe.csv")
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 1
    assert "pipe.csv: found no regular file; deliver the cruise as a file." in outcome.out
    assert f"{EXPOCODE}  new" in outcome.out


def test_a_file_that_was_only_renamed_changes_nothing(inbox: Path, tmp_path: Path) -> None:
    (inbox / "a_hy1.csv").write_bytes(bottle_file())
    call("run", inbox, "--archive", tmp_path / "archive")
    (inbox / "a_hy1.csv").rename(inbox / "b_hy1.csv")
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.out.splitlines()[-1].startswith("Nothing was new")


def test_forgetting_the_sources_keeps_those_the_archive_was_made_with(inbox: Path, tmp_path: Path) -> None:
    (inbox / "a_hy1.csv").write_bytes(bottle_file())
    archive = tmp_path / "archive"
    call("run", inbox, "--archive", archive, "--sources", FIXTURES / "sources.toml")
    assert call("run", inbox, "--archive", archive).out.splitlines()[-1].startswith("Nothing was new")
    (inbox / "b_hy1.csv").write_bytes(bottle_file({"EXPOCODE": "ZZV220210301"}))
    outcome = call("run", inbox, "--archive", archive)
    (line,) = [line for line in outcome.out.splitlines() if line.startswith("ZZV220210301  new")]
    assert line.endswith("; 0 of 1 samples tagged")


def test_what_a_table_was_made_with_can_be_read_from_the_archive(inbox: Path, tmp_path: Path) -> None:
    (inbox / "a_hy1.csv").write_bytes(bottle_file())
    (tmp_path / "settings.toml").write_text('[tracers]\nn_star = "gruber_sarmiento_1997"\n', encoding="utf-8")
    archive = tmp_path / "archive"
    call("run", inbox, "--archive", archive, "--settings", tmp_path / "settings.toml")
    schema = pq.read_schema(archive / f"samples/{EXPOCODE}.parquet")
    assert schema.field("n_star").metadata[b"form"] == b"gruber_sarmiento_1997"
    sha256 = json.loads(schema.metadata[b"seawhence"])["settings_sha256"]
    kept = json.loads((archive / f"raw/{sha256[:2]}/{sha256}").read_text(encoding="utf-8"))
    assert kept["tracers"]["n_star"] == "gruber_sarmiento_1997"


def test_a_reissue_that_lost_rows_says_so(inbox: Path, tmp_path: Path) -> None:
    (inbox / "a_hy1.csv").write_bytes(bottle_file({}, {}, {}))
    call("run", inbox, "--archive", tmp_path / "archive")
    (inbox / "a_hy1.csv").write_bytes(bottle_file({}))
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert "no sample is tagged; doubt: revision 1 had 3 samples, this one has 1" in outcome.out


def test_an_unchanged_cruise_keeps_its_tags_in_the_summary(inbox: Path, tmp_path: Path) -> None:
    (inbox / "a_hy1.csv").write_bytes((FIXTURES / "inbox/ZZV519960914_hy1.csv").read_bytes())
    said = []
    for _ in range(2):
        call(
            "run", inbox, "--archive", tmp_path / "archive", "--sources", FIXTURES / "sources.toml",
            "--summary", tmp_path / "summary.json",
        )  # fmt: skip
        said.append(json.loads((tmp_path / "summary.json").read_text(encoding="utf-8"))["cruises"][0])
    assert said[0]["tagged"] > 0
    assert [(one["tagged"], one["resolved"]) for one in said] == [(said[0]["tagged"], True)] * 2


def test_file_names_that_are_no_text_are_shown_as_text(inbox: Path, tmp_path: Path) -> None:
    (inbox / os.fsdecode(b"bad\xff\nname_hy1.csv")).write_bytes(bottle_file())
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 0
    assert samples(tmp_path / "archive")[0]["file"] == r"bad\xff\x0aname_hy1.csv"
    checked = call("check", inbox / os.fsdecode(b"bad\xff\nname_hy1.csv"))
    assert checked.out.startswith(r"bad\xff\x0aname_hy1.csv: bottle file of")


def test_another_archive_in_the_inbox_is_no_delivery(inbox: Path, tmp_path: Path) -> None:
    (inbox / "a_hy1.csv").write_bytes(bottle_file())
    call("run", inbox, "--archive", inbox / "other")
    outcome = call("run", inbox, "--archive", tmp_path / "archive")
    assert outcome.status == 0
    assert "refused" not in outcome.out


def test_an_interrupt_that_is_swallowed_stops_the_run_at_the_next_cruise() -> None:
    before = signal.getsignal(signal.SIGINT)
    with stoppable() as stop_if_asked:
        stop_if_asked()
        with suppress(KeyboardInterrupt):  # as a library may do
            signal.raise_signal(signal.SIGINT)
        with pytest.raises(KeyboardInterrupt):
            stop_if_asked()
    assert signal.getsignal(signal.SIGINT) is before


def test_jobs_are_packed_by_bytes_in_their_order() -> None:
    from pipeline.archive import DeliveredFile  # noqa: PLC0415

    def job(name: str, size: int) -> Job:
        return Job(name, (), (DeliveredFile(name, "", size, "bottle", 0, 0, 0),))

    jobs = [job(str(number), 10) for number in range(100)]
    batches = pack(jobs, most_batches=4, least_bytes=1)
    assert [job for batch in batches for job in batch] == jobs
    assert [len(batch) for batch in batches] == [25] * 4
    assert len(pack(jobs, most_batches=40, least_bytes=500)) == 2
    assert pack([], 4, 1) == []
