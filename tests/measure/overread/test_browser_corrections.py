"""Corrections in a real browser, by pointer and by keyboard.

Places on the paper are taken from the page's own drawing, as a person takes them by eye.
"""

import json
import re
from pathlib import Path

import numpy as np
import pytest

from tests.measure.overread.browsing import (
    done,
    first_name,
    milliseconds,
    on_screen,
    qrs,
    rename,
)


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


def test_a_panel_edge_is_dragged(page):
    page.focus("#paper")
    page.keyboard.press("p")
    page.wait_for_selector("#paper .edge.grip", state="attached")
    # the panel comes into view with the next frame
    page.wait_for_function("() => document.getElementById('paper').viewBox.baseVal.width < 200")
    left = float(page.input_value("#edgeleft"))
    mm, x, y = page.evaluate(
        """() => {
          const edge = document.querySelector('#paper .edge.grip[data-side="left"]');
          const on = document.getElementById("paper").getScreenCTM();
          const y = edge.y1.baseVal.value * 0.75 + edge.y2.baseVal.value * 0.25;
          const at = new DOMPoint(edge.x1.baseVal.value, y).matrixTransform(on);
          return [on.a, at.x, at.y];
        }"""
    )
    page.mouse.move(x, y)
    page.mouse.down()
    page.mouse.move(x + 3 * mm, y, steps=4)
    page.mouse.up()
    done(page, 1)
    # 3 mm to the right, sure to a screen pixel
    assert float(page.input_value("#edgeleft")) - left == pytest.approx(3, abs=1.5 / mm + 0.06)


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
