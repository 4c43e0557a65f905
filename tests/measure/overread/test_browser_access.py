"""Who can reach the page, and who can use it: other sites, other tabs, eyes, screen readers."""

import contextlib
import http.server
import threading

import pytest

from tests.measure.overread.browsing import LAPTOP, TABLET, opened

# Relative luminance and contrast as WCAG 2.1 defines them; text against what lies behind it.
_CONTRAST = """() => {
  const parsed = (text) => { const [r, g, b, a = 1] = text.match(/[\\d.]+/g).map(Number);
    return { rgb: [r, g, b], a }; };
  const light = (rgb) => rgb.map((v) => v / 255)
    .map((v) => (v <= 0.03928 ? v / 12.92 : ((v + 0.055) / 1.055) ** 2.4))
    .reduce((sum, v, k) => sum + v * [0.2126, 0.7152, 0.0722][k], 0);
  const ratio = (a, b) => { const [x, y] = [light(a), light(b)].sort((p, q) => q - p);
    return (x + 0.05) / (y + 0.05); };
  const behind = (element) => {
    for (let e = element; e; e = e.parentElement) {
      const { rgb, a } = parsed(getComputedStyle(e).backgroundColor);
      if (a === 1) return rgb;
    }
    return [255, 255, 255];
  };
  const own = (e) => [...e.childNodes].some((n) => n.nodeType === 3 && n.data.trim());
  const seen = (e) => e.getClientRects().length && !e.closest("[hidden], dialog:not([open])");
  const texts = [...document.querySelectorAll("body *")].filter((e) => own(e) && seen(e)
    && !e.disabled && !["OPTION", "TITLE", "SCRIPT"].includes(e.tagName));
  const found = texts.map((e) => { const style = getComputedStyle(e);
    const ink = parsed(e.closest("svg") ? style.fill : style.color).rgb;
    return [ratio(ink, behind(e)), e.tagName, e.textContent.trim().slice(0, 30)]; });
  const edges = [...document.querySelectorAll("button, input, select, textarea")].filter(
    (e) => seen(e) && !e.disabled && e.type !== "range").map((e) => [
    ratio(parsed(getComputedStyle(e).borderTopColor).rgb, behind(e.parentElement)), e.tagName,
    e.id]);
  return { found, edges };
}"""


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_contrast_is_enough_to_read(page, scheme):
    """WCAG 2.1, 1.4.3: 4.5 to 1 for text; 1.4.11: 3 to 1 for the edges of what is operated."""
    page.emulate_media(color_scheme=scheme)
    page.keyboard.press("p")  # the panel's fields are shown too
    page.select_option("#other", "1")
    page.wait_for_selector("#besideall table")
    measured = page.evaluate(_CONTRAST)
    assert len(measured["found"]) > 120
    assert [entry for entry in measured["found"] if entry[0] < 4.5] == []
    assert [entry for entry in measured["edges"] if entry[0] < 3] == []


@pytest.mark.parametrize("size", [LAPTOP, TABLET], ids=["laptop", "tablet"])
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_nothing_is_cut_off(page, size, scheme):
    page.set_viewport_size(size)
    page.emulate_media(color_scheme=scheme)
    wide = page.evaluate("() => document.documentElement.scrollWidth")
    assert wide <= size["width"]
    assert page.locator("#beat").bounding_box()["height"] >= 140


def test_everything_that_is_operated_has_a_name(page):
    """WCAG 2.1, 4.1.2: a name and a role for a screen reader."""
    page.keyboard.press("p")
    unnamed = page.evaluate(
        """() => [...document.querySelectorAll("input, select, textarea, button, [tabindex]")]
          .filter((e) => !e.closest("dialog, [hidden]"))
          .filter((e) => !(e.textContent.trim() || e.labels?.length || e.ariaLabel))
          .map((e) => e.outerHTML)"""
    )
    assert unnamed == []
    roles = page.evaluate(
        """() => [...document.querySelectorAll("svg[tabindex], svg [tabindex]")]
          .map((e) => e.getAttribute("role"))"""
    )
    assert set(roles) == {"application", "slider"}
    slider = page.locator('[data-edge="qrs_off_ms"][role="slider"]')
    assert slider.get_attribute("aria-label") == "QRS ends"
    assert slider.get_attribute("aria-valuetext").endswith("ms after QRS begins")


def test_nothing_leaves_this_machine(page, ready):
    here = ready.address.partition("?")[0]
    assert len(page.asked) > 8
    assert all(url.startswith(here) for url in page.asked)


def test_a_foreign_name_that_points_here_is_refused(page, ready):
    there = page.context.new_page()
    answer = there.goto(ready.address.replace("127.0.0.1", "rebound.example"))
    assert answer.status == 403
    assert "own address alone" in answer.text()
    there.close()


def test_another_site_in_the_same_browser_is_refused(page):
    """Even one on this machine, for which the cookie is not foreign: another port."""
    here = page.url
    with other_site() as address:
        there = page.context.new_page()
        there.goto(address)
        answers = there.evaluate(
            """async (here) => {
              const asked = { mode: "no-cors", credentials: "include" };
              const sent = { ...asked, method: "POST", body: "{}" };
              return Promise.all([fetch(here + "ecgs", asked), fetch(here + "ecgs/0/undo", sent)]
                .map((answer) => answer.then(() => "read", () => "refused")));
            }""",
            here,
        )
        there.close()
    assert answers == ["refused", "refused"]


@contextlib.contextmanager
def other_site():
    """A page of someone else on this machine."""

    class Site(http.server.BaseHTTPRequestHandler):
        def do_GET(self):
            self.send_response(200)
            self.end_headers()

        def log_message(self, *given):
            pass

    with http.server.ThreadingHTTPServer(("127.0.0.1", 0), Site) as server:
        threading.Thread(target=server.serve_forever, daemon=True).start()
        yield f"http://127.0.0.1:{server.server_port}/"
        server.shutdown()


def test_the_second_tab_is_told(page, ready):
    second = page.context.new_page()
    opened(second, ready.address)
    assert "another tab" in second.inner_text("#banner")
    second.click("#banner button")
    second.wait_for_function("() => document.getElementById('banner').hidden")
    page.select_option("#sex", "male")
    page.wait_for_function("() => !document.getElementById('banner').hidden")
    assert "another tab" in page.inner_text("#banner")
    assert page.locator("#corrections .was").count() == 0
    page.faults.clear()  # the browser reports the refusal as a failed request
    second.close()
