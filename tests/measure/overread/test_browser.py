"""The over-read page in a real browser: Debian's Chromium, driven by playwright.

Places on the paper are taken from the page's own drawing, as a person takes them by eye.
"""

import signal
import zipfile

import numpy as np
import pytest
from PIL import Image

from digitize.formats import FORMATS
from digitize.options import Options
from measure.overread.serve import find_items
from measure.overread.worklist import Worklist
from measure.reading import Person
from tests.measure.overread.browsing import (
    LAPTOP,
    command,
    done,
    milliseconds,
)
from tests.measure.overread.made import serving, write_csv


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


def test_two_fingers_bring_the_paper_closer(page):
    """Touch as the browser's own protocol sends it: to twice the distance, half as much is seen."""
    wide = "() => document.getElementById('paper').viewBox.baseVal.width"
    before = page.evaluate(wide)
    box = page.locator("#paper").bounding_box()
    x, y = box["x"] + box["width"] / 2, box["y"] + box["height"] / 2
    touch = page.context.new_cdp_session(page)
    for kind, apart in (("Start", 60), ("Move", 80), ("Move", 100), ("Move", 120)):
        points = [{"x": x + side * apart, "y": y, "id": k} for k, side in enumerate((-1, 1))]
        touch.send("Input.dispatchTouchEvent", {"type": f"touch{kind}", "touchPoints": points})
    touch.send("Input.dispatchTouchEvent", {"type": "touchEnd", "touchPoints": []})
    page.wait_for_function(
        "n => Math.abs(document.getElementById('paper').viewBox.baseVal.width / n - 0.5) < 0.05",
        arg=before,
    )
    assert page.locator("#corrections .was").count() == 0


def test_the_next_ecg_is_a_key_away(page):
    page.keyboard.press("]")
    page.wait_for_function("() => document.title.startsWith('model.csv')")
    assert page.locator("#sheet").is_hidden()
    page.keyboard.press("[")
    page.wait_for_function("() => document.title.startsWith('lafb')")
    assert page.locator("#sheet").is_visible()


def test_everything_that_the_command_line_writes_can_be_taken_away(page):
    kinds = [a.get_attribute("href").split("/")[-1] for a in page.locator("#exports a").all()]
    assert set(kinds) == {
        *("report", "reading", "tracing", "samples", "overlay"),
        *(set(FORMATS) - {"csv"}),
        *("pdf", "dicom-pdf", "dicom-scan"),
    }
    with page.expect_download() as download:
        page.click("#exports a[href$='wfdb']")
    with zipfile.ZipFile(download.value.path()) as archive:
        assert any(name.endswith(".hea") for name in archive.namelist())
    with page.expect_download() as download:
        page.click("#exports a[href$='dicom-scan']")
    assert download.value.suggested_filename.endswith(".unsigned.scan.dcm")


def test_a_clause_shows_its_evidence_on_beat_and_paper(page):
    page.locator('#findings [data-key="lafb"] summary').click()
    clauses = page.locator('#findings [data-key="lafb"] .clause')
    seen = [0, 0]
    for k in range(clauses.count()):
        clauses.nth(k).focus()
        seen[0] += page.locator("#beat .evidence").count()
        seen[1] += page.locator("#paper .evidence").count()
    assert min(seen) > 0
    # the QRS duration is one of all leads: its two ends in each
    clauses.filter(has_text="QRS duration").focus()
    assert page.locator("#beat .evidence").count() == 2 * 12


def test_a_killed_server_loses_nothing_that_was_answered(browser, tmp_path):
    write_csv(tmp_path / "model.csv")
    with command(tmp_path / "model.csv") as (server, address):
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
    with command(tmp_path / "model.csv") as (_, address):
        page = browser.new_page()
        page.goto(address)
        page.wait_for_selector("#intervals tr")
        assert milliseconds(page) == before + 10
        page.close()


def test_two_places_give_the_scale_of_a_page_without_grid(browser, tmp_path):
    made = bare_page(tmp_path)
    with serving(made) as ready:
        page = browser.new_page(viewport=LAPTOP)
        page.goto(ready.address)
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
