"""The pages in a browser: what a reader sees, with the mouse, with the keyboard, on a telephone and in the dark.

Chromium of the system is used; where there is none the tests are skipped, or fail if SEAWHENCE_BROWSER_REQUIRED=1.
SEAWHENCE_BROWSER names another one, SEAWHENCE_SCREENSHOTS a directory that keeps pictures of the pages, SEAWHENCE_AXE
the file axe.min.js (``npm install axe-core``); without it npm fetches it.
"""

from __future__ import annotations

import os
import shutil
import subprocess
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow.parquet as pq
import pytest

from tests.reporting.invented import EXPOCODE, FORMULA, SCRIPT

if TYPE_CHECKING:
    from collections.abc import Iterator

    from playwright.sync_api import Browser, Dialog
    from playwright.sync_api import Page as Tab

REQUIRED = os.environ.get("SEAWHENCE_BROWSER_REQUIRED") == "1"
CHROMIUM = os.environ.get("SEAWHENCE_BROWSER") or shutil.which("chromium") or shutil.which("chromium-browser")
AXE = "axe-core@4.10.3"
WIDTHS = (400, 800, 1600)
PAGES = ("index.html", f"cruise_{EXPOCODE}.html")


def without(reason: str) -> None:
    """Skip, or fail where a browser has to be there."""
    if REQUIRED:
        pytest.fail(f"SEAWHENCE_BROWSER_REQUIRED=1, but {reason}")
    pytest.skip(reason)


@pytest.fixture(scope="module")
def browser() -> Iterator[Browser]:
    if CHROMIUM is None:
        without("no chromium was found (apt-get install chromium, or SEAWHENCE_BROWSER=/path)")
    from playwright.sync_api import sync_playwright  # noqa: PLC0415 - only where there is a browser

    with sync_playwright() as driver:
        # in a container there is no sandbox inside the sandbox; the pages are our own
        started = driver.chromium.launch(executable_path=CHROMIUM, args=["--no-sandbox"])
        yield started
        started.close()


@contextmanager
def opened(browser: Browser, path: Path, width: int = 1200, scheme: Any = "light") -> Iterator[Tab]:
    """Open a page, wait until it is drawn, and afterwards assert that nothing went wrong in it."""
    tab = browser.new_page(viewport={"width": width, "height": 900}, color_scheme=scheme)
    said: list[str] = []
    tab.on(
        "console", lambda message: said.append(message.text) if message.type in {"error", "warning"} else None
    )
    tab.on("pageerror", lambda error: said.append(str(error)))
    tab.on("dialog", lambda dialog: _refuse(dialog, said))
    asked: list[str] = []
    tab.on("request", lambda request: asked.append(request.url))
    tab.goto(path.as_uri())
    tab.wait_for_selector("html[data-ready=yes]", state="attached", timeout=60_000)
    yield tab
    assert said == []
    # what a page draws into itself is no request
    assert [url for url in asked if not url.startswith(("data:", "blob:"))] == [path.as_uri()]
    tab.close()


def _refuse(dialog: Dialog, said: list[str]) -> None:
    said.append(f"a dialog opened: {dialog.message}")
    dialog.dismiss()


@pytest.fixture
def tab(browser: Browser, pages: Path) -> Iterator[Tab]:
    with opened(browser, pages / f"cruise_{EXPOCODE}.html") as page:
        yield page


def marked(tab: Tab) -> list[int]:
    return sorted(tab.evaluate("[...marks.rows]"))


@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("name", PAGES)
def test_nothing_is_cut_or_lies_over_another(
    browser: Browser, pages: Path, name: str, width: int, scheme: str
) -> None:
    with opened(browser, pages / name, width, scheme) as tab:
        wide, room = tab.evaluate(
            "[document.documentElement.scrollWidth, document.documentElement.clientWidth]"
        )
        assert wide <= room
        boxes = [box for box in (place.bounding_box() for place in tab.locator(".plot").all()) if box]
        assert len(boxes) >= 2
        for box in boxes:
            assert box["width"] > 200
            assert box["x"] >= 0
            assert box["x"] + box["width"] <= width
        for k, one in enumerate(boxes):
            assert not [other for other in boxes[k + 1 :] if _overlap(one, other)]
        # the drawing fills its place, and no more
        sizes = tab.evaluate(
            "[...document.querySelectorAll('.plot')].map(p => [p.firstElementChild.offsetWidth, p.clientWidth,"
            " p.firstElementChild.offsetHeight, p.clientHeight])"
        )
        assert all(inner <= outer and high <= place for inner, outer, high, place in sizes)
        _kept(tab, f"{Path(name).stem}_{width}_{scheme}", full_page=True)


