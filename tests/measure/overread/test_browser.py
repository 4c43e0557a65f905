"""The over-read page in a real browser: Debian's Chromium, driven by playwright.

Places on the paper are taken from the page's own drawing, as a person takes them by eye.
"""

import contextlib
import json
import os
import re
import signal
import socket
import subprocess
import sys
import time
import urllib.parse
import zipfile
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from digitize.formats import FORMATS
from digitize.options import Options
from measure.overread.serve import find_items
from measure.overread.worklist import Worklist
from measure.reading import Person
from tests.measure.overread.made import digital_chain, page_chain, serving, worklist, write_csv

sync_api = pytest.importorskip("playwright.sync_api", reason="playwright is not installed")
pytest.importorskip("measure.overread.server", reason="the extra `overread` is missing")

CHROMIUM = Path("/usr/bin/chromium")
pytestmark = pytest.mark.skipif(not CHROMIUM.exists(), reason="there is no /usr/bin/chromium")
LAPTOP, TABLET = {"width": 1280, "height": 720}, {"width": 820, "height": 1180}


@pytest.fixture(scope="module")
def browser():
    with sync_api.sync_playwright() as play:
        # inside a container the browser's own sandbox has no rights to start
        opened = play.chromium.launch(executable_path=CHROMIUM, args=["--no-sandbox"])
        yield opened
        opened.close()


@pytest.fixture
def guard(tmp_path):
    with serving(worklist(tmp_path, page_chain(), digital_chain())) as guard:
        yield guard


@pytest.fixture
def page(browser, guard):
    context = browser.new_context(viewport=LAPTOP)
    page = context.new_page()
    page.faults, page.asked = [], []
    page.on("pageerror", lambda error: page.faults.append(str(error)))
    page.on("console", lambda m: page.faults.append(m.text) if m.type == "error" else None)
    page.on("request", lambda request: page.asked.append(request.url))
    opened(page, guard.address)
    yield page
    assert page.faults == []
    context.close()


def opened(page, address):
    page.goto(address)
    page.wait_for_selector("#intervals tr")
    page.wait_for_selector("#paper .trace", state="attached")


def qrs(page):
    return page.inner_text('#intervals tr[data-key="qrs_ms"] td:nth-child(2)')


def milliseconds(page):
    return int(re.match(r"\d+", qrs(page)).group())


def done(page, count):
    """Wait until so many corrections are in force."""
    page.wait_for_function(
        "n => document.querySelectorAll('#corrections .was').length === n", arg=count
    )


def on_screen(page, panel, share, below_mm=0.0):
    """Where on the screen a place of a panel's trace lies, at a share of its length."""
    return page.evaluate(
        """([number, share, below]) => import("/page/paper.js").then(async () => {
          const path = document.querySelectorAll("#paper .trace:not(.doubtful)")[number];
          const at = path.getPointAtLength(path.getTotalLength() * share);
          const p = new DOMPoint(at.x, at.y + below)
            .matrixTransform(document.getElementById("paper").getScreenCTM());
          return [p.x, p.y];
        })""",
        [panel, share, below_mm],
    )


def first_name(page):
    return page.locator("#paper .name").first.text_content()


def rename(page, lead):
    page.focus("#paper")
    page.keyboard.press("p")
    page.fill("#lead", lead)
    page.press("#lead", "Enter")


def test_nothing_leaves_this_machine(page, guard):
    here = guard.address.partition("?")[0]
    assert len(page.asked) > 8
    assert all(url.startswith(here) for url in page.asked)


def test_the_page_says_that_it_is_unsigned_and_no_diagnosis(page):
    assert "NOT SIGNED" in page.inner_text("#state")
    assert "This is no diagnosis" in page.inner_text("#notice")


def test_zoom_brings_the_tiles_that_it_needs(page):
    wide = "n => Math.abs(document.getElementById('paper').viewBox.baseVal.width - n) < 1e-3"
    before = page.evaluate("() => document.getElementById('paper').viewBox.baseVal.width")
    assert not any("/paper/flat/0/" in url for url in page.asked)
    with page.expect_request("**/paper/flat/0/*/*"):
        for _ in range(6):
            page.keyboard.press("+")
    page.wait_for_function(wide, arg=before * 0.8**6)
    page.keyboard.press("f")
    page.wait_for_function(wide, arg=before)
    white = page.evaluate(
        """() => { const { width, height } = document.getElementById("ground");
          const at = [width / 2, height / 2, 60, 60];
          const { data } = document.getElementById("ground").getContext("2d").getImageData(...at);
          return data.every((v) => v === 255); }"""
    )
    assert not white  # ruled paper is drawn in the middle of the canvas


def test_a_lead_is_renamed_and_the_name_undone(page):
    before = first_name(page)
    rename(page, "V9")
    done(page, 1)
    assert first_name(page) == "V9 (given)"
    page.click("#undo")
    done(page, 0)
    assert first_name(page) == before


