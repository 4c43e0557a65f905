"""How fast the over-read page answers, in a real Chromium: `python -m tests.overread_benchmark`.

An A4 page at 300 dpi is opened by `measure overread` as a process of its own. First paint counts
from the navigation, with the server up and the page's reading just begun; feedback from an input
event to the frame that shows it; a recomputation from the request to the record on the page. Beside
these, which other work on the machine lengthens, stands the processor time of each recomputation.
"""

import os
import shutil
import statistics
import tempfile
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from digitize.options import Options
from digitize.read import read_stages
from measure.overread.chain import Chain
from measure.overread.corrections import Flip
from measure.overread.corrections_json import from_plain
from measure.overread.session import Session
from measure.overread.view import overview
from measure.reading import Person
from tests.measure.overread.browsing import CHROMIUM, LAPTOP, command

PAGE = Path(__file__).parents[1] / "sample_scans" / "normal_3x4_1.jpg"  # 3508 x 2480 pixels
FIRST_PAINT_S, FEEDBACK_MS, RECOMPUTED_S = 1.5, 50.0, 1.0  # what is asked for
_WATCH = """
  window.painted = null;
  const draw = CanvasRenderingContext2D.prototype.drawImage;
  CanvasRenderingContext2D.prototype.drawImage = function (...given) {
    window.painted ??= performance.now();
    return draw.apply(this, given);
  };
  window.delays = [];
  const channel = new MessageChannel(), waiting = [];
  channel.port1.onmessage = () => window.delays.push(performance.now() - waiting.shift());
  for (const kind of ["pointermove", "wheel"]) addEventListener(kind, (event) => {
    if (kind === "pointermove" && !event.buttons) return;
    requestAnimationFrame(() => { waiting.push(event.timeStamp); channel.port2.postMessage(0); });
  }, { capture: true, passive: true });
"""


def first_paint(page: Any, address: str) -> tuple[float, float]:
    """Seconds to the first content, and to the first piece of the paper."""
    page.goto(address)
    page.wait_for_function("() => window.painted !== null", timeout=60_000)
    first = "() => performance.getEntriesByName('first-contentful-paint')[0].startTime"
    return page.evaluate(first) / 1000, page.evaluate("() => window.painted") / 1000


def feedback(page: Any, act: Any) -> tuple[float, float, int]:
    """Median and largest delay in ms of the frames that an action brings, and their number."""
    page.evaluate("() => { window.delays.length = 0; }")
    act()
    page.wait_for_timeout(300)
    delays = page.evaluate("() => window.delays")
    return statistics.median(delays), max(delays), len(delays)


def dragged(page: Any, start: tuple[float, float], by_px: float) -> None:
    """A slow drag to the right and back."""
    x, y = start
    page.mouse.move(x, y)
    page.mouse.down()
    for k in range(1, 31):
        page.mouse.move(x + by_px * (k if k <= 15 else 30 - k) / 15, y)
        page.wait_for_timeout(16)
    page.mouse.up()


def recomputed(page: Any, correction: dict[str, Any]) -> float:
    """Seconds until the record under a correction is drawn; it is taken back after that."""
    counted = "n => document.querySelectorAll('#corrections .was').length === n"
    ask = """async (correction) => {
      const { correct } = await import("/page/main.js");
      const began = performance.now();
      await correct(correction);
      return performance.now() - began;
    }"""
    took = page.evaluate(ask, correction)
    page.wait_for_function(counted, arg=1)
    page.click("#undo")
    page.wait_for_function(counted, arg=0)
    return float(took) / 1000


