"""Every format is read back by a reader that is not ours, within half a step.

Exact millivolts go in (the made page); half a step of 1 µV is the only loss that is allowed.
"""

import io
import json
import struct
from xml.etree import ElementTree as Xml

import numpy as np
import pytest

from digitize.errors import CannotExport
from digitize.formats import FORMATS, export
from digitize.formats.aecg import V3
from digitize.formats.dicom import TWELVE_LEAD_ECG
from digitize.formats.leads import LEAD_CODES, NO_SAMPLE, STEP_MV, lead_table
from digitize.tracing import LEADS
from tests.digitize.made_tracing import leads_at, panel, tracing

HALF_STEP_MV = STEP_MV / 2 * (1 + 1e-9)
TIME_S = np.arange(5000) / 500


def full():
    """A digital-like page: all leads over ten seconds."""
    return tracing(tuple(panel(name, mv) for name, mv in leads_at(TIME_S).items()))


def expected(page):
    """Lead name to millivolts over ten seconds, NaN where nothing was printed."""
    found = {}
    for name in page.leads:
        item = page.lead(name)
        found[name] = np.full(len(TIME_S), np.nan)
        start = round(item.start_s * 500)
        found[name][start : start + len(item.mv)] = item.mv
    return found


def hole():
    """A 3x4+1 page with a stretch of V2 that could not be read."""
    made = tracing()
    made.lead("V2").mv[300:340] = np.nan
    return made


def same(found, page):
    wanted = expected(page)
    assert set(found) == set(wanted)
    for name, mv in wanted.items():
        np.testing.assert_array_equal(np.isnan(found[name]), np.isnan(mv), err_msg=name)
        assert np.nanmax(np.abs(found[name] - mv)) <= HALF_STEP_MV, name


def one(files):
    assert len(files) == 1
    return next(iter(files.values()))


# ---- the common table ------------------------------------------------------------------------


def test_strip_takes_its_lead_and_what_is_unknown_stays_so():
    table = lead_table(hole())
    assert table.names == LEADS
    assert table.steps.shape == (5000, 12)
    missing = dict(zip(table.names, table.missing.sum(axis=0), strict=True))
    assert (missing["II"], missing["V1"], missing["V2"]) == (0, 3750, 3790)


def test_rows_before_the_first_sample_are_left_out():
    table = lead_table(tracing((panel("V1", np.ones(100), start_s=1.0),)))
    assert (table.start_s, len(table.steps)) == (1.0, 100)


def test_nothing_to_export_and_what_is_no_ecg_are_refused():
    with pytest.raises(CannotExport, match="no lead of it holds a sample"):
        lead_table(tracing((panel("V1", np.full(9, np.nan)),)))
    with pytest.raises(CannotExport, match="40 mV"):
        lead_table(tracing((panel("V1", np.full(9, 40.0)),)))


def test_lead_codes_are_those_of_dicom_context_group_3001():
    """PS3.16 CID 3001 as shipped with pydicom, which we did not write."""
    from pydicom.sr._concepts_dict import concepts

    published = {
        code: text
        for entry in concepts["MDC"].values()
        for code, (text, groups) in entry.items()
        if 3001 in groups
    }
    for name, code in LEAD_CODES.items():
        words = published[f"2:{code}"].replace(",", "").split()
        assert name in words, (name, words)


# ---- one reader of others for each -----------------------------------------------------------


@pytest.mark.filterwarnings("ignore:The inplace keyword")  # pandas, of the reader's own code
@pytest.mark.parametrize("make", [full, hole])
def test_wfdb(tmp_path, make):
    import wfdb

    for name, content in export(make(), "chart.p2", "wfdb").items():
        (tmp_path / name).write_bytes(content)
    record = wfdb.rdrecord(str(tmp_path / "chart_p2"))
    assert record.fs == 500
    assert set(record.units) == {"mV"}
    assert record.checksum == [int(np.int16(c)) for c in _checksums(tmp_path / "chart_p2.dat")]
    assert any("Derived from a scanned document" in line for line in record.comments)
    same(dict(zip(record.sig_name, record.p_signal.T, strict=True)), make())


def _checksums(path):
    """Sums of the samples modulo 2**16, as header(5) has them."""
    samples = np.fromfile(path, "<i2").reshape(-1, 12).astype(np.int64)
    return samples.sum(axis=0).astype(np.int16)


def test_edf(tmp_path):
    import pyedflib

    path = tmp_path / "chart.edf"
    path.write_bytes(one(export(full(), "chart", "edf")))
    with pyedflib.EdfReader(str(path)) as edf:
        names = [label.removeprefix("ECG ") for label in edf.getSignalLabels()]
        assert {edf.getPhysicalDimension(k) for k in range(12)} == {"uV"}
        assert {float(edf.getSampleFrequency(k)) for k in range(12)} == {500.0}
        found = {name: edf.readSignal(k) / 1000 for k, name in enumerate(names)}
        assert edf.readAnnotations()[2].tolist() == ["Derived from a scanned document"]
        assert edf.getPatientName() in ("", "X")
    same(found, full())


def test_edf_refuses_gaps_and_says_which():
    with pytest.raises(CannotExport, match=r"a sample is missing, and I, III, aVR"):
        export(hole(), "chart", "edf")


@pytest.mark.parametrize("make", [full, hole])
def test_dicom(make):
    import pydicom

    dataset = pydicom.dcmread(io.BytesIO(one(export(make(), "chart", "dicom"))))
    group = dataset.WaveformSequence[0]
    steps = dataset.waveform_array(0)
    padding = struct.unpack("<h", group[0x5400, 0x100A].value)[0]
    assert padding == NO_SAMPLE
    names = [c.ChannelSourceSequence[0].CodeMeaning for c in group.ChannelDefinitionSequence]
    names = [n.removeprefix("Lead ").split(",")[0] for n in names]
    mv = np.where(steps == padding, np.nan, steps / 1000)
    same(dict(zip(names, mv.T, strict=True)), make())


