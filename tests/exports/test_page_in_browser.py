"""The page in headless Chromium: what a reader does with pointer and keyboard."""

from __future__ import annotations

import os
import shutil
import subprocess
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from mapper.exports.contents import read_table
from mapper.exports.words import number

pytestmark = [
    pytest.mark.browser,
    pytest.mark.filterwarnings("ignore::DeprecationWarning"),
    pytest.mark.filterwarnings("ignore::ResourceWarning"),
]

CONTROLS = "button, a[href], [tabindex='0'], input, select"


def _missing(what: str) -> None:
    if os.environ.get("CI"):
        pytest.fail(f"{what} is missing")
    pytest.skip(f"{what} is missing")


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    path = shutil.which("chromium")
    if path is None:
        _missing("chromium (apt-get install chromium)")
    from playwright.sync_api import sync_playwright

    with sync_playwright() as play:
        found = play.chromium.launch(executable_path=path, args=["--no-sandbox", "--disable-gpu"])
        yield found
        found.close()


@pytest.fixture
def opened(browser: Any, island_run: Path) -> Iterator[Any]:
    yield from _open(browser, island_run)


def _open(browser: Any, folder: Path, width: int = 1280) -> Iterator[Any]:
    page = browser.new_page(viewport={"width": width, "height": 900})
    page.told, page.asked = [], []
    page.on("console", lambda message: page.told.append(message.text))
    page.on("pageerror", lambda problem: page.told.append(str(problem)))
    page.on("dialog", lambda dialog: (page.told.append(dialog.message), dialog.dismiss()))
    page.on("request", lambda request: page.asked.append(request.url))
    page.goto((folder / "report.html").as_uri())
    page.evaluate("window.mapReady")
    yield page
    page.close()


def test_the_page_opens_without_a_complaint_or_a_request(opened: Any) -> None:
    assert opened.told == []
    assert [url for url in opened.asked if not url.startswith(("file:", "data:"))] == []


def test_unkind_names_run_nothing(browser: Any, unkind_run: Path) -> None:
    for page in _open(browser, unkind_run):
        for button in page.locator("#regions .name").all():
            button.click()
        assert page.told == []


def test_the_pointer_reads_what_the_table_holds(opened: Any, island_run: Path) -> None:
    table = read_table(island_run / "tables" / "regions.csv").by_region
    for name in ("D08", "D05"):
        opened.locator("#regions .name", has_text=name).hover()
        spot = opened.evaluate(
            """name => { const at = JSON.parse(document.getElementById("map-data").textContent)
              .regions.indexOf(name), path = document.querySelector(`#shapes [data-r="${at}"]`);
              const box = path.getBBox(), view = document.getElementById("view");
              const seen = view.getBoundingClientRect(), full = view.viewBox.baseVal;
              for (let i = 1; i < 20; i++) for (let j = 1; j < 20; j++) {
                const p = view.createSVGPoint();
                p.x = box.x + box.width * i / 20; p.y = box.y + box.height * j / 20;
                if (path.isPointInFill(p)) return [seen.x + p.x / full.width * seen.width,
                  seen.y + p.y / full.height * seen.height]; } }""",
            name,
        )
        opened.mouse.move(*spot)
        told = opened.locator("#reading").inner_text()
        assert f"{name}: drawdown {number(table[name]['drawdown_t_per_yr'])} t" in told
        assert f"{number(table[name]['drawdown_t_per_km2_yr'])} t per km²" in told
        assert "Rock:" in told
        row = opened.locator("#regions tbody tr", has_text=name)
        assert "over" in (row.get_attribute("class") or "")


def test_a_cell_reads_what_the_map_holds(opened: Any, island_run: Path) -> None:
    import rasterio

    with rasterio.open(island_run / "maps" / "drawdown.tif") as dataset:
        cells = dataset.read(1)
    row, col = 380, 730
    box = opened.locator("#view").bounding_box()
    x = box["x"] + (col + 0.5) / cells.shape[1] * box["width"]
    y = box["y"] + (row + 0.5) / cells.shape[0] * box["height"]
    opened.mouse.move(x, y)
    near = {f"{value:.3g}" for value in cells[row - 1 : row + 2, col - 1 : col + 2].ravel()}
    told = opened.locator("#reading").inner_text()
    read = told.split("Drawdown, long term: ")[1].split(" ")[0]
    assert f"{float(read):.3g}" in near