def corrections(record: dict[str, Any]) -> dict[str, dict[str, Any]]:
    """One correction of each kind, on the panels and the beat of a record."""
    panel = record["panels"][1]
    left, top, right, bottom = panel["box_mm"]
    middle, y_mm = (left + right) / 2, panel["y_mm"]
    points = [
        [left + k * panel["step_mm"], y_mm[k]] for k in range(500, 800, 60) if y_mm[k] is not None
    ]
    region = {"left_mm": middle - 8, "right_mm": middle + 8, "top_mm": top, "bottom_mm": bottom}
    return {
        "boundary": {"kind": "boundary", "edge": "qrs_off_ms",
                     "at_ms": record["beat"]["edges"]["qrs_off_ms"] + 4},
        "beat": {"kind": "beat", "time_s": record["beats"][1]["time_s"], "use": False},
        "lead name": {"kind": "lead name", "panel": 1, "lead": "V9"},
        "speed": {"kind": "speed", "mm_s": 50.0},
        "gain": {"kind": "gain", "mm_mv": 5.0},
        "columns": {"kind": "timing", "timing": "simultaneous"},
        "panel edges": {"kind": "panel edges", "panel": 1, "left_mm": left + 1, "right_mm": right},
        "strike out": {"kind": "strike out", "panel": 1, "left_mm": middle, "right_mm": middle + 6},
        "redraw": {"kind": "redraw", "panel": 1, "points": points},
        "ignored region": {"kind": "ignore", **region},
        "crop": {"kind": "crop", "left_mm": left - 20, "right_mm": right + 200, "top_mm": top - 60,
                 "bottom_mm": bottom + 90},
        "arrangement": {"kind": "arrangement", "layout": record["scale"]["layout"]["value"]},
    }  # fmt: skip


def processor_times(folder: Path) -> Iterator[tuple[str, str]]:
    """Seconds of one processor for each correction, in this process and after a first one."""
    (stages,) = read_stages(PAGE, Options())
    chain = Chain(stages.tracing, stages, Person())
    over = Session(chain, folder / f"{PAGE.stem}.overread.json", lambda: "2024-03-01T12:00:00Z")
    over.correct(Flip(0), "")  # compiles and loads what the others share
    over.undo()
    for name, correction in corrections(overview(over)).items():
        began = time.process_time()
        over.correct(from_plain(correction), "")
        overview(over)
        yield f"processor: {name}", f"{time.process_time() - began:.2f} s"
        over.undo()


def measure(page: Any, address: str) -> Iterator[tuple[str, str]]:
    """What was measured, line by line."""
    content_s, paper_s = first_paint(page, address)
    yield "first content", f"{content_s:.2f} s"
    yield "first piece of the paper", f"{paper_s:.2f} s (asked: {FIRST_PAINT_S} s)"
    page.wait_for_selector("#intervals tr", timeout=120_000)
    box = page.locator("#paper").bounding_box()
    middle = (box["x"] + box["width"] / 2, box["y"] + box["height"] / 2 - 20)
    handle = page.locator('[data-edge="t_off_ms"][role="slider"]').bounding_box()
    for name, act in (
        ("pan, whole page", lambda: dragged(page, middle, 150)),
        ("zoom by wheel", lambda: [page.mouse.wheel(0, -60) for _ in range(12)]),
        ("pan, close", lambda: dragged(page, middle, 300)),
        ("boundary dragged", lambda: dragged(page, (handle["x"] + 6, handle["y"] + 40), 40)),
    ):
        median_ms, most_ms, frames = feedback(page, act)
        asked = f"asked: {FEEDBACK_MS:.0f} ms"
        yield name, f"median {median_ms:.0f} ms, at most {most_ms:.0f} ms of {frames} ({asked})"
    record = page.evaluate("() => fetch('ecgs/0').then((answer) => answer.json())")
    for name, correction in corrections(record).items():
        took = [recomputed(page, correction) for _ in range(2)]
        again = f"; again, remembered {took[1]:.2f} s" if took[1] < 0.7 * took[0] else ""
        yield f"recomputed: {name}", f"{took[0]:.2f} s{again}"


def main() -> None:
    """Print every figure."""
    from playwright.sync_api import sync_playwright

    print(f"load average {os.getloadavg()[0]:.1f} on {os.cpu_count()} cores")
    with tempfile.TemporaryDirectory() as folder, sync_playwright() as play:
        file = Path(shutil.copy(PAGE, folder))
        with command(file) as (_, address):
            browser = play.chromium.launch(executable_path=CHROMIUM, args=["--no-sandbox"])
            page = browser.new_page(viewport=LAPTOP)
            page.add_init_script(_WATCH)
            for name, figure in measure(page, address):
                print(f"{name:28s} {figure}", flush=True)
            browser.close()
        for name, figure in processor_times(Path(folder)):
            print(f"{name:28s} {figure}", flush=True)


if __name__ == "__main__":
    main()
