"""What is covered and what stays, on a page whose every place is known."""

from dataclasses import replace

import numpy as np
import pytest
from PIL import Image
from typer.testing import CliRunner

from digitize.cli import app
from digitize.geometry import to_geometry
from digitize.ink import Ink
from digitize.pages import Page
from digitize.read import Stages
from digitize.redact import cover, leftover, names_lead, states_run
from digitize.sheet import Box, Raster
from digitize.tracing import LEADS
from digitize.words import Printing, Word
from tests.digitize.made_tracing import SOURCE, grid, layout_of, tracing

PX_PER_MM = 8
PAPER, INK = 230, 10
HEADER, RUN, NAME = Box(20, 5, 80, 9), Box(20, 200, 90, 204), Box(20, 42, 24, 45)
IN_PANEL = Box(100, 45, 120, 48)


def at(box):
    rows = slice(round(box.top_mm * PX_PER_MM), round(box.bottom_mm * PX_PER_MM))
    return rows, slice(round(box.left_mm * PX_PER_MM), round(box.right_mm * PX_PER_MM))


def words(*pairs):
    lines = tuple(Word(box, text, 0.95, {}) for text, box in pairs)
    return Printing(words=(), lines=lines, letters=tuple(box for _, box in pairs))


@pytest.fixture
def page(monkeypatch):
    """Stages of a page with a header, a run, a lead name and a note within a panel."""
    printed = words(
        ("Invented Patient 0417", HEADER),
        ("25mm/s 10mm/mV 0.05-150Hz", RUN),
        ("I", NAME),
        ("seen by A. Nobody", IN_PANEL),
    )
    monkeypatch.setattr("digitize.redact.read_printing", lambda ink: printed)
    pixels = np.full((1680, 2320), PAPER, np.uint8)
    for box in (HEADER, RUN, NAME, IN_PANEL):
        pixels[at(box)] = INK
    made = tracing()
    layout, strokes = layout_of(made)
    made = replace(made, geometry=to_geometry(grid(PX_PER_MM), layout, strokes))
    page = Page(pixels, SOURCE)
    return Stages(page, grid(PX_PER_MM), None, ink_of(pixels), None, layout, strokes, made)


def ink_of(pixels):
    """The ink of a page whose pixels are a raster of whole millimetres."""
    shape, scale = pixels.shape, (PX_PER_MM, PX_PER_MM)
    density = (pixels == INK).astype(np.float32)
    ruled_mm = (0.0, 0.0, shape[1] / PX_PER_MM, shape[0] / PX_PER_MM)
    raster = Raster(0.0, 0.0, PX_PER_MM)
    return Ink(density, np.zeros(shape, bool), raster, 0.01, ruled_mm, scale)


def test_header_and_notes_are_covered_names_and_run_stay(page):
    before = page.page.pixels.copy()
    covered = cover(page).pixels
    for box in (HEADER, IN_PANEL):
        assert (covered[at(box)] == PAPER).all()
    for box in (RUN, NAME):
        assert (covered[at(box)] == INK).all()
    np.testing.assert_array_equal(page.page.pixels, before)


def test_what_the_recogniser_did_not_see_outside_the_panels_is_covered_too(page):
    unseen = Box(200, 12, 220, 16)
    page.page.pixels[at(unseen)] = INK
    assert (cover(page).pixels[at(unseen)] == PAPER).all()


def test_writing_within_a_panel_that_is_no_letter_is_covered_too(page):
    """A flourish of 20 mm near the upper edge of the panel, beyond the R waves."""
    y_mm = page.tracing.geometry["panels"][0]["baseline_mm"] - 17
    flourish = Box(30, y_mm, 50, y_mm + 1.5)
    page.page.pixels[at(flourish)] = INK
    written = replace(page, ink=ink_of(page.page.pixels))
    assert (cover(written).pixels[at(flourish)] == PAPER).all()


def test_a_trace_that_leaves_its_panel_stays(page):
    first = page.tracing.panels[0]
    first.mv[600:620] = 2.5  # 25 mm above its zero line, which lies 17.5 mm below the panel's edge
    x_mm = first.box_mm[0] + 610 / 500 * 25
    y_mm = page.tracing.geometry["panels"][0]["baseline_mm"] - 25
    spot = (round(y_mm * PX_PER_MM), round(x_mm * PX_PER_MM))
    page.page.pixels[spot] = INK
    assert y_mm < first.box_mm[1]
    assert cover(page).pixels[spot] == INK


@pytest.mark.parametrize(
    ("text", "run"),
    [
        ("25 mm/s 10 mm/mV 0.05-150 Hz", True),
        ("25mm/s", True),
        ("25 mm/s 0417331", False),
        ("25 mm/s Doe", False),
        ("123", False),
        ("", False),
    ],
)
def test_a_run_is_a_run_and_nothing_else(text, run):
    assert states_run(text) is run


@pytest.mark.parametrize(("text", "name"), [("aVR", True), ("v1", True), ("V1 Doe", False)])
def test_lead_name_and_nothing_else(text, name):
    assert names_lead(text, LEADS) is name


def test_leftover_printing_is_found(page, monkeypatch):
    assert leftover(page) == ["Invented Patient 0417", "seen by A. Nobody"]
    rest = words(("25mm/s", RUN), ("I aVR V1 V4", NAME))
    monkeypatch.setattr("digitize.redact.read_printing", lambda ink: rest)
    assert leftover(page) == []


# ---- the command -----------------------------------------------------------------------------


@pytest.fixture
def scan(tmp_path, page, monkeypatch):
    """A file with metadata whose pages read as `page`, and again so after they were covered."""
    stages = replace(page, page=replace(page.page, source=replace(SOURCE, file_name="scan.png")))
    monkeypatch.setattr("digitize.redact_command.read_stages", lambda *_, **__: iter([stages]))
    monkeypatch.setattr("digitize.redact_command.read_page", lambda *_: stages)
    path = tmp_path / "scan.png"
    exif = Image.Exif()
    exif[0x010E] = "Invented Patient"  # ImageDescription
    Image.fromarray(page.page.pixels).save(path, exif=exif)
    return path


def run(*args):
    return CliRunner().invoke(app, ["redact", *map(str, args)])


def test_copy_has_no_metadata_and_the_source_stays(scan, monkeypatch):
    monkeypatch.setattr("digitize.redact_command.leftover", lambda stages: [])
    before = scan.read_bytes()
    assert run(scan).exit_code == 0
    with Image.open(scan.with_name("scan.redacted.png")) as copy:
        assert set(copy.info) <= {"dpi"}
        assert not copy.getexif()
    assert scan.read_bytes() == before
    assert "--replace" in run(scan).stderr


def test_page_that_still_holds_printing_is_refused_without_repeating_it(scan):
    result = run(scan)
    assert result.exit_code == 1
    assert "2 lines of printing can still be read" in result.stderr
    assert "Patient" not in result.output
    assert not scan.with_name("scan.redacted.png").exists()
