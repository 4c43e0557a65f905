"""Whole pages, from file to leads: a sample page against its truth, and pages that are no ECG."""

import json
from pathlib import Path

import numpy as np
import pytest
import scipy as sp
from PIL import Image, ImageDraw, ImageFont

import digitize
from digitize.errors import InputError, ProgramFault
from digitize.options import Options
from digitize.read import Stages, read_stages
from digitize.tracing import LEADS
from digitize.tracing_files import SCHEMA, to_json

SAMPLES = Path(__file__).parents[2] / "sample_scans"


@pytest.fixture(scope="module")
def stages() -> Stages:
    (result,) = read_stages(SAMPLES / "lafb_6x2.jpg", Options())
    return result


@pytest.fixture(scope="module")
def expected() -> dict:
    return json.loads((SAMPLES / "lafb_6x2.expected.json").read_text("utf-8"))


def test_sample_page_is_read_as_it_was_drawn(stages, expected):
    tracing = stages.tracing
    assert tracing.leads == LEADS
    assert tracing.layout.value == expected["layout"]
    assert tracing.speed_mm_s.value == pytest.approx(expected["speed_mm_s"])
    assert tracing.gain_mm_mv.value == pytest.approx(expected["gain_mm_mv"], rel=0.02)
    found = {panel.lead: panel for panel in tracing.panels}
    for truth in expected["panels"]:
        panel = found[truth["lead"]]
        assert (panel.row, panel.strip) == (truth["row"], truth["strip"])
        assert panel.start_s == pytest.approx(truth["start_s"], abs=0.02)  # half a millimetre
        assert np.isfinite(panel.mv).mean() > 0.95


@pytest.mark.parametrize("name", ["fax_coarse_rbbb_3x4_1.tif", "vector_normal_6x2.pdf"])
def test_pages_without_a_grid_or_without_pixels_are_read_as_drawn(name):
    (tracing,) = digitize.read_pages(SAMPLES / name)
    truth = json.loads((SAMPLES / name).with_suffix(".expected.json").read_text("utf-8"))
    assert tracing.layout.value == truth["layout"]
    assert tracing.speed_mm_s.value == truth["speed_mm_s"]
    assert tracing.gain_mm_mv.value == truth["gain_mm_mv"]
    place = {(p.lead, p.strip, p.row): p.start_s for p in tracing.panels}
    # Half a millimetre, and what a scale without a grid may be out: 1 % of 250 mm.
    for panel in truth["panels"]:
        start_s = place[panel["lead"], panel["strip"], panel["row"]]
        assert start_s == pytest.approx(panel["start_s"], abs=0.12)


def test_sample_page_checks_itself(stages):
    checks = [check for check in stages.tracing.checks if check.name == "lead_relations"]
    assert checks
    assert all(check.passed for check in checks)


def test_json_of_a_real_page_agrees_with_the_schema(stages):
    jsonschema = pytest.importorskip("jsonschema", reason="the extra test is not installed")
    document = json.loads(to_json(stages.tracing))
    jsonschema.validate(document, json.loads(SCHEMA.read_text("utf-8")))


def test_same_page_same_bytes(stages):
    (again,) = digitize.read_pages(SAMPLES / "lafb_6x2.jpg")
    assert to_json(again) == to_json(stages.tracing)


def test_a_turned_page_gives_the_same_leads_and_says_how_it_was_turned(stages, tmp_path):
    image = Image.open(SAMPLES / "lafb_6x2.jpg")
    path = tmp_path / "turned.png"
    image.transpose(Image.Transpose.ROTATE_90).save(path, dpi=image.info["dpi"])
    (tracing,) = digitize.read_pages(path)  # turned anticlockwise: it takes 90 degrees clockwise
    assert tracing.geometry["turn_deg"] == 90
    assert (tracing.source.width_px, tracing.source.height_px) == (image.height, image.width)
    assert tracing.options["turn_deg"] is None
    for one, other in zip(tracing.panels, stages.tracing.panels, strict=True):
        assert one.lead == other.lead
        both = np.isfinite(one.mv) & np.isfinite(other.mv)
        np.testing.assert_allclose(one.mv[both], other.mv[both], atol=0.02)


# ---- what is no ECG --------------------------------------------------------------------------


def blank() -> np.ndarray:
    return np.full((900, 1240), 250, np.uint8)


def clouds() -> np.ndarray:
    """Soft shapes in colour, as of a photograph of something else."""
    rng = np.random.default_rng(11)
    noise = sp.ndimage.gaussian_filter(rng.normal(size=(900, 1240, 3)), (25, 25, 0))
    return np.clip(128 + 128 * noise / np.abs(noise).max() * 2, 0, 255).astype(np.uint8)


def letter() -> np.ndarray:
    """A page of writing, without a grid."""
    image = Image.new("L", (1240, 900), 255)
    draw, font = ImageDraw.Draw(image), ImageFont.load_default(22)
    for row in range(8):
        draw.text(
            (60, 60 + 32 * row), "the tide went out over the marram and the sand " * 2, 0, font
        )
    return np.asarray(image)


@pytest.mark.parametrize("picture", [blank, clouds, letter])
def test_a_page_without_an_ecg_is_refused_in_words(tmp_path, picture):
    path = tmp_path / "page.png"
    Image.fromarray(picture()).save(path)
    errors: list[InputError] = []
    assert list(digitize.read_pages(path, on_error=errors.append)) == []
    (error,) = errors
    assert not isinstance(error, ProgramFault), str(error)
    assert str(error).startswith("page.png, page 1: ")
    with pytest.raises(type(error)):
        list(digitize.read_pages(path))


# ---- mistakes of our own ---------------------------------------------------------------------


def test_a_fault_of_the_program_costs_one_page_when_someone_listens(tmp_path, monkeypatch):
    def broken(page, options, **hooks):
        raise IndexError("index 7 is out of bounds")

    monkeypatch.setattr("digitize.read.read_page", broken)
    path = tmp_path / "many.tiff"
    Image.new("L", (9, 7), 255).save(path, save_all=True, append_images=[Image.new("L", (9, 7))])
    errors: list[InputError] = []
    assert list(digitize.read_pages(path, on_error=errors.append)) == []
    assert [type(error) for error in errors] == [ProgramFault, ProgramFault]
    assert "many.tiff, page 2: the program failed on this page (IndexError at line" in str(
        errors[1]
    )
    with pytest.raises(IndexError):
        list(digitize.read_pages(path))