def _kept(tab: Tab, name: str, *, full_page: bool = False) -> None:
    """Keep a picture of the page where the environment names a directory for them."""
    if folder := os.environ.get("SEAWHENCE_SCREENSHOTS"):
        Path(folder).mkdir(parents=True, exist_ok=True)
        tab.screenshot(path=Path(folder) / f"{name}.png", full_page=full_page)


def _overlap(one: Any, other: Any) -> bool:
    return bool(
        one["x"] < other["x"] + other["width"] - 1
        and other["x"] < one["x"] + one["width"] - 1
        and one["y"] < other["y"] + other["height"] - 1
        and other["y"] < one["y"] + one["height"] - 1
    )


def test_names_that_look_like_script_or_formula_are_shown_as_text(tab: Tab) -> None:
    options = tab.locator("#choose-station option").all_text_contents()
    assert {SCRIPT, FORMULA} <= set(options)
    tab.select_option("#choose-station", label=SCRIPT)
    assert tab.locator("#see-station").text_content().startswith(f"Station {SCRIPT} at ")  # type: ignore[union-attr]
    assert tab.locator("#station-table caption").text_content() == f"Station {SCRIPT}, from the surface down"
    tab.click("#mark-station")
    assert len(marked(tab)) == 10
    # pointing at one of its samples: words in the figure's own note, and no element made of them
    tab.locator("#plot-waters").scroll_into_view_if_needed()
    x, y = tab.evaluate("pixelOf('waters', [...marks.rows][5])")
    tab.mouse.move(x, y)
    _kept(tab, "pointed")
    tab.wait_for_timeout(300)
    assert tab.evaluate("document.querySelectorAll('script').length") == 4
    assert tab.get_by_text(f"Station {SCRIPT}, sample 6, 1200 dbar").first.is_visible()


def test_what_is_clicked_in_one_figure_is_marked_in_all(tab: Tab) -> None:
    tab.locator("#plot-waters").scroll_into_view_if_needed()
    row = 25
    x, y = tab.evaluate(f"pixelOf('waters', {row})")
    tab.mouse.click(x, y)
    tab.wait_for_timeout(300)
    assert row in marked(tab)
    chosen = tab.evaluate(
        "[...figures].filter(([id]) => ['waters', 'section', 'residual'].includes(id)).map(([, {layers}]) =>"
        " layers.flatMap(({source}) => source.selected.indices.map(index => source.data.row[index])))"
    )
    assert len(chosen) == 3
    assert all(row in rows for rows in chosen)
    assert "Marked: " in (tab.locator("#marked-count").text_content() or "")
    # a marked sample's station is the one that is shown
    name = tab.evaluate(f"page.casts.name[page.samples.cast[{row}]]")
    assert len({tab.evaluate(f"page.samples.cast[{one}]") for one in marked(tab)}) > 1 or (
        tab.locator("#choose-station option:checked").text_content() == name
    )


def test_a_box_marks_what_lies_in_it(tab: Tab) -> None:
    tab.locator("#plot-section").scroll_into_view_if_needed()
    box = tab.locator("#plot-section").bounding_box()
    assert box
    x, y = tab.evaluate("pixelOf('section', rowsOfCast[page.sections[0].casts[4]][8])")
    tab.mouse.move(x - 25, y - 60)
    tab.mouse.down()
    tab.mouse.move(x + 25, y + 60, steps=6)
    tab.mouse.up()
    tab.wait_for_timeout(300)
    rows = marked(tab)
    assert 1 <= len(rows) <= 4
    assert tab.evaluate("rowsOfCast[page.sections[0].casts[4]][8]") in rows
    tab.click("#unmark")
    assert marked(tab) == []


def test_figures_by_keyboard(tab: Tab, archive: Path) -> None:
    tab.locator("#plot-section").focus()
    for _ in range(3):
        tab.keyboard.press("ArrowDown")
    tab.keyboard.press("ArrowRight")
    tab.keyboard.press("Enter")
    (row,) = marked(tab)
    samples = pq.read_table(archive / "samples" / f"{EXPOCODE}.parquet").to_pandas()
    assert samples["station"][row] == SCRIPT
    said = tab.locator("#pointed").text_content() or ""
    assert said.startswith(
        f"Station {SCRIPT}, sample {samples['sample'][row]}, {samples['pressure'][row]:g} dbar: "
    )
    mixtures = pq.read_table(archive / "mixtures" / f"{EXPOCODE}.parquet").to_pandas()
    mine = mixtures[(mixtures["station"] == SCRIPT) & (mixtures["sample"] == samples["sample"][row])]
    most = mine.nlargest(1, "share").iloc[0]
    assert f"Sources: {most['source']} {most['share']:.2f} ± {most['share_uncertainty']:.2f}" in said
    tab.keyboard.press("Shift+Enter")
    assert len(marked(tab)) == 10
    tab.keyboard.press("Escape")
    assert marked(tab) == []


