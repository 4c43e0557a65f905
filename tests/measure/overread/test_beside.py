"""An earlier ECG beside the one that is read: the words of the comparison, and its beat."""

import io
import zipfile

import numpy as np
import pytest

from measure.overread.beside import beside
from measure.overread.corrections import Boundary
from measure.overread.export import export_comparison
from measure.reading_files import document
from tests.measure.overread.made import digital_chain


def _old_and_new(wider_ms):
    chain = digital_chain()
    old = chain.reading()
    at_ms = old.boundaries.overall.qrs_off_ms.value + wider_ms
    return document(old), document(chain.reading([Boundary("qrs_off_ms", at_ms)]))


def test_a_wider_qrs_is_said_in_the_words_of_the_comparison():
    old, new = _old_and_new(40)
    found = beside(old, "before", new, "now")
    (qrs,) = [c for c in found["changes"] if c["label"] == "QRS"]
    assert qrs["verdict"] == "larger"
    assert qrs["sure"] is True
    assert qrs["difference"].startswith("40 ±")
    assert found["headline"][0].startswith("QRS is wider")
    assert any("of one person" in line for line in found["cautions"])


def test_the_old_beat_counts_its_time_from_the_qrs_onset():
    old, new = _old_and_new(0)
    reading, beat = digital_chain().reading(), beside(old, "before", new, "now")["beat"]
    onset_ms = reading.boundaries.overall.qrs_on_ms.value
    assert beat["start_ms"] == pytest.approx(reading.beat.time_ms[0] - onset_ms)
    assert beat["step_ms"] == pytest.approx(1000 / reading.beat.fs_hz)
    row = reading.beat.leads.index("V2")
    np.testing.assert_allclose(beat["mv"]["V2"], reading.beat.mv[row], atol=1e-4)


def test_the_comparison_can_be_taken_away():
    old, new = _old_and_new(40)
    taken = export_comparison(old, "before", new, "später.png")
    assert taken.name == "sp_ter.png.compare.zip"
    with zipfile.ZipFile(io.BytesIO(taken.content)) as archive:
        page, numbers = sorted(archive.namelist())
        assert b"no diagnosis" in archive.read(page)
        assert b'"larger"' in archive.read(numbers)
    assert export_comparison(old, "before", new, "später.png").content == taken.content