def test_a_dragged_boundary_changes_qrs_and_the_findings_follow(page):
    before = milliseconds(page)
    result = page.inner_text('#findings [data-key="lafb"] summary')
    box = page.locator('[data-edge="qrs_off_ms"][role="slider"]').bounding_box()
    x, y = box["x"] + box["width"] / 2, box["y"] + 40
    page.mouse.move(x, y)
    page.mouse.down()
    page.mouse.move(x + 10, y, steps=4)
    page.mouse.up()
    done(page, 1)
    # 10 pixels of a cell that shows 920 ms, in steps of 2 ms
    cell = page.locator("#beat .cell").first.bounding_box()["width"]
    assert milliseconds(page) - before == pytest.approx(10 * 920 / cell, abs=2)
    assert "automatic" in qrs(page)
    # wider than 120 ms it is no fascicular block any more (AHA 2009 part III, from memory)
    assert result != page.inner_text('#findings [data-key="lafb"] summary')


def test_struck_out_and_redrawn_by_clicks(page):
    gaps = page.locator("#paper .missing").count()
    page.keyboard.press("s")
    for share in (0.40, 0.46):
        page.mouse.click(*on_screen(page, 0, share))
    done(page, 1)
    assert page.locator("#paper .missing").count() == gaps + 1
    page.keyboard.press("z")
    done(page, 0)
    places = [on_screen(page, 0, share) for share in np.linspace(0.40, 0.46, 6)]
    page.keyboard.press("Z")
    done(page, 1)
    page.keyboard.press("d")
    for k, place in enumerate(places):
        if k == 0 or place[0] > places[k - 1][0] + 1:  # from left to right
            page.mouse.click(*place)
    page.keyboard.press("Enter")
    done(page, 2)
    assert page.locator("#paper .missing").count() <= gaps + 2


def test_calipers_measure_on_the_panels_own_scale(page):
    page.keyboard.press("c")
    a, b = on_screen(page, 0, 0.1), on_screen(page, 0, 0.1)
    mm = page.evaluate("() => document.getElementById('paper').getScreenCTM().a")
    page.mouse.click(*a)
    page.mouse.click(b[0] + 20 * mm, b[1] + 5 * mm)
    words = page.inner_text("#said")
    # 20 mm at 25 mm/s are 800 ms, 75 a minute; 5 mm down at 10 mm/mV are -0.50 mV
    assert re.search(r"(799|800|801) ms, -0\.5\d? ?0? ?mV, 75/min", words.replace("−", "-")), words


def test_a_beat_is_taken_out_by_a_click_and_back_by_the_keyboard(page):
    averaged = page.locator("#paper .heartbeat.averaged").count()
    page.locator("#paper .heartbeat.averaged").first.click()
    done(page, 1)
    assert page.locator("#paper .heartbeat.averaged").count() < averaged
    page.locator('#beats [aria-pressed="false"]').first.press("Enter")
    done(page, 2)
    assert page.locator("#paper .heartbeat.averaged").count() == averaged


def test_calipers_are_kept_and_snap_to_the_trace(page):
    page.keyboard.press("t")
    page.keyboard.press("c")
    for share in (0.1, 0.2):
        x, y = on_screen(page, 0, share)
        page.mouse.click(x, y + 4)
    words = page.inner_text("#said").removeprefix("Calipers in ")
    page.keyboard.press("k")
    done(page, 1)
    assert page.inner_text("#measured") == words
    mv = float(re.search(r"(-?[\d.]+) mV", words.replace("−", "-")).group(1))
    assert abs(mv) < 0.4  # two places on the level line, though both were clicked beside it


def test_an_ignored_region_is_no_longer_read(page):
    gaps = page.locator("#paper .missing").count()
    page.keyboard.press("i")
    x, y = on_screen(page, 0, 0.5)
    page.mouse.click(x - 12, y - 12)
    page.mouse.click(x + 12, y + 12)
    done(page, 1)
    assert page.locator("#paper .missing").count() > gaps
    assert "ignore" in page.inner_text("#corrections")
    page.click("#undo")
    done(page, 0)
    assert page.locator("#paper .missing").count() == gaps


def test_columns_at_the_same_instant(page):
    far = page.locator("#beats button").last.inner_text()
    page.select_option("#timing", "simultaneous")
    done(page, 1)
    assert "given" in page.locator("label[for=timing]").inner_text()
    # two columns of five seconds one after the other, or both in the same five
    assert (
        float(far.split()[0])
        > 5
        > float(page.locator("#beats button").last.inner_text().split()[0])
    )