def test_every_choice_of_the_section_is_drawn_and_told(tab: Tab, archive: Path) -> None:
    samples = pq.read_table(archive / "samples" / f"{EXPOCODE}.parquet").to_pandas()
    for vertical in ("depth", "upper", "sigma0", "sigma2", "deep"):
        tab.select_option("#choose-vertical", vertical)
        for key in tab.evaluate("[...quantities.keys()].filter((_, k) => k % 6 === 0)"):
            tab.select_option("#choose-quantity", key)
        assert tab.evaluate("Number.isFinite(section.figure.x_range.end)")
    tab.select_option("#choose-quantity", "silicate")
    most, least = samples["silicate"].idxmax(), samples["silicate"].idxmin()
    told = tab.locator("#see-section").text_content() or ""
    assert f"{samples['silicate'][least]:.4g} µmol kg⁻¹ (station {samples['station'][least]}, " in told
    assert f"to {samples['silicate'][most]:.4g} µmol kg⁻¹ (station {samples['station'][most]}, " in told


def test_grid_is_straight_between_data_and_empty_elsewhere(tab: Tab) -> None:
    # casts at 0, 10, 20 and 100 km; v = x + y where there are data, none between 300 and 900 m at 20 km
    x = [0] * 4 + [10] * 4 + [20] * 2 + [100] * 4
    y = [100, 200, 300, 400] * 2 + [100, 900] + [100, 200, 300, 400]
    found = tab.evaluate(
        "([x, y]) => {const v = x.map((a, k) => a + y[k]); const grid = gridded(profilesAt(x, y, v),"
        " {x0: -10, x1: 110, y0: 0, y1: 1000, nx: 120, ny: 100, gap: () => 350});"
        " return [...grid.values].map(value => Number.isFinite(value) ? value : null)}",
        [x, y],
    )
    grid = np.array(found, dtype=float).reshape(100, 120)
    across, down = np.arange(120) - 9.5, np.arange(100) * 10.0 + 5.0
    wanted = across[None, :] + down[:, None]
    inner = grid[10:40, 10:20]  # between the first two casts, 100 to 400 m
    np.testing.assert_allclose(inner, wanted[10:40, 10:20])
    assert np.isnan(grid[:10]).all()  # above the first sample
    assert np.isnan(grid[40:]).all()  # below the last ones, and over the gap of 800 m
    assert np.isnan(grid[:, 40:100]).all()  # between casts that are 80 km apart, where 10 are usual
    assert np.isnan(grid[:, :10]).all()  # outside the section
    assert np.isfinite(grid[15, 20:25]).all()  # beside a cast up to half of the usual distance
    assert np.isnan(grid[15, 30])
    # against density, too, it is the depth that tells whether two samples are near each other
    between = "(z) => atLevels(profilesAt([0, 0], [36, 37], [1, 2], z)[0], [36.5], depthGap)[0]"
    assert tab.evaluate(between, [1000, 1300]) == pytest.approx(1.5)
    assert np.isnan(tab.evaluate(between, [1000, 1900]))


@pytest.mark.parametrize("name", PAGES)
def test_no_serious_barrier_for_those_who_read_otherwise(
    browser: Browser, pages: Path, name: str, tmp_path: Path
) -> None:
    axe = _axe(tmp_path)
    for scheme in ("light", "dark"):
        with opened(browser, pages / name, 1200, scheme) as tab:
            tab.evaluate("document.querySelectorAll('details').forEach(one => { one.open = true; })")
            tab.evaluate(axe)
            found = tab.evaluate("axe.run(document, {resultTypes: ['violations']})")
            grave = [one for one in found["violations"] if one["impact"] in {"serious", "critical"}]
            assert [(one["id"], [node["html"] for node in one["nodes"]][:3]) for one in grave] == []


def _axe(folder: Path) -> str:
    """Return the script of axe-core."""
    given = os.environ.get("SEAWHENCE_AXE")
    if given:
        return Path(given).read_text(encoding="utf-8")
    npm = shutil.which("npm")
    if npm is None:
        without("npm, which fetches axe-core, was not found")
        raise AssertionError  # for the reader of types: without() does not return
    made = subprocess.run(
        [npm, "install", "--no-audit", "--no-fund", "--ignore-scripts", "--prefix", str(folder), AXE],
        check=False, capture_output=True, timeout=120,
    )  # fmt: skip
    script = folder / "node_modules" / "axe-core" / "axe.min.js"
    if made.returncode or not script.is_file():
        without(f"npm could not fetch {AXE}")
    return script.read_text(encoding="utf-8")