def test_headings_sort_the_table_and_say_so(opened: Any) -> None:
    head = opened.locator("#regions thead th").nth(4)
    for state in ("descending", "ascending"):
        head.locator("button").click()
        assert head.get_attribute("aria-sort") == state
        texts = opened.locator("#regions tbody tr td:nth-child(5)").all_inner_texts()
        values = [float(text.split()[0].replace(",", "")) for text in texts]
        assert values == sorted(values, reverse=state == "descending")
    opened.locator("#regions thead th").nth(2).locator("button").click()
    names = opened.locator("#regions .name").all_inner_texts()
    assert names == sorted(names)


def test_a_region_chosen_in_the_table_is_marked_on_the_map(opened: Any) -> None:
    opened.locator("#regions .name", has_text="D03").click()
    assert opened.locator("#shapes path.chosen").count() == 1
    assert opened.locator("#regions .name[aria-pressed=true]").inner_text() == "D03"


def test_the_switch_changes_picture_and_legend(opened: Any) -> None:
    for name in ("consumption", "flags", "rock", "drawdown"):
        opened.locator(f"[data-layer={name}]").click()
        assert opened.locator("#view image:not(.off)").get_attribute("id") == f"layer-{name}"
        assert opened.locator(".legend:visible").get_attribute("id") == f"legend-{name}"


def test_each_control_is_reached_by_tab(opened: Any) -> None:
    wanted = opened.locator(CONTROLS).count()
    seen = set()
    for _ in range(wanted + 5):
        opened.keyboard.press("Tab")
        seen.add(
            opened.evaluate(
                f'Array.from(document.querySelectorAll("{CONTROLS}"))'
                ".indexOf(document.activeElement)"
            )
        )
    assert set(range(wanted)) <= seen


def test_arrow_keys_read_the_map(opened: Any) -> None:
    opened.locator("#view").focus()
    opened.keyboard.press("ArrowRight")
    first = opened.locator("#reading").inner_text()
    assert "Drawdown, long term:" in first
    opened.keyboard.press("Shift+ArrowDown")
    assert opened.locator("#reading").inner_text() != first
    opened.keyboard.press("+")
    assert float(opened.locator("#view").get_attribute("viewBox").split()[2]) < 1000
    opened.keyboard.press("0")
    assert float(opened.locator("#view").get_attribute("viewBox").split()[2]) == 1000


@pytest.mark.parametrize("width", [1280, 390])
def test_nothing_hangs_over_the_side(browser: Any, unkind_run: Path, width: int) -> None:
    for page in _open(browser, unkind_run, width):
        assert page.evaluate("document.documentElement.scrollWidth") == width


def test_print_leaves_out_controls_and_shows_whole_tables(opened: Any) -> None:
    opened.emulate_media(media="print")
    for control in ("nav", ".layers", ".zoom", "#reading"):
        assert not opened.locator(control).is_visible(), control
    box = opened.locator(".tall")
    assert box.evaluate("one => one.scrollHeight <= one.clientHeight + 1")


def test_hot_spots_are_switched_on_and_off(opened: Any) -> None:
    button = opened.locator("#spots-button")
    assert "off" in opened.locator("#spots").get_attribute("class")
    button.click()
    assert button.get_attribute("aria-pressed") == "true"
    assert opened.locator("#spots").get_attribute("class") == ""


@pytest.mark.parametrize("width", [1280, 390])
def test_axe_finds_no_serious_fault(browser: Any, island_run: Path, width: int) -> None:
    script = _axe()
    for page in _open(browser, island_run, width):
        page.evaluate(script.read_text(encoding="utf-8"))
        found = page.evaluate("axe.run()")
        grave = [
            (one["id"], one["nodes"][0]["html"][:200])
            for one in found["violations"]
            if one["impact"] in ("serious", "critical")
        ]
        assert grave == []


def _axe() -> Path:
    places = [os.environ.get("AXE_CORE", ""), "node_modules/axe-core/axe.min.js"]
    npm = shutil.which("npm")
    if npm:
        root = subprocess.run([npm, "root", "-g"], capture_output=True, text=True, check=False)
        places.append(f"{root.stdout.strip()}/axe-core/axe.min.js")
    for place in places:
        if place and Path(place).is_file():
            return Path(place)
    _missing("axe-core (npm install -g axe-core, or AXE_CORE=.../axe.min.js)")
    raise AssertionError
