"""Lines and words of PDF pages, checked against how the library itself rasterises them."""

import math

import numpy as np
import pypdfium2 as pdfium
import pytest

from digitize.drawing import Drawing
from digitize.pdf_paths import read_drawing
from tests.digitize import made_files as made

SCALE = 300 / 72  # pixels per point


def opened(content: bytes, *, page: bytes = b"", form: bytes = b"", box: bytes = b"0 0 192 144"):
    """The only page of a PDF with that content; `form` is an XObject named X: entries, content."""
    entries, _, inside = form.partition(b"|")
    document = pdfium.PdfDocument(
        made.pdf(
            b"<</Type/Catalog /Pages 2 0 R>>",
            b"<</Type/Pages /Kids[3 0 R] /Count 1>>",
            b"<</Type/Page /Parent 2 0 R /MediaBox[%s] %s /Contents 4 0 R"
            b" /Resources<</XObject<</X 5 0 R>> /Font<</F 6 0 R>>>>>>" % (box, page),
            made.stream(b"", content),
            made.stream(b"/Type/XObject /Subtype/Form " + entries, inside),
            b"<</Type/Font /Subtype/Type1 /BaseFont/Helvetica>>",
        )
    )
    return document[0]


def drawing_of(page) -> Drawing:
    width, height = (math.ceil(v * SCALE) for v in page.get_size())
    drawing = read_drawing(page, width, height)
    assert drawing is not None
    return drawing


def middle_of_ink(page) -> np.ndarray:
    """Centre of all that is black on the rendered page, x and y in pixels."""
    dark = 255 - page.render(scale=SCALE).to_numpy()[..., :3].mean(axis=2)
    rows, cols = np.indices(dark.shape)
    return np.array([(cols * dark).sum(), (rows * dark).sum()]) / dark.sum()


LINE = b"2 w 40 50 m 90 50 l S "  # its middle is (65, 50)


@pytest.mark.parametrize(
    "page",
    [
        opened(LINE),
        opened(b"q 1.2 0 0 0.8 10 20 cm " + LINE + b"Q"),
        opened(b"q 0 1 -1 0 150 10 cm " + LINE + b"Q"),
        opened(LINE, page=b"/Rotate 90"),
        opened(LINE, page=b"/Rotate 270"),
        opened(LINE, page=b"/CropBox[20 30 180 120]"),
        opened(LINE, box=b"-30 -10 170 130"),
        opened(b"q 0.5 0 0 0.5 40 30 cm /X Do Q", form=b"/BBox[0 0 200 140]|" + LINE),
        opened(
            b"q 1 0 0 1 12 7 cm /X Do Q",
            form=b"/BBox[0 0 200 140] /Matrix[0.9 0 0 1.1 3 4]|q 1 0 0 1 5 6 cm " + LINE + b"Q",
        ),
    ],
    ids=["plain", "scaled", "turned", "page90", "page270", "crop", "box", "form", "form matrix"],
)
def test_a_line_lies_where_the_page_shows_it(page) -> None:
    # Outside check: PDFium's rasteriser, whose edges are good to an eighth of a pixel.
    line = drawing_of(page).lines[0]
    np.testing.assert_allclose(line.points_px.mean(axis=0), middle_of_ink(page), atol=0.15)


def test_width_and_resolution_are_those_of_the_document() -> None:
    line = drawing_of(opened(b"q 0.5 0 0 0.5 0 0 cm 3 w 10.25 20 m 90.5 21.75 l S Q")).lines[0]
    assert line.width_px == pytest.approx(1.5 * SCALE, rel=1e-3)
    # Coordinates have two decimals, in units of half a point.
    assert line.step_px == pytest.approx(0.01 * 0.5 * SCALE, rel=1e-3)


def test_a_page_in_points_has_72_to_the_inch() -> None:
    assert drawing_of(opened(LINE)).unit_px_per_mm == pytest.approx(300 / 25.4, rel=1e-3)


def test_flattened_curve_is_round() -> None:
    # Four cubic curves with k = 0.5523 are a circle to 0.03 % (a classical approximation).
    r, k = 40, 22.092
    arc = b"%f %f m %f %f %f %f %f %f c S" % (
        100 + r,
        70,
        100 + r,
        70 + k,
        100 + k,
        70 + r,
        100,
        110,
    )
    points = drawing_of(opened(arc)).lines[0].points_px
    middle = np.array([100 * SCALE, (144 - 70) * SCALE]) - 0.5
    radius = np.hypot(*(points - middle).T)
    assert len(points) == 9
    np.testing.assert_allclose(radius, r * SCALE, rtol=1e-3)


def test_subpaths_are_lines_of_their_own_and_closed_ones_come_home() -> None:
    lines = drawing_of(opened(b"10 10 m 20 10 l 30 20 m 40 20 l 40 30 l h S")).lines
    assert [len(line.points_px) for line in lines] == [2, 4]
    np.testing.assert_array_equal(lines[1].points_px[0], lines[1].points_px[-1])


