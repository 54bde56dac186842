"""The page as a person meets it, in a real browser."""

import os
import shutil
import threading
import time
from pathlib import Path

import pytest
import uvicorn
from page_books import HOSTILE, correct, small_book
from playwright.sync_api import sync_playwright

from driftbook.store.cli.app import run as run_command
from driftbook.store.page import create_app
from driftbook.store.page.serving import listening

CHROMIUM = os.environ.get("CHROMIUM", shutil.which("chromium") or "/usr/bin/chromium")
AXE = Path(os.environ.get("AXE_CORE", "node_modules/axe-core/axe.min.js"))
HERE = ("http://127.0.0.1:", "data:", "file:")
FLAGS = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--no-first-run",
]

pytestmark = [
    pytest.mark.skipif(not Path(CHROMIUM).exists(), reason="there is no Chromium on this machine"),
    pytest.mark.filterwarnings("ignore::ResourceWarning"),
]


@pytest.fixture(scope="module")
def browser():
    with sync_playwright() as driver:
        started = driver.chromium.launch(executable_path=CHROMIUM, args=FLAGS)
        yield started
        started.close()


@pytest.fixture(scope="module")
def serve():
    """Serves books for as long as the module's tests run; gives their addresses."""
    stops = []

    def start(book):
        door = listening(0)
        socket = door.__enter__()
        server = uvicorn.Server(uvicorn.Config(create_app(book), log_level="error"))
        thread = threading.Thread(target=server.run, kwargs={"sockets": [socket]}, daemon=True)
        thread.start()
        stops.append((server, thread, door))
        while not server.started:
            time.sleep(0.01)
        return f"http://127.0.0.1:{socket.getsockname()[1]}"

    yield start
    for server, thread, door in stops:
        server.should_exit = True
        thread.join(5)
        door.__exit__(None, None, None)


@pytest.fixture(scope="module")
def small(tmp_path_factory, serve):
    return serve(small_book(tmp_path_factory.mktemp("small") / "desk.duckdb"))


@pytest.fixture
def page(browser):
    """A page that may ask nobody but this machine and has nothing to complain of."""
    context = browser.new_context(viewport={"width": 1200, "height": 800})
    opened = context.new_page()
    complaints, elsewhere = [], []
    opened.on("console", lambda said: complaints.append(said.text) if said.type in ("error", "warning") else None)
    opened.on("pageerror", lambda error: complaints.append(str(error)))
    opened.on(
        "request",
        lambda asked: (
            None if asked.url.startswith(("http://127.0.0.1:", "data:", "file:")) else elsewhere.append(asked)
        ),
    )
    yield opened
    context.close()
    assert complaints == []
    assert elsewhere == []


def focused(page):
    return page.evaluate("document.activeElement.textContent.trim()")


def rows(page):
    return page.locator("#series tbody tr:visible")


def test_arrows_walk_through_the_grid_and_enter_opens_a_sheet(page, small):
    page.goto(small)
    grid = page.get_by_role("grid")
    assert grid.locator("[tabindex='0']").count() == 1
    page.locator("#filter").focus()
    page.keyboard.press("ArrowDown")
    assert focused(page) == "peg"
    page.keyboard.press("End")
    assert "no variation" in focused(page)
    page.keyboard.press("Home")
    page.keyboard.press("ArrowRight")
    assert focused(page).startswith("7.5 EUR/t")
    page.keyboard.press("Control+End")
    page.keyboard.press("Home")
    assert focused(page) == "power_da"
    assert grid.locator("[tabindex='0']").count() == 1
    page.keyboard.press("ArrowDown")
    assert focused(page) == "power_da"
    page.keyboard.press("Enter")
    page.wait_for_url("**/series?name=power_da")
    assert page.locator("h1").inner_text().startswith("power_da: 59 EUR/t")


def test_typing_filters_at_once_and_escape_ends_it(page, small):
    page.goto(small)
    page.locator("body").press("p")
    page.keyboard.type("ower")
    assert rows(page).count() == 1
    assert page.locator("#count").inner_text() == "1 of 3 series"
    page.keyboard.press("Enter")
    assert focused(page) == "power_da"
    page.keyboard.press("Escape")
    assert rows(page).count() == 3
    assert page.locator("#count").inner_text() == ""


