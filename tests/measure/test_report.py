"""Table and report say what was measured, what was not and why, and never a diagnosis."""

import base64
import io
import xml.etree.ElementTree as ET
from dataclasses import replace
from html.parser import HTMLParser

import pytest
from PIL import Image
from rich.console import Console

from digitize.tracing import Check, Known
from measure.quantity import missing
from measure.questions import answer
from measure.report import report
from measure.report.beats import beats_caption, draw_beats
from measure.table import print_reading
from measure.wording import NOTICE
from tests.measure import made


class Page(HTMLParser):
    """Text, tags and the addresses that a page would load; open tags must be closed in order."""

    VOID = ("meta", "img", "br", "rect", "line", "path", "polyline", "polygon")

    def __init__(self, html):
        super().__init__()
        self.words, self.tags, self.loads, self.open = [], [], [], []
        self.feed(html)
        assert self.open == []

    def handle_starttag(self, tag, attributes):
        self.tags.append(tag)
        self.loads += [v for k, v in attributes if k in ("src", "href", "srcset", "data")]
        if tag not in self.VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        if tag not in self.VOID:
            assert self.open.pop() == tag

    def handle_data(self, data):
        self.words.append(data)

    @property
    def text(self):
        return " ".join(" ".join(self.words).split())


def table_text(reading):
    stream = io.StringIO()
    print_reading(reading, Console(file=stream, width=200))
    return " ".join(stream.getvalue().split())


QUESTIONS = (
    "Can the tracing be trusted?",
    "What is the rhythm?",
    "How wide is the QRS",
    "Which pattern?",
    "On what evidence?",
    "What to check by eye",
)


@pytest.mark.parametrize("show", [table_text, lambda r: Page(report(r)).text])
def test_answers_come_in_the_order_of_the_questions(show):
    text = show(made.reading())
    places = [text.index(question) for question in QUESTIONS]
    assert places == sorted(places)


@pytest.mark.parametrize("show", [table_text, lambda r: Page(report(r)).text])
def test_both_carry_numbers_findings_and_the_notice(show):
    text = show(made.reading(qrs_ms=made.ms(150, 4)))
    assert "QRS 150 ± 4 ms" in text
    assert "Meets the criteria of: left bundle branch block (European 2013)" in text
    assert "R peak time (> 60 ms): V5 90 ± 0, V6 90 ± 0" in text
    assert NOTICE in text
    assert "no diagnosis" in text


@pytest.mark.parametrize("show", [table_text, lambda r: Page(report(r)).text])
def test_both_say_what_was_not_measured_and_why(show):
    text = show(made.reading(pr_ms=missing("ms", "no P wave found")))
    assert "not measured: no P wave found" in text


@pytest.mark.parametrize("show", [table_text, lambda r: Page(report(r)).text])
def test_both_show_failed_checks_and_assumed_scales_first(show):
    made_reading = made.reading()
    tracing = replace(
        made_reading.tracing,
        speed_mm_s=Known(25.0, "assumed"),
        checks=(Check("leads", False, "III is not II - I", 0.4, 0.1, ("III",)),),
    )
    text = show(replace(made_reading, tracing=tracing))
    assert "LOOK: III is not II - I" in text
    assert "25 mm/s (ASSUMED, not seen on the page)" in text


def test_normal_conduction_meets_no_block():
    reading = made.reading(made.normal_leads(), qrs_ms=made.ms(90))
    assert answer(reading).headline == (
        "QRS 90 ± 0 ms. Sinus P waves, rate 60.0 ± 0.2 /min.",
        "Meets the criteria of no conduction block that is judged here.",
    )


def test_open_definitions_with_one_reason_are_named_together():
    by_eye = answer(made.reading()).by_eye
    (voltage,) = [line for line in by_eye if "withheld" in line]
    assert voltage.startswith("Open: left ventricular voltage (Sokolow-Lyon), left ventricular")


def test_report_loads_nothing_and_runs_nothing():
    stream = io.BytesIO()
    Image.new("RGB", (6, 4), "white").save(stream, "PNG")
    page = Page(report(made.reading(), overlay_png=stream.getvalue()))
    assert len(page.loads) == 1
    kind, data = page.loads[0].split(",")
    assert kind == "data:image/webp;base64"
    with Image.open(io.BytesIO(base64.b64decode(data))) as picture:
        assert picture.size == (6, 4)
    assert "script" not in page.tags
    assert "link" not in page.tags
    assert "url(" not in report(made.reading())


def test_report_escapes_what_comes_from_outside():
    reading = made.reading()
    source = replace(reading.tracing.source, file_name="<script>alert(1)</script>.png")
    html = report(replace(reading, tracing=replace(reading.tracing, source=source)))
    assert "<script" not in html
    assert "&lt;script&gt;" in html


def test_report_names_source_version_options_and_corrections():
    reading = made.reading()
    tracing = replace(
        reading.tracing,
        options={"speed_mm_s": 25.0, "max_megapixels": 120.0},
        corrections=({"lead": "V1"},),
    )
    text = Page(report(replace(reading, tracing=tracing))).text
    assert reading.tracing.source.sha256 in text
    assert '{"speed_mm_s": 25.0}' in text
    assert '[{"lead": "V1"}]' in text


def test_same_reading_gives_the_same_page():
    assert report(made.reading()) == report(made.reading())


def drawing(reading):
    return ET.fromstring(draw_beats(reading).replace(' xmlns="http://www.w3.org/2000/svg"', ""))


def test_beats_are_drawn_to_scale():
    reading = made.reading()
    svg = drawing(reading)
    assert "50 mm/s, 10 mm/mV" in beats_caption(reading)
    width = float(svg.get("width").removesuffix("mm"))
    assert svg.get("viewBox").split()[2] == f"{width:g}"  # one unit is one millimetre
    traces = [p for p in svg.iter("polyline") if p.get("stroke-width") == "0.3"]
    assert len(traces) == 12
    heights = []
    for trace in traces:
        y = [float(point.split(",")[1]) for point in trace.get("points").split()]
        heights.append(max(y) - min(y))
    # lead I: R of 1.0 mV and T of -0.3 mV; V1: S of -1.5 mV and T of 0.3 mV
    assert heights[0] == pytest.approx(13.0, abs=0.1)
    assert heights[4] == pytest.approx(18.0, abs=0.1)


def test_tall_beats_share_one_smaller_gain():
    reading = made.reading()
    beat = replace(reading.beat, mv=reading.beat.mv * 6)
    assert "50 mm/s, 2.5 mm/mV" in beats_caption(replace(reading, beat=beat))


def test_evidence_is_marked_on_the_beat():
    words = [element.text for element in drawing(made.reading()).iter("text")]
    assert words.count("no q") == 3  # I, V5 and V6, where the definitions ask for it
    assert words.count("90") == 2  # R peak time in V5 and V6
    notches = [p for p in drawing(made.reading()).iter("polygon") if p.get("fill") == "#8a3b00"]
    assert len(notches) == 4


def test_lead_without_a_beat_is_named_not_drawn():
    leads = made.lbbb_leads()
    leads["V6"] = replace(leads["V6"], beats=0)
    reading = made.reading(leads)
    words = [element.text for element in drawing(reading).iter("text")]
    assert "V6: not measured" in words
