"""Vector pages, pages of free choice, open records and sample pages."""

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pypdfium2 as pdfium
import pytest

from digitize.tracing import LEADS
from tests.drawn.capture import scan_map
from tests.drawn.composition import compose
from tests.drawn.heart import HeartSpec, record_model
from tests.drawn.page import truth_of
from tests.drawn.records import (
    ludb_folder,
    ptbxl_folder,
    read_dicom_example,
    read_ludb,
    read_ptbxl,
)
from tests.drawn.sample_hard_pages import ALL_SAMPLES
from tests.drawn.sample_pages import Sample
from tests.drawn.samples import FOLDER, expected
from tests.drawn.variety import vary_heart, vary_page
from tests.drawn.vector import write_vector_page


@pytest.mark.parametrize("seed", [0, 1, 2, 3])
def test_vector_page_rendered_by_another_program_has_ink_on_the_truth(
    seed: int, tmp_path: Path
) -> None:
    # PDFium renders what the file says; the truth says where the trace must be.
    spec = vary_page(seed)
    spec = replace(spec, pen=replace(spec.pen, colour=(0, 0, 0)))
    truth = write_vector_page(record_model(vary_heart(seed)), spec, tmp_path / "page.pdf")
    with pdfium.PdfDocument(tmp_path / "page.pdf") as document:
        page = document[0]
        assert (page.get_width(), page.get_height()) == pytest.approx(
            tuple(v * 72 / 25.4 for v in spec.paper.size_mm), abs=0.01
        )
        grey = np.asarray(page.render(scale=4).to_pil().convert("L"))
    for panel in truth.panels:
        x_pt, y_pt = truth.page_map.to_px(panel.x_mm, panel.y_mm)
        rows, cols = np.floor(4 * y_pt).astype(int), np.floor(4 * x_pt).astype(int)
        seen = (rows >= 0) & (rows < grey.shape[0]) & (cols >= 0) & (cols < grey.shape[1])
        assert np.percentile(grey[rows[seen], cols[seen]], 95) < 110


@pytest.mark.parametrize("seed", range(40))
def test_pages_of_free_choice_fit_their_sheet(seed: int) -> None:
    spec = vary_page(seed)
    composition = compose(record_model(HeartSpec()), spec)
    right_mm = spec.paper.size_mm[0] - spec.paper.offset_mm[0]
    bottom_mm = spec.paper.size_mm[1] - spec.paper.offset_mm[1]
    for panel in composition.panels:
        assert panel.left_mm > -spec.paper.offset_mm[0]
        assert panel.x_mm[-1] < right_mm
        assert 0 < panel.baseline_mm < bottom_mm
        assert len(panel.mv) > 0.9 * spec.layout.panel_s * panel.fs_hz
    for left_mm, _, mark_right_mm, _ in composition.marks:
        assert left_mm > -spec.paper.offset_mm[0]
        assert mark_right_mm < right_mm


def test_two_pages_of_free_choice_differ() -> None:
    assert len({repr(vary_page(seed)) for seed in range(50)}) == 50
    assert vary_page(3) == vary_page(3)


@pytest.mark.skipif(ludb_folder() is None, reason="LUDB_DIR is not set")
def test_ludb_record_obeys_einthoven_and_is_in_millivolts() -> None:
    mv = dict(zip(LEADS, read_ludb(1).mv, strict=True))
    np.testing.assert_allclose(mv["II"], mv["I"] + mv["III"], atol=1e-9)
    assert 0.3 < np.ptp(mv["II"]) < 5


@pytest.mark.skipif(ptbxl_folder() is None, reason="PTBXL_DIR is not set")
def test_ptbxl_record_is_brought_to_500_per_second() -> None:
    recording = read_ptbxl(3)
    assert recording.mv.shape == (12, 5000)
    assert 0.3 < np.ptp(recording.lead("II")) < 5


def test_dicom_example_beats_as_its_annotations_say() -> None:
    # The recorder's own annotation: RR 982 ms. Its steepest lead repeats itself at that lag.
    lead = read_dicom_example().lead("V5")
    slope = np.diff(lead - lead.mean())
    likeness = np.correlate(slope, slope, "full")[len(slope) - 1 :]
    lag_ms = 2 * (300 + int(np.argmax(likeness[300:700])))
    assert lag_ms == pytest.approx(982, abs=30)


@pytest.mark.parametrize("sample", ALL_SAMPLES, ids=lambda sample: sample.file)
def test_sample_page_is_there_with_its_truth(sample: Sample) -> None:
    path = FOLDER / sample.file
    assert path.stat().st_size < 1_000_000
    recording = record_model(sample.heart)
    page_map = scan_map(sample.page.capture, sample.page.paper)
    truth = truth_of(recording, compose(recording, sample.page), sample.page, page_map)
    written = json.loads(path.with_name(f"{path.stem}.expected.json").read_text())
    assert written == expected(sample, truth)