def test_a_key_sorts_by_attention_and_back(page, small):
    page.goto(f"{small}/?as_of=2024-03-02T09:00")
    names = page.locator("#series tbody th")
    before = names.all_inner_texts()
    page.keyboard.press("!")
    assert page.get_by_role("button", name="Attention first").get_attribute("aria-pressed") == "true"
    after = names.all_inner_texts()
    assert after[-1] not in ("peg", "power_da")
    page.keyboard.press("!")
    assert names.all_inner_texts() == before


def test_the_moment_picker_shows_what_was_known_then(page, small):
    page.goto(small)
    page.get_by_text("As known: now").click()
    page.get_by_label("Show everything as it was known on").fill("2024-03-01T09:00")
    page.get_by_role("button", name="Show").click()
    assert page.get_by_role("heading", level=1).inner_text().startswith("Run 1 of 1 Mar 2024")
    assert "not the latest numbers" in page.locator(".known").inner_text()
    paper = page.evaluate("getComputedStyle(document.body).backgroundColor")
    page.get_by_role("link", name="Show now").click()
    assert page.locator(".known").count() == 0
    assert page.evaluate("getComputedStyle(document.body).backgroundColor") != paper


def height_of(line):
    """Where the level line is in its chart, from the top, of 300."""
    return line.evaluate("it => it.transform.baseVal.consolidate().matrix.f")


@pytest.mark.parametrize(("width", "kind"), [(1200, "wide"), (360, "narrow")])
def test_the_level_line_moves_by_key_and_by_pointer_and_counts_as_the_server_does(page, small, width, kind):
    page.set_viewport_size({"width": width, "height": 800})
    page.goto(f"{small}/series?name=power_da")
    field, said = page.get_by_role("spinbutton", name="Level"), page.locator("output")
    picture = page.locator(f".past-values svg.{kind}")
    line = picture.locator(".level_marks line")
    at = height_of(line)
    field.focus()
    page.keyboard.press("ArrowUp")
    assert height_of(line) < at
    picture.scroll_into_view_if_needed()
    box = picture.locator(".background").first.bounding_box()
    page.mouse.move(box["x"] + 50, box["y"] + box["height"] * 0.5)
    page.mouse.down()
    page.mouse.move(box["x"] + 50, box["y"] + box["height"] * 0.6)
    page.mouse.up()
    assert height_of(line) == pytest.approx(180, abs=1.5)
    sentence, level = said.inner_text(), field.input_value()
    assert sentence.startswith("Crossed ")
    page.goto(f"{small}/series?name=power_da&level={level}")
    assert said.inner_text() == sentence
    assert height_of(line) == pytest.approx(180, abs=1.5)


def test_a_new_run_is_told_in_one_line_and_nothing_moves_by_itself(page, serve, tmp_path):
    book = small_book(tmp_path / "desk.duckdb")
    page.goto(serve(book))
    before = page.locator("main").inner_text()
    correct(book, to=97.0)
    page.evaluate("dispatchEvent(new Event('focus'))")
    line = page.locator("#newer")
    line.get_by_role("link", name="Show it").wait_for()
    assert line.inner_text() == "Run 3 is there. Show it"
    assert page.locator("main").inner_text() == before
    line.get_by_role("link", name="Show it").click()
    assert page.get_by_role("heading", level=1).inner_text().startswith("Run 3 of")


def test_a_hostile_name_stays_text_and_leads_to_its_sheet(page, small):
    asked = []
    page.on("dialog", lambda dialog: asked.append(dialog.message) or dialog.dismiss())
    page.goto(small)
    page.locator("#series a", has_text="alert(1)").click()
    assert "alert(1)" in page.locator("h1").inner_text()
    with page.expect_download() as download:
        page.get_by_role("link", name="Values as CSV").click()
    assert download.value.suggested_filename == "values.csv"
    assert asked == []
    assert HOSTILE in page.locator("input[name=name]").first.input_value()


def test_a_failed_fit_has_a_sheet_with_its_values(page, small):
    page.goto(f"{small}/series?name=peg")
    assert "There is no estimate in force: no variation." in page.locator(".answer").inner_text()
    assert page.locator(".past-values svg.chart.wide").is_visible()


def test_every_picture_has_words_instead(page, small):
    page.goto(f"{small}/series?name=power_da")
    pictures = page.locator("svg:not([aria-hidden])")
    assert pictures.count() == 2 * 5
    for at in range(pictures.count()):
        assert pictures.nth(at).get_attribute("role") == "img"
        assert len(pictures.nth(at).get_attribute("aria-label")) > 20


