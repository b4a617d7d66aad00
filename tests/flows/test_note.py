"""The page that is sent back: what it says, and that nothing in a file can break it."""

from __future__ import annotations

import re
from html.parser import HTMLParser
from typing import TYPE_CHECKING

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from markdown_it import MarkdownIt

from flows.looking import in_line_order
from flows.markdown import escaped, table
from pipeline.findings import Finding, Severity
from tests.flows.conftest import FIXTURES, call
from tests.invented import bottle_file, cast_file, zipped

if TYPE_CHECKING:
    from pathlib import Path

RENDERER = MarkdownIt("commonmark", {"html": True}).enable("table").enable("strikethrough")

HOSTILE = (
    "<script>alert(1)</script>", "a|b|c", "`code` ``two``", "*x* _x_ **x** __x__ ~~x~~", "[a](http://b.c) ![i](j)",
    "&lt; &#124; &amp;", "\\| \\` \\", "# heading", "- item", "+ item", "1. one", "12) two", "---", "===", "> quoted",
    "<!-- x", "```", "~~~", "line\nbreak", "carriage\rreturn", "tab\tbed", "nul\x00", "rtl\u202eoverride", "| --- |",
    "http://invented.example/x", "www.invented.example", "someone@invented.example", "two  spaces", "    indented",
    "$x$", "trailing #", "\u2028separator", "_a_b_", "a_hy1.csv", "-999.00", "35.1 is", "<b>", "]: x", "\ud800",
)  # fmt: skip


class Page(HTMLParser):
    """A rendered page: its tags, the text of each cell, and the text of each item."""

    def __init__(self, html: str) -> None:
        super().__init__(convert_charrefs=True)
        self.tags: list[str] = []
        self.texts: dict[str, list[str]] = {"td": [], "li": [], "h1": [], "h2": [], "p": []}
        self._open: list[str] = []
        self.feed(html)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:  # noqa: ARG002
        self.tags.append(tag)
        self._open.append(tag)
        if tag in self.texts:
            self.texts[tag].append("")

    def handle_endtag(self, tag: str) -> None:
        if self._open and self._open[-1] == tag:
            self._open.pop()

    def handle_data(self, data: str) -> None:
        for tag in ("td", "li", "h1", "h2", "p"):
            if tag in self._open:
                self.texts[tag][-1] += data


def shown(text: str) -> str:
    """Return what a reader should see of a text."""
    seen = text.replace("\n", "\\n").replace("\r", "\\r").replace("\t", "\\t")
    return re.sub(r"\s+", " ", re.sub(r"[^\S ]|[^\x20-\x7e]", lambda m: _code(m[0]), seen)).strip()


def _code(character: str) -> str:
    return character if character.isprintable() else f"\\u{ord(character):04x}"


def seen(text: str) -> str:
    return re.sub(r"\s+", " ", text.replace("\u00a0", " ")).strip()


TEXTS = st.text(st.characters(codec="utf-8"), max_size=40) | st.text(
    "|`*_<>&#-+=~[]()!\\\n 1.ab:/@$", max_size=20
)


@settings(deadline=None, derandomize=True, max_examples=300)
@given(TEXTS)
@example("a | b")
def test_any_text_is_shown_as_it_is_and_breaks_nothing(text: str) -> None:
    cell, item, end = escaped(text, in_cell=True), escaped(text), escaped("after")
    lines = [
        f"# x {item}",
        "",
        f"- {item}",
        f"- {end}",
        "",
        *table([["a", "b"], [cell, end], [end, cell]]),
        "",
        item,
    ]
    assert all("\n" not in line for line in lines)
    page = Page(RENDERER.render("\n".join(lines)))
    allowed = {"h1", "ul", "li", "table", "thead", "tr", "th", "tbody", "td", "p"}
    assert set(page.tags) <= allowed
    assert [seen(one) for one in page.texts["td"]] == [shown(text), "after", "after", shown(text)]
    assert [seen(one) for one in page.texts["li"]] == [shown(text), "after"]
    assert seen(page.texts["h1"][0]) == f"x {shown(text)}".strip()
    assert [seen(one) for one in page.texts["p"]] == ([shown(text)] if shown(text) else [])


@pytest.mark.parametrize("text", HOSTILE)
def test_hostile_cells(text: str) -> None:
    page = Page(RENDERER.render("\n".join(table([["a", "b"], [escaped(text, in_cell=True), "after"]]))))
    assert [seen(one) for one in page.texts["td"]] == [shown(text), "after"]
    assert not {"script", "a", "img", "em", "strong", "code", "del", "b"} & set(page.tags)


