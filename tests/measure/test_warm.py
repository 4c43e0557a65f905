"""The ECG that is read before pages are forked goes through every stage."""

from measure.reading import read
from measure.warm import invented


def test_the_invented_ecg_is_read_to_the_end():
    reading = read(invented())
    assert len(reading.tracing.leads) == 12
    assert abs(reading.intervals["rate_bpm"].value - 75) < 1
    assert reading.intervals["qrs_ms"].known
    assert reading.findings