def test_on_a_telephone_a_row_is_two_lines_and_gives_its_numbers_on_focus(page, small):
    page.set_viewport_size({"width": 360, "height": 800})
    page.goto(small)
    for at in range(3):
        lines = rows(page).nth(at).evaluate("it => getComputedStyle(it).gridTemplateRows.split(' ').length")
        assert lines == 2
    row = rows(page).nth(2)
    volatility, before = row.locator("td").nth(2), row.bounding_box()["height"]
    assert volatility.locator("i").evaluate("it => getComputedStyle(it).clipPath") == "inset(50%)"
    volatility.focus()
    assert volatility.locator("i").evaluate("it => getComputedStyle(it).clipPath") == "none"
    assert volatility.locator("i").evaluate("it => it.scrollWidth <= it.parentElement.clientWidth")
    assert row.bounding_box()["height"] == before


def test_an_empty_book_is_one_sentence(page, serve, book):
    page.goto(serve(book))
    assert page.get_by_role("heading").all_inner_texts() == ["No run yet: take in files, then refresh with a plan."]


@pytest.mark.parametrize("address", ["/", "/series?name=power_da", "/?as_of=2024-03-01T09:00", "/guide/intake.md"])
@pytest.mark.parametrize("width", [360, 800, 1400, 2400])
def test_nothing_is_wider_than_the_window(page, small, address, width):
    page.set_viewport_size({"width": width, "height": 800})
    page.goto(small + address)
    assert page.evaluate("document.documentElement.scrollWidth") <= width


@pytest.mark.parametrize("address", ["/", "/series?name=power_da"])
def test_nothing_jumps_while_it_loads(page, small, address):
    page.add_init_script(
        "window.moved = 0; new PerformanceObserver((list) => { for (const one of list.getEntries()) "
        "window.moved += one.value; }).observe({ type: 'layout-shift', buffered: true });"
    )
    page.goto(small + address)
    page.wait_for_timeout(300)
    assert page.evaluate("window.moved") < 0.01


def test_the_sheets_can_be_read_without_a_script(browser, small):
    context = browser.new_context(java_script_enabled=False)
    page = context.new_page()
    page.goto(small)
    page.get_by_role("link", name="power_da", exact=True).click()
    page.get_by_role("spinbutton", name="Level").fill("62")
    page.get_by_role("button", name="Count").click()
    assert "level=62" in page.url
    assert "Crossed" in page.locator("output").inner_text()
    context.close()


def test_a_thousand_series_are_filtered_as_one_types(page, serve, many):
    page.goto(serve(many))
    page.locator("#filter").focus()
    took = page.evaluate(
        "() => { const field = document.getElementById('filter'), start = performance.now(); field.value = '0999'; "
        "field.dispatchEvent(new Event('input')); document.body.offsetHeight; return performance.now() - start; }"
    )
    assert rows(page).count() == 1
    assert took < 500


def test_the_mailed_file_works_from_a_folder(page, tmp_path):
    book, output = small_book(tmp_path / "desk.duckdb"), tmp_path / "page.html"
    assert run_command(["page", str(book), "--output", str(output), "--quiet"]) == 0
    page.goto(output.as_uri())
    page.keyboard.type("power")
    assert rows(page).count() == 1
    page.keyboard.press("ArrowDown")
    page.keyboard.press("Enter")
    field = page.locator("article:has(h1:has-text('power_da')) input[name=level]")
    field.fill("62")
    assert page.locator("article:has(h1:has-text('power_da')) output").inner_text().startswith("Crossed")


def test_it_prints_on_a4_within_the_paper(page, small):
    page.goto(f"{small}/?as_of=2024-03-01T09:00")
    page.emulate_media(media="print")
    assert not page.locator(".tools").is_visible()
    assert page.locator(".known").is_visible()
    assert page.pdf(format="A4").startswith(b"%PDF")


@pytest.mark.skipif(not AXE.exists(), reason="axe-core is not installed (npm install axe-core, or AXE_CORE)")
@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize("width", [360, 1400])
@pytest.mark.parametrize("address", ["/", "/series?name=power_da", "/?as_of=2024-03-01T09:00", "/guide/intake.md"])
def test_axe_finds_nothing_serious(browser, small, address, width, scheme):
    context = browser.new_context(viewport={"width": width, "height": 900}, color_scheme=scheme, bypass_csp=True)
    page = context.new_page()
    page.goto(small + address)
    page.add_script_tag(path=AXE)
    found = page.evaluate("async () => (await axe.run()).violations")
    context.close()
    assert [(one["id"], [node["html"] for node in one["nodes"][:3]]) for one in found] == []
