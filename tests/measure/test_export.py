"""Readings in the forms that other systems take, read back by readers that are not ours."""

import io
import json
from xml.etree import ElementTree as Xml

import numpy as np
import pydicom
import pypdfium2
import pytest
from PIL import Image
from typer.testing import CliRunner

from digitize.formats.aecg import V3
from digitize.formats.measurements import CONCEPTS
from digitize.tracing_files import tracing_files
from measure.cli import app
from measure.export import FORMS, exported, measurements_of
from measure.inputs import Given
from measure.reading import Person, read
from measure.report.pdf import report_pdf
from tests.digitize.formats.dicom_rules import violations
from tests.measure.test_archive import whole


@pytest.fixture(scope="module")
def reading():
    return read(whole(), Person("female", 71.0))


def given(reading, overlay=None):
    return Given(reading.tracing, "chart", {}, overlay)


def picture():
    buffer = io.BytesIO()
    Image.fromarray(np.full((60, 90, 3), 200, np.uint8)).save(buffer, "PNG")
    return buffer.getvalue()


def test_every_interval_has_a_name_and_none_is_lost(reading):
    assert set(CONCEPTS) == set(reading.intervals)
    found = measurements_of(reading)
    assert [n.key for n in found.numbers] == list(reading.intervals)
    for number in found.numbers:
        quantity = reading.intervals[number.key]
        assert number.value == (quantity.value if quantity.known else None)
        assert (number.reason is None) == quantity.known
    assert len(found.findings) == len(reading.findings)


def test_dicom_waveform_with_measurements_keeps_the_rules(reading):
    (content,) = exported(given(reading), reading, "dicom").values()
    assert violations(content) == []
    dataset = pydicom.dcmread(io.BytesIO(content))
    qrs = [
        float(item.NumericValue)
        for item in dataset.WaveformAnnotationSequence
        if "ConceptNameCodeSequence" in item
        and item.ConceptNameCodeSequence[0].CodeValue == "2:16156"
    ]
    assert qrs == [pytest.approx(reading.intervals["qrs_ms"].value, abs=0.05)]


def test_fhir_components_have_codes_units_and_errors(reading):
    observation_class = pytest.importorskip("fhir.resources.observation").Observation
    (content,) = exported(given(reading), reading, "fhir").values()
    read_back = observation_class.model_validate_json(content)
    quantities = {
        c.code.coding[0].code: c for c in read_back.component if c.valueQuantity and c.code.coding
    }
    qrs = quantities["8633-0"].valueQuantity  # LOINC, from memory
    assert float(qrs.value) == pytest.approx(reading.intervals["qrs_ms"].value, abs=0.05)
    assert (qrs.system, qrs.code) == ("http://unitsofmeasure.org", "ms")
    assert float(qrs.extension[0].valueDecimal) == pytest.approx(
        reading.intervals["qrs_ms"].se, abs=0.05
    )
    judged = [c for c in read_back.component if c.valueCodeableConcept]
    assert [c.valueCodeableConcept.text for c in judged] == [f.result for f in reading.findings]
    document = json.loads(content)
    assert document["status"] == "preliminary"
    assert "clinician" in document["note"][0]["text"]


def test_what_was_not_measured_is_absent_with_its_reason():
    from digitize.formats import export
    from digitize.formats.measurements import Measurements, Number

    missing = Measurements((Number("pr_ms", None, None, "no P wave was found"),))
    observation_class = pytest.importorskip("fhir.resources.observation").Observation
    (content,) = export(whole(), "x", "fhir", missing).values()
    last = observation_class.model_validate_json(content).component[-1]
    assert last.valueQuantity is None
    assert last.dataAbsentReason.text == "no P wave was found"
    (aecg,) = export(whole(), "x", "aecg", missing).values()
    assert b"MDC_ECG_TIME_PD_PR" not in aecg