def test_the_page_in_another_layout_has_other_panels_and_earlier_names_are_void(page):
    rename(page, "V9")
    done(page, 1)
    page.fill("#order", "aVL I aVR II aVF III V1 V2 V3 V4 V5 V6")
    page.get_by_text("Read the page in this layout").click()
    done(page, 2)
    assert first_name(page) == "aVL (given)"
    assert "void" in page.locator("#corrections li").first.inner_text()


def test_an_earlier_ecg_beside_this_one_follows_its_corrections(page):
    page.keyboard.press("o")
    page.select_option("#other", "1")
    page.wait_for_selector("#besideall table")
    assert page.locator("#beat .wave.old").count() == 12
    before = page.inner_text("#besideall table")
    peak = _peak_of_the_old_beat(page)
    page.focus('[data-edge="qrs_on_ms"][role="slider"]')
    for _ in range(5):
        page.keyboard.press("ArrowLeft")
    done(page, 1)
    page.wait_for_function(
        "t => document.querySelector('#besideall table')?.innerText !== t", arg=before
    )
    # aligned on the QRS onset: it moved to the left with it, by 10 ms of a cell of 920 ms
    cell = page.locator("#beat .cell").first.bounding_box()["width"]
    moved = peak - _peak_of_the_old_beat(page)
    assert moved == pytest.approx(10 * cell / 920, abs=0.5)
    with page.expect_download() as download:
        page.get_by_text("Take the comparison away").click()
    assert download.value.suggested_filename == "ecg.png.compare.zip"
    page.select_option("#other", "")
    assert page.locator("#beat .wave.old").count() == 0


def _peak_of_the_old_beat(page):
    """Where on the page the first lead of the old beat is highest."""
    drawn = page.locator("#beat .wave.old").first.get_attribute("d")
    points = [tuple(map(float, place.split())) for place in re.findall(r"[\d.]+ [\d.]+", drawn)]
    return min(points, key=lambda point: point[1])[0]


def test_the_next_ecg_is_a_key_away(page):
    page.keyboard.press("]")
    page.wait_for_function("() => document.title.startsWith('model.csv')")
    assert page.locator("#sheet").is_hidden()
    page.keyboard.press("[")
    page.wait_for_function("() => document.title.startsWith('lafb')")
    assert page.locator("#sheet").is_visible()


def test_everything_that_the_command_line_writes_can_be_taken_away(page):
    kinds = [a.get_attribute("href").split("/")[-1] for a in page.locator("#exports a").all()]
    assert {"report", "reading", "tracing", "samples", "overlay", *FORMATS} - {"csv"} == set(kinds)
    with page.expect_download() as download:
        page.click("#exports a[href$='wfdb']")
    with zipfile.ZipFile(download.value.path()) as archive:
        assert any(name.endswith(".hea") for name in archive.namelist())


def test_signed_and_found_again_after_a_reload(page):
    page.fill("#who", "A. Reader")
    rename(page, "V9")
    done(page, 1)
    page.fill("#comment", "a check of the page")
    page.click("#sign button")
    page.wait_for_function("() => document.getElementById('state').innerText.startsWith('Signed')")
    page.reload()
    page.wait_for_selector("#signatures li")
    assert "A. Reader" in page.inner_text("#signatures")
    assert "a check of the page" in page.inner_text("#signatures")
    assert first_name(page) == "V9 (given)"
    assert page.locator("#banner").is_hidden()
    with page.expect_download() as download:
        page.click("#exports a[href$='reading']")
    content = json.loads(Path(download.value.path()).read_text("utf-8"))
    assert content["cautions"][0].startswith("Signed by A. Reader")
    assert content["corrections"][0]["who"] == "A. Reader"


def test_by_the_keyboard_alone(page):
    """WCAG 2.1.1: all of it without a pointer."""
    before = milliseconds(page)
    page.keyboard.press("?")
    assert page.locator("#keys").is_visible()
    page.keyboard.press("Escape")
    for _ in range(60):
        page.keyboard.press("Tab")
        if page.evaluate("() => document.activeElement.dataset.edge") == "qrs_off_ms":
            break
    for _ in range(3):
        page.keyboard.press("ArrowRight")
    done(page, 1)
    assert milliseconds(page) == before + 6
    assert page.evaluate("() => document.activeElement.dataset.edge") == "qrs_off_ms"
    page.focus("#paper")
    page.keyboard.press("p")
    page.focus("#paper")
    page.keyboard.press("s")
    page.keyboard.press("Space")
    for _ in range(5):
        page.keyboard.press("ArrowRight")
    page.keyboard.press("Space")
    done(page, 2)
    assert "strike out" in page.inner_text("#corrections")


def test_a_clause_shows_its_evidence_on_beat_and_paper(page):
    page.locator('#findings [data-key="lafb"] summary').click()
    clauses = page.locator('#findings [data-key="lafb"] .clause')
    seen = [0, 0]
    for k in range(clauses.count()):
        clauses.nth(k).focus()
        seen[0] += page.locator("#beat .evidence").count()
        seen[1] += page.locator("#paper .evidence").count()
    assert min(seen) > 0


