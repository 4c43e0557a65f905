"""DICOM objects against the rules, and what a reader that is not ours gets out of them."""

import io

import numpy as np
import pydicom
import pytest
from typer.testing import CliRunner

from digitize.cli import app
from digitize.formats import dicom_document, dicom_scan, export
from digitize.formats.dicom import NUMBERS, REMARKS
from digitize.formats.measurements import CONCEPTS, Judged, Measurements, Number
from digitize.pages import open_pages
from digitize.read import Page
from digitize.tracing import PageSource
from digitize.tracing_files import tracing_files
from tests.digitize.formats.dicom_rules import ECG, TABLES, against, violations
from tests.digitize.formats.test_formats import full, hole
from tests.digitize.made_tracing import tracing

MEASURED = Measurements(
    (
        Number("qrs_ms", 163.96, 2.7),
        Number("qtc_framingham_ms", 431.0, None),
        Number("pr_ms", None, None, "no P wave was found"),
    ),
    (Judged("Complete left bundle branch block", "strict", "met"),),
)
SOURCE = PageSource("chart.png", "ab" * 32, 1, 31, 21, (200.0, 100.0))


def page(shape=(21, 31, 3)):
    """An odd number of pixels, so that padding shows."""
    return Page(np.random.default_rng(3).integers(0, 256, shape).astype(np.uint8), SOURCE)


def read(files):
    (content,) = files.values()
    return pydicom.dcmread(io.BytesIO(content))


# ---- the rules themselves --------------------------------------------------------------------


def test_rules_notice_what_is_wrong():
    dataset = read(export(full(), "x", "dicom", MEASURED))
    del dataset.StudyInstanceUID
    dataset.Modality = "US"
    dataset.AcquisitionDateTime = ""
    dataset.WaveformSequence[0].NumberOfWaveformSamples -= 1
    del dataset.WaveformAnnotationSequence[1].MeasurementUnitsCodeSequence
    dataset.StudyInstanceUID = "1.2.3"
    del dataset.PatientID
    buffer = io.BytesIO()
    dataset.save_as(buffer)
    assert violations(buffer.getvalue()) == [
        "PatientID is missing",
        "Modality is 'US'",
        "AcquisitionDateTime is empty",
        "WaveformAnnotationSequence[1].MeasurementUnitsCodeSequence is missing",
        "WaveformData is not as long as its numbers say",
    ]


def test_rules_pass_an_ecg_of_other_hands():
    """The ECG that pydicom carries, of a real recorder; only our choice of letters is ours."""
    path = pydicom.data.get_testdata_file("waveform_ecg.dcm")
    assert against(pydicom.dcmread(path), TABLES[ECG]) == ["SpecificCharacterSet is 'ISO_IR 100'"]


# ---- ours ------------------------------------------------------------------------------------


@pytest.mark.parametrize("make", [full, hole])
@pytest.mark.parametrize("measured", [None, MEASURED])
def test_waveform_object(make, measured):
    (content,) = export(make(), "x", "dicom", measured).values()
    assert violations(content) == []


def test_measurements_are_annotations_with_their_codes_units_and_errors():
    dataset = read(export(full(), "x", "dicom", MEASURED))
    numbers = [
        (
            item.ConceptNameCodeSequence[0].CodeValue,
            item.ConceptNameCodeSequence[0].CodingSchemeDesignator,
            float(item.NumericValue),
            item.MeasurementUnitsCodeSequence[0].CodeValue,
        )
        for item in dataset.WaveformAnnotationSequence
        if item.AnnotationGroupNumber == NUMBERS
    ]
    assert numbers == [
        ("2:16156", "MDC", 164.0, "ms"),
        ("QTC_FRAMINGHAM_M", "99MILLIVELLUM", 431.0, "ms"),
    ]
    remarks = [
        item.UnformattedTextValue
        for item in dataset.WaveformAnnotationSequence
        if item.AnnotationGroupNumber == REMARKS
    ]
    assert "clinician" in remarks[0]
    assert remarks[1:] == [
        "QRS duration: standard error 2.7 ms",
        "PR interval not measured: no P wave was found",
    ]
    last = dataset.WaveformAnnotationSequence[-1].UnformattedTextValue
    assert last == "Complete left bundle branch block (strict): met"