def test_a_file_name_is_readable_without_a_renderer() -> None:
    assert escaped("ZZV120090306_hy1.csv, line 4: NITRAT is -7 (35 %)") == (
        "ZZV120090306_hy1.csv, line 4: NITRAT is -7 (35 %)"
    )
    assert escaped("-999 is missing") == "-999 is missing"


def test_what_does_not_show_is_written_as_its_code_on_a_terminal(tmp_path: Path) -> None:
    (tmp_path / "a_hy1.csv").write_bytes(bottle_file({"NITRAT": "\x1b[31m3\u202e"}))
    outcome = call("check", tmp_path / "a_hy1.csv")
    assert all(line.isprintable() for line in outcome.out.splitlines())
    assert r"NITRAT is '\u001b[31m3\u202e'; expected a number" in outcome.out


def page_of(path: Path) -> tuple[str, Page]:
    outcome = call("check", path, "--format", "markdown")
    assert outcome.err == ""
    return outcome.out, Page(RENDERER.render(outcome.out))


def test_the_page_of_a_spoiled_file_says_what_is_wrong_and_asks_for_it(tmp_path: Path) -> None:
    path = tmp_path / "a_hy1.csv"
    path.write_bytes(
        bottle_file(
            {"SALNTY": "12623"}, {"STNNBR": ""}, {"PHSPHT": "2.1?"}, {"NITRAT": "-999.0"},
            units={"OXYGEN": "ML/L", "NITRAT": "umol/kilo"}, extra={"MERCURY": "PMOL/L"},
        )
    )  # fmt: skip
    text, page = page_of(path)
    assert [re.sub(r"\d+", "N", heading) for heading in page.texts["h2"]] == [
        "What we ask of you", "Rows that could not be used: N", "What is wrong: N", "What is doubtful: N",
        "What we assumed, and what else is worth knowing", "What was read",
    ]  # fmt: skip
    items = page.texts["li"]
    assert items[0] == "Please correct the row that could not be used, and send us the whole file again."
    (wrong,) = [
        item for item in items if item.startswith("Please correct what is wrong, or tell us the right")
    ]
    assert "PHSPHT (1 row)" in wrong
    assert "SALNTY (1 row)" in wrong
    assert any(item.startswith("Line 4: SALNTY is 12623") for item in items)
    assert any(item.startswith("Line 3: OXYGEN is in ML/L and was converted: ") for item in items)
    assert "Dates and times were taken as UTC." in items
    assert any(item.startswith("Line 6: PHSPHT is '2.1?'; expected a number") for item in items)
    cells = page.texts["td"]
    assert any(cell.startswith("Line 5: the station (STNNBR) is missing") for cell in cells)
    assert "MERCURY" in text
    assert str(len(path.read_bytes())) in cells
    oxygen = cells.index("Dissolved oxygen of the bottle")
    assert cells[oxygen + 1 : oxygen + 3] == ["OXYGEN", "ML/L"]
    assert cells[oxygen + 3] != "none"
    assert cells[oxygen + 4 : oxygen + 7] == ["2", "1", "2: 3"]  # one has no density


def test_the_same_file_gives_the_same_page(tmp_path: Path) -> None:
    (tmp_path / "a_hy1.csv").write_bytes(bottle_file({"SALNTY": "12623"}))
    assert page_of(tmp_path / "a_hy1.csv")[0] == page_of(tmp_path / "a_hy1.csv")[0]
    assert re.search(r"\b20\d\d-\d\d-\d\d|\d\d:\d\d", page_of(tmp_path / "a_hy1.csv")[0]) is None


def test_a_good_file_is_told_that_nothing_is_asked(tmp_path: Path) -> None:
    (tmp_path / "a_hy1.csv").write_bytes(bottle_file({}, {}))
    _, page = page_of(tmp_path / "a_hy1.csv")
    assert page.texts["li"][0] == "Nothing: we found nothing that is wrong or doubtful."
    assert "What is wrong" not in " ".join(page.texts["h2"])


def test_a_hostile_file_cannot_break_the_page(tmp_path: Path) -> None:
    nasty = "<script>alert(1)</script>|`x`|[a](b)"
    (tmp_path / "a_hy1.csv").write_bytes(
        bottle_file({"NITRAT": nasty[:30]}, {"STNNBR": "", "SECT_ID": nasty}, extra={"*X*<b>|": "<i>|"})
    )
    text, page = page_of(tmp_path / "a_hy1.csv")
    assert not {"script", "a", "b", "i", "code", "em"} & set(page.tags)
    assert any(nasty in cell for cell in page.texts["td"])
    widths = {
        len(re.findall(r"(?<!\\)\|", line)) for line in text.splitlines() if line.startswith("| Practical")
    }
    assert widths == {8}