def test_the_second_tab_is_told(page, guard):
    second = page.context.new_page()
    opened(second, guard.address)
    assert "another tab" in second.inner_text("#banner")
    second.click("#banner button")
    second.wait_for_function("() => document.getElementById('banner').hidden")
    rename(page, "V9")
    page.wait_for_function("() => !document.getElementById('banner').hidden")
    assert "another tab" in page.inner_text("#banner")
    assert page.locator("#corrections .was").count() == 0
    page.faults.clear()  # the browser reports the refusal as a failed request
    second.close()


@pytest.mark.parametrize("size", [LAPTOP, TABLET], ids=["laptop", "tablet"])
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_nothing_is_cut_off(page, size, scheme):
    page.set_viewport_size(size)
    page.emulate_media(color_scheme=scheme)
    wide = page.evaluate("() => document.documentElement.scrollWidth")
    assert wide <= size["width"]
    assert page.locator("#beat").bounding_box()["height"] >= 140
    unnamed = page.evaluate(
        """() => [...document.querySelectorAll("input, select, textarea, button")]
          .filter((e) => !e.closest("dialog, [hidden]"))
          .filter((e) => !(e.innerText || e.labels?.length || e.ariaLabel))
          .map((e) => e.outerHTML)"""
    )
    assert unnamed == []


def test_a_killed_server_loses_nothing_that_was_answered(browser, tmp_path):
    write_csv(tmp_path / "model.csv")
    with command(tmp_path) as (server, address):
        page = browser.new_page()
        page.goto(address)
        page.wait_for_selector("#intervals tr")
        before = milliseconds(page)
        page.focus('[data-edge="qrs_off_ms"][role="slider"]')
        for _ in range(5):
            page.keyboard.press("ArrowRight")
        done(page, 1)
        server.send_signal(signal.SIGKILL)
        server.wait()
        page.keyboard.press("ArrowRight")
        page.wait_for_function("() => !document.getElementById('banner').hidden")
        assert "does not answer" in page.inner_text("#banner")
        page.close()
    with command(tmp_path) as (_, address):
        page = browser.new_page()
        page.goto(address)
        page.wait_for_selector("#intervals tr")
        assert milliseconds(page) == before + 10
        page.close()


def test_two_places_give_the_scale_of_a_page_without_grid(browser, tmp_path):
    made = bare_page(tmp_path)
    with serving(made) as guard:
        page = browser.new_page(viewport=LAPTOP)
        page.goto(guard.address)
        page.wait_for_function(
            "() => document.getElementById('said').innerText.startsWith('No grid')"
        )
        a, e, f = page.evaluate(
            "() => (({a, e, f}) => [a, e, f])(document.getElementById('paper').getScreenCTM())"
        )
        for x_px in (100, 900):
            page.mouse.click(x_px * a + e, 300 * a + f)
        page.fill("#distance", "100")
        page.press("#distance", "Enter")
        page.wait_for_function(
            "() => document.getElementById('state').innerText.includes('Waiting')"
        )
        page.close()
    wanted = made.wanted.get_nowait()
    # 800 pixels are 100 mm; a fax has half as many down, and a click is sure to a screen pixel
    assert wanted.px_per_mm == pytest.approx((8.0, 4.0), rel=0.005)


def bare_page(folder):
    """A worklist of one white fax page without any grid, read as far as it goes."""
    image = Image.fromarray(np.full((600, 1000), 255, np.uint8))
    image.save(folder / "bare.png", dpi=(200, 100))
    made = Worklist(find_items([folder / "bare.png"], None), Options(), Person())
    made.read_next(made.entries[0])
    assert made.entries[0].state == "no scale"
    return made


@contextlib.contextmanager
def command(folder):
    """`measure overread` as a process of its own, and the address that it prints."""
    start = "from measure.cli import main; main()"
    line = [sys.executable, "-c", start, "overread", "--no-browser", folder / "model.csv"]
    env = {**os.environ, "PYTHONPATH": str(Path(__file__).parents[3])}
    with subprocess.Popen(line, stdout=subprocess.PIPE, text=True, env=env) as server:
        try:
            address = server.stdout.readline().split()[-1]
            _wait_until_open(address)
            yield server, address
        finally:
            server.kill()


def _wait_until_open(address, seconds=30.0):
    """The address is told just before the server listens."""
    place = urllib.parse.urlsplit(address)
    until = time.monotonic() + seconds
    while True:
        try:
            socket.create_connection((place.hostname, place.port), timeout=1.0).close()
            return
        except OSError:
            if time.monotonic() > until:
                raise
            time.sleep(0.1)