def test_codes_of_measurements_are_those_of_dicom_context_groups():
    """PS3.16 CID 3227, 3228, 3229, 3689 as shipped with pydicom; heart rate is from memory."""
    from pydicom.sr._concepts_dict import concepts

    published = {
        code: text.lower()
        for entry in concepts["MDC"].values()
        for code, (text, groups) in entry.items()
        if {3227, 3228, 3229, 3689} & set(groups)
    }
    for key, concept in CONCEPTS.items():
        if concept.mdc is None or key == "rate_bpm":
            continue
        first = concept.words.split()[0].lower()
        assert published[f"2:{concept.mdc}"].startswith(first), key
        if "global" not in published[f"2:{concept.mdc}"]:
            assert key.endswith("axis_deg")


@pytest.mark.parametrize("shape", [(21, 31), (21, 31, 3)])
def test_scan_object_holds_the_very_pixels(shape):
    scan = page(shape)
    files = dicom_scan.files(scan, "x")
    assert list(files) == ["x.scan.dcm"]
    assert violations(files["x.scan.dcm"]) == []
    dataset = read(files)
    np.testing.assert_array_equal(dataset.pixel_array, scan.pixels)
    assert [float(v) for v in dataset.NominalScannedPixelSpacing] == [0.254, 0.127]  # down first
    assert (dataset.BurnedInAnnotation, "PatientIdentityRemoved" in dataset) == ("YES", False)


def test_scan_object_is_read_back_as_a_page(tmp_path):
    scan = page()
    (tmp_path / "x.dcm").write_bytes(dicom_scan.files(scan, "x")["x.scan.dcm"])
    (read_page,) = open_pages(tmp_path / "x.dcm")
    np.testing.assert_array_equal(read_page.pixels, scan.pixels)
    assert read_page.source.dpi == pytest.approx((200, 100), abs=0.01)


@pytest.mark.parametrize("shows_page", [True, False])
def test_document_object(shows_page):
    pdf = b"%PDF-1.7 odd"
    files = dicom_document.files(pdf + b"!", SOURCE, "x", shows_page=shows_page)
    assert violations(files["x.report.dcm"]) == []
    dataset = read(files)
    assert dataset.EncapsulatedDocument[: dataset.EncapsulatedDocumentLength] == pdf + b"!"
    assert dataset.BurnedInAnnotation == ("YES" if shows_page else "NO")


def test_objects_of_one_page_are_one_study_and_each_its_own_instance():
    made = full()
    scan = Page(page().pixels, made.source)
    objects = [
        read(export(made, "x", "dicom")),
        read(export(made, "x", "dicom", MEASURED)),
        read(dicom_scan.files(scan, "x")),
        read(dicom_document.files(b"%PDF-", made.source, "x", shows_page=False)),
    ]
    assert len({o.StudyInstanceUID for o in objects}) == 1
    assert len({o.SeriesInstanceUID for o in objects}) == 4
    assert len({o.SOPInstanceUID for o in objects}) == 4
    assert not any(o.PatientName or o.PatientID or o.StudyDate for o in objects)


# ---- the command -----------------------------------------------------------------------------


def test_scan_is_exported_only_where_it_lies_unchanged(tmp_path):
    from dataclasses import replace

    from PIL import Image

    scan = tmp_path / "chart.png"
    Image.fromarray(page().pixels).save(scan)
    (kept,) = open_pages(scan)
    for name, content in tracing_files(replace(tracing(), source=kept.source), "chart").items():
        (tmp_path / name).write_bytes(content)

    def call():
        words = ["export", str(tmp_path / "chart.json"), "--as", "dicom-scan"]
        return CliRunner().invoke(app, words)

    assert call().exit_code == 0
    assert violations((tmp_path / "chart.scan.dcm").read_bytes()) == []
    Image.fromarray(255 - page().pixels).save(scan)
    assert "is not the scan that it was read from" in call().stderr
    scan.unlink()
    assert "its scan is not beside it" in call().stderr