def test_what_a_clip_hides_is_cut_off() -> None:
    steps = b" ".join(b"%d %d l" % (x, 70 + x % 3) for x in range(12, 190, 2))
    page = opened(b"q 50 0 60 140 re W n 10 70 m " + steps + b" S Q 0 20 m 300 20 l S")
    clipped, ruled = drawing_of(page).lines
    x_pt = (clipped.points_px[:, 0] + 0.5) / SCALE
    assert x_pt.min() == pytest.approx(50, abs=0.1)
    assert x_pt.max() == pytest.approx(110, abs=0.1)
    # A straight line across the edge of the page ends there.
    np.testing.assert_allclose((ruled.points_px[:, 0] + 0.5) / SCALE, [0, 192], atol=0.3)


def test_a_line_along_the_edge_of_its_clip_is_kept() -> None:
    # The first sample of a trace often stands exactly where its box is cut.
    steps = b" ".join(b"%.3f %d l" % (50.004 + x, 70 + x % 3) for x in range(2, 58, 2))
    page = opened(b"q 50.01 0 60 140 re W n 50.004 70 m " + steps + b" S Q")
    (line,) = drawing_of(page).lines
    assert len(line.points_px) == 29


def test_a_thin_filled_bar_is_a_line_along_its_middle() -> None:
    upright, level = drawing_of(opened(b"30 10 0.5 100 re 10 40 150 0.25 re f")).lines
    np.testing.assert_allclose((upright.points_px[:, 0] + 0.5) / SCALE, 30.25, atol=0.01)
    assert np.ptp(upright.points_px[:, 1]) == pytest.approx(100 * SCALE, abs=0.1)
    assert np.ptp(level.points_px[:, 1]) == pytest.approx(0, abs=1e-6)
    assert level.width_px == pytest.approx(0.25 * SCALE, abs=0.01)


def test_fills_and_invisible_strokes_are_no_lines() -> None:
    page = opened(b"10 10 50 50 re f 20 20 30 30 re n " + LINE)
    assert len(drawing_of(page).lines) == 1


def test_a_page_without_lines_has_no_drawing() -> None:
    page = opened(b"BT /F 12 Tf 10 10 Td (II) Tj ET")
    assert read_drawing(page, 800, 600) is None


def test_words_come_with_the_box_that_is_seen() -> None:
    text = b"BT /F 20 Tf 1 0 0 1 30 60 Tm (aVR  V1) Tj ET "
    words = drawing_of(opened(text + b"0 0 m 1 0 l S")).words
    assert [word.text for word in words] == ["aVR", "V1"]
    assert [word.turn_deg for word in words] == [0, 0]
    grey = opened(text).render(scale=SCALE).to_numpy().mean(axis=2)
    rows, cols = np.nonzero(grey < 200)
    left, top = words[0].box_px[:2]
    right, bottom = words[-1].box_px[2:]
    seen = [cols.min(), rows.min(), cols.max(), rows.max()]
    # Antialiasing and hinting move an edge by up to a pixel and a half.
    np.testing.assert_allclose([left, top, right, bottom], seen, atol=1.5)


@pytest.mark.parametrize(
    ("matrix", "turn_deg"),
    [(b"0 1 -1 0", 270), (b"-1 0 0 -1", 180), (b"0 -1 1 0", 90), (b"1 0.3 -0.3 1", None)],
)
def test_words_know_how_they_are_turned(matrix: bytes, turn_deg: int | None) -> None:
    text = b"BT /F 20 Tf %s 90 70 Tm (aVR) Tj ET " % matrix
    words = drawing_of(opened(text + LINE)).words
    assert words[0].turn_deg == turn_deg
    if turn_deg is not None:
        assert [word.text for word in words] == ["aVR"]


@pytest.mark.parametrize("turn_deg", [90, 180, 270])
def test_turned_drawing_follows_its_pixels(turn_deg: int) -> None:
    drawing = drawing_of(opened(LINE))
    pixels = np.zeros((600, 800))
    col, row = np.rint(drawing.lines[0].points_px[0]).astype(int)
    pixels[row, col] = 1
    turned = drawing.turned(turn_deg, pixels.shape)
    want_row, want_col = np.argwhere(np.rot90(pixels, -turn_deg // 90))[0]
    np.testing.assert_allclose(turned.lines[0].points_px[0], [want_col, want_row], atol=0.51)


def test_words_stand_upright_once_the_page_is_turned() -> None:
    drawing = drawing_of(opened(b"BT /F 20 Tf 0 1 -1 0 90 70 Tm (aVR) Tj ET " + LINE))
    turned = drawing.turned(90, (600, 800))
    assert turned.words[0].turn_deg == 0
    left, top, right, bottom = turned.words[0].box_px
    assert right - left > bottom - top > 0