def test_dicom_object_has_what_the_standard_demands():
    """PS3.3 A.34.3 and C.10.9: types 1 filled, types 2 present, and the object's own limits."""
    import pydicom

    dataset = pydicom.dcmread(io.BytesIO(one(export(hole(), "chart", "dicom"))))
    assert dataset.SOPClassUID == TWELVE_LEAD_ECG == dataset.file_meta.MediaStorageSOPClassUID
    assert dataset.Modality == "ECG"
    filled = "StudyInstanceUID SeriesInstanceUID SOPInstanceUID ContentDate ContentTime"
    for keyword in (*filled.split(), "AcquisitionDateTime", "InstanceNumber", "Manufacturer"):
        assert dataset[keyword].value not in ("", None), keyword
    for keyword in ("PatientName", "PatientID", "PatientBirthDate", "PatientSex", "StudyID"):
        assert not dataset[keyword].value, keyword
    for keyword in ("StudyInstanceUID", "SeriesInstanceUID", "SOPInstanceUID"):
        assert dataset[keyword].value.is_valid
    group = dataset.WaveformSequence[0]
    assert group.WaveformOriginality == "DERIVED"
    assert 200 <= group.SamplingFrequency <= 1000
    assert 1 <= group.NumberOfWaveformChannels <= 13
    assert (group.WaveformBitsAllocated, group.WaveformSampleInterpretation) == (16, "SS")
    assert (dataset.PatientIdentityRemoved, dataset.LongitudinalTemporalInformationModified) == (
        "YES",
        "REMOVED",
    )


@pytest.mark.parametrize("make", [full, hole])
def test_fhir(make):
    observation_class = pytest.importorskip("fhir.resources.observation").Observation
    read = observation_class.model_validate_json(one(export(make(), "chart", "fhir")))
    assert read.status == "preliminary"
    assert read.subject is None
    found = {}
    for component in read.component:
        sampled = component.valueSampledData
        assert (sampled.intervalUnit, float(sampled.interval)) == ("ms", 2.0)
        cells = sampled.data.split(" ")
        steps = np.array([np.nan if cell == "E" else float(cell) for cell in cells])
        uv = float(sampled.origin.value) + steps * float(sampled.factor)
        found[component.code.text.removeprefix("Lead ")] = uv / 1000
    same(found, make())


def test_fhir_codes_are_those_of_its_published_example():
    """The example "ekg" of the FHIR specification: 131328, and 131329, 131330, 131389 (memory)."""
    document = json.loads(one(export(full(), "chart", "fhir")))
    assert document["code"]["coding"][0]["code"] == "131328"
    codes = [c["code"]["coding"][0]["code"] for c in document["component"][:3]]
    assert codes == ["131329", "131330", "131389"]


@pytest.mark.parametrize("make", [full, hole])
def test_aecg(make):
    root = Xml.fromstring(one(export(make(), "chart", "aecg")))
    found = {name: np.full(5000, np.nan) for name in make().leads}
    for sequences in root.iter(f"{{{V3}}}sequenceSet"):
        start, step_s, length = None, None, None
        for sequence in sequences.iter(f"{{{V3}}}sequence"):
            code = sequence.find(f"{{{V3}}}code").get("code")
            value = sequence.find(f"{{{V3}}}value")
            part = {child.tag.partition("}")[2]: child for child in value}
            if code == "TIME_RELATIVE":
                start, step_s = (float(part[k].get("value")) for k in ("head", "increment"))
                continue
            digits = np.array(part["digits"].text.split(), float)
            assert length in (None, len(digits))  # of one length within a set
            length = len(digits)
            assert part["scale"].get("unit") == part["origin"].get("unit") == "uV"
            name = next(n for n in LEADS if f"MDC_ECG_LEAD_{n.upper()}" == code)
            row = round(start / step_s)
            found[name][row : row + length] = digits * float(part["scale"].get("value")) / 1000
    same(found, make())


def test_aecg_elements_stand_in_the_order_of_its_schema():
    """AnnotatedECG and series of the published schema (memory): id, code, ..., component."""
    root = Xml.fromstring(one(export(hole(), "chart", "aecg")))
    assert root.tag == f"{{{V3}}}AnnotatedECG"
    order = [child.tag.partition("}")[2] for child in root]
    assert order == ["id", "code", "text", "effectiveTime", "componentOf", "component"]
    series = root.find(f"{{{V3}}}component/{{{V3}}}series")
    names = [child.tag.partition("}")[2] for child in series]
    assert names[:4] == ["id", "code", "effectiveTime", "author"]
    # the strip, three columns, V1 with V3, V2 before its hole and after it
    assert names[4:] == ["component"] * 7


# ---- what holds for all ----------------------------------------------------------------------


@pytest.mark.parametrize("form", FORMATS)
def test_same_tracing_same_bytes_and_no_name_of_the_file_in_them(form):
    made = export(full(), "page", form)
    assert made == export(full(), "page", form)
    assert not any(b"chart.png" in content for content in made.values())


@pytest.mark.parametrize("form", ["dicom", "fhir", "aecg"])
def test_a_lead_without_a_code_is_refused(form):
    with pytest.raises(CannotExport, match="lead 'X9' has no code"):
        export(tracing((panel("X9", np.ones(500)),)), "chart", form)


def test_unknown_format_names_the_known():
    with pytest.raises(ValueError, match="csv, wfdb, edf, dicom, fhir, aecg"):
        export(full(), "chart", "pdf")