def test_a_refused_file_gets_its_page_too(tmp_path: Path) -> None:
    path = tmp_path / "notes.txt"
    path.write_bytes(b"<h1>no cruise</h1> | at all\n")
    outcome = call("check", path, "--format", "markdown")
    assert outcome.status == 1
    page = Page(RENDERER.render(outcome.out))
    assert page.texts["h1"] == ["Note on notes.txt"]
    assert any("expected a line that starts with BOTTLE or CTD" in item for item in page.texts["li"])
    assert {"bytes", "SHA-256", "read by"} <= set(page.texts["td"])


def test_several_files_are_pages_one_after_the_other(tmp_path: Path) -> None:
    (tmp_path / "a_hy1.csv").write_bytes(bottle_file())
    (tmp_path / "a_ct1.zip").write_bytes(zipped({"a_ct1.csv": cast_file(), "../b_ct1.csv": cast_file()}))
    outcome = call(
        "check", tmp_path / "a_hy1.csv", tmp_path / "a_ct1.zip", tmp_path / "none", "--format", "markdown"
    )
    assert outcome.status == 1
    page = Page(RENDERER.render(outcome.out))
    names = ("a_hy1.csv", "a_ct1.zip", f"{tmp_path}/none")
    assert page.texts["h1"] == [f"Note on {name}" for name in names]
    assert page.tags.count("hr") == 2


def test_in_a_zip_the_member_is_named_and_units_are_those_of_the_others(tmp_path: Path) -> None:
    spoiled = cast_file(["0.0,2,x,2,35.5000,2", "10.0,2,19.0000,2,35.4000,2"], header={"STNNBR": "2"})
    members = {"a_ct1.csv": cast_file(), "b_ct1.csv": spoiled.replace(b"DBAR,,ITS-90,,PSS-78,\n", b"")}
    (tmp_path / "all_ct1.zip").write_bytes(zipped(members))
    _, page = page_of(tmp_path / "all_ct1.zip")
    assert any(item.startswith("b_ct1.csv, line 13: CTDTMP is 'x'; expected") for item in page.texts["li"])
    assert page.texts["td"][page.texts["td"].index("CTDPRS") + 1] == "DBAR"


def test_a_page_stays_short_however_many_rows_are_spoiled(tmp_path: Path) -> None:
    rows = [{"STNNBR": ""} for _ in range(400)] + [{"PHSPHT": "bad"} for _ in range(400)]
    (tmp_path / "a_hy1.csv").write_bytes(bottle_file(*rows))
    text, _ = page_of(tmp_path / "a_hy1.csv")
    assert "... and 350 more rows (no station 350)." in text
    assert len(text.splitlines()) < 250


def test_findings_of_a_check_come_in_the_order_of_their_lines() -> None:
    def finding(check: str, line: int | None) -> Finding:
        return Finding(check, Severity.DOUBT, f"{check} {line}", file="a", line=line)

    mixed = [finding(*one) for one in [("b", 9), ("a", 3), ("b", None), ("b", 4), ("a", 2)]]
    assert [f.message for f in in_line_order(mixed)] == ["b None", "b 4", "b 9", "a 2", "a 3"]


def test_check_tells_findings_in_the_order_of_their_lines_in_every_form() -> None:
    out = call("check", FIXTURES / "inbox/ZZV120090306_hy1.csv").out
    lines = [int(m[1]) for m in re.finditer(r"line (\d+): \w+ is missing under the good flag", out)]
    assert len(lines) > 1
    assert lines == sorted(lines)


def test_a_file_that_a_description_speaks_for_is_read_with_it(tmp_path: Path) -> None:
    from pipeline.reading import CRUISE_FILE  # noqa: PLC0415

    (tmp_path / "a_hy1.csv").write_bytes(bottle_file())
    (tmp_path / CRUISE_FILE).write_text("[[file", encoding="utf-8")
    outcome = call("check", tmp_path / "a_hy1.csv", "--format", "markdown")
    assert outcome.status == 1
    assert f"not used, because the {CRUISE_FILE} beside it cannot be:" in outcome.out


def test_which_flags_count_as_good_is_that_of_the_settings(tmp_path: Path) -> None:
    (tmp_path / "a_hy1.csv").write_bytes(bottle_file())
    (tmp_path / "settings.toml").write_text(
        "[use]\nwater_flags = [1, 2, 6]\nunflagged = false\n", encoding="utf-8"
    )
    outcome = call(
        "check", tmp_path / "a_hy1.csv", "--format", "markdown", "--settings", tmp_path / "settings.toml"
    )
    assert (
        "water samples under flags 1, 2 and 6 count as good; values without any flag do not." in outcome.out
    )