def test_aecg_has_one_annotation_for_each_number_with_an_identifier(reading):
    (content,) = exported(given(reading), reading, "aecg").values()
    found = {
        a.find(f"{{{V3}}}code").get("code"): float(a.find(f"{{{V3}}}value").get("value"))
        for a in Xml.fromstring(content).iter(f"{{{V3}}}annotation")
    }
    known = {key: q.value for key, q in reading.intervals.items() if q.known}
    wanted = {c.refid: known[key] for key, c in CONCEPTS.items() if c.refid and key in known}
    assert found == pytest.approx(wanted, abs=0.05)


# ---- the report as a document ----------------------------------------------------------------


def text_of(pdf):
    document = pypdfium2.PdfDocument(pdf)
    return "\n".join(page.get_textpage().get_text_bounded() for page in document)


def test_pdf_says_what_the_reading_says(reading):
    text = " ".join(text_of(report_pdf(reading)).split())
    assert "This is no diagnosis" in text
    for key in ("qrs_ms", "qt_ms"):
        assert f"{reading.intervals[key].value:.0f} ±" in text
    for title in ("1 Can the tracing be trusted?", "6 What to check by eye"):
        assert title in text
    assert "\\u" not in text  # every letter is one of the font's


def test_pdf_shows_the_overlay_and_gives_the_same_bytes(reading):
    made = report_pdf(reading, overlay_png=picture())
    assert made == report_pdf(reading, overlay_png=picture())
    page = pypdfium2.PdfDocument(made)[0]
    assert [o.type for o in page.get_objects()].count(pypdfium2.raw.FPDF_PAGEOBJ_IMAGE) == 1


def test_pdf_draws_the_beats_in_true_millimetres_on_two_sheets(reading):
    document = pypdfium2.PdfDocument(report_pdf(reading))
    assert len(document) <= 2
    text = text_of(report_pdf(reading))
    assert "septum and front" in text  # a word of the drawing itself
    mm = 72 / 25.4
    widths = [
        (right - left) / mm
        for page in document
        for drawn in page.get_objects([pypdfium2.raw.FPDF_PAGEOBJ_PATH], max_depth=4)
        for left, _, right, _ in [drawn.get_bounds()]
    ]
    # One lead's paper is 44 mm wide: its frame, drawn 0.25 mm thick.
    assert sum(abs(width - 44.25) < 0.1 for width in widths) >= 12


def test_pdf_does_not_name_the_file(reading):
    from dataclasses import replace

    source = replace(reading.tracing.source, file_name="Doe_Jane.png")
    named = replace(reading, tracing=replace(reading.tracing, source=source))
    assert "Doe" not in text_of(report_pdf(named))


@pytest.mark.parametrize("overlay", [None, picture()])
def test_report_in_a_dicom_object_keeps_the_rules(reading, overlay):
    files = exported(given(reading, overlay), reading, "dicom-pdf")
    assert violations(files["chart.report.dcm"]) == []
    dataset = pydicom.dcmread(io.BytesIO(files["chart.report.dcm"]))
    assert dataset.BurnedInAnnotation == ("NO" if overlay is None else "YES")
    assert "This is no diagnosis" in text_of(dataset.EncapsulatedDocument)


# ---- the command -----------------------------------------------------------------------------


def test_command_writes_each_form_and_keeps_what_is_there(tmp_path):
    for name, content in tracing_files(whole(), "chart").items():
        (tmp_path / name).write_bytes(content)

    def call(*words):
        return CliRunner().invoke(app, ["export", str(tmp_path / "chart.json"), *words])

    endings = {".dcm", ".fhir.json", ".aecg.xml", ".report.pdf", ".report.dcm"}
    for form in FORMS:
        result = call("--as", form, "-o", str(tmp_path / "out"))
        assert result.exit_code == 0
        assert "no diagnosis" in result.stdout
    assert {p.name.removeprefix("chart") for p in (tmp_path / "out").iterdir()} == endings
    again = call("--as", "pdf", "-o", str(tmp_path / "out"))
    assert (again.exit_code, "--replace" in again.stderr) == (1, True)
    assert call("--as", "edf").exit_code == 2
