"""The rhythm statement says what is shown, and no more."""

import numpy as np
import pytest

from measure.reading import read
from measure.rhythm import Rhythm
from measure.sources import tracing_from_samples
from tests.drawn.heart import LEADS, HeartSpec
from tests.measure.model import as_page, digital
from tests.measure.open_data import folder, ludb_tracing


def rhythm_of(spec: HeartSpec) -> Rhythm:
    return read(digital(spec)).rhythm


def test_sinus_rhythm() -> None:
    rhythm = rhythm_of(HeartSpec(seed=71))
    assert rhythm.statement == "sinus P waves"
    assert rhythm.regular is True
    assert any("upright in I and aVF" in line for line in rhythm.why)
    assert (rhythm.premature, rhythm.odd, rhythm.paced) == (0, 0, False)


def test_fibrillation() -> None:
    rhythm = rhythm_of(HeartSpec(rhythm="fibrillation", rate_bpm=95, seed=72))
    assert rhythm.statement == "no P wave found, irregular"
    assert rhythm.regular is False


def test_pacing() -> None:
    rhythm = rhythm_of(HeartSpec(conduction="paced", rhythm="paced", rate_bpm=70, seed=73))
    assert rhythm.statement == "paced spikes seen"
    assert rhythm.paced


def test_early_beats_are_counted() -> None:
    assert rhythm_of(HeartSpec(early_atrial=(3, 7), seed=74)).premature == 2
    rhythm = rhythm_of(HeartSpec(early_ventricular=(3, 7), seed=74))
    assert rhythm.premature == 2
    assert rhythm.statement == "sinus P waves"


def test_inverted_p_waves_are_not_called_sinus() -> None:
    tracing = digital(HeartSpec(seed=75))
    mv = np.column_stack([tracing.lead(lead).mv for lead in LEADS])
    turned = read(tracing_from_samples(-mv, LEADS, 500.0)).rhythm
    assert turned.statement == "undecided"
    assert any("not upright" in line for line in turned.why)


def test_without_limb_leads_the_p_wave_has_no_direction() -> None:
    tracing = digital(HeartSpec(seed=76))
    mv = np.column_stack([tracing.lead(lead).mv for lead in LEADS[6:]])
    rhythm = read(tracing_from_samples(mv, LEADS[6:], 500.0)).rhythm
    assert rhythm.statement == "undecided"


def test_too_few_beats_for_regularity() -> None:
    tracing = digital(HeartSpec(seed=77, rate_bpm=60))
    mv = np.column_stack([tracing.lead(lead).mv[:1300] for lead in LEADS])
    assert read(tracing_from_samples(mv, LEADS, 500.0)).rhythm.regular is None


@pytest.mark.parametrize("form", ["digital", "page"])
def test_ludb_fibrillation_and_sinus(form: str) -> None:
    """Rhythms as the cardiologists of LUDB name them in the headers."""
    folder("LUDB_DIR")
    for record in (51, 83, 109, 129, 173):
        tracing = ludb_tracing(record)
        rhythm = read(tracing if form == "digital" else as_page(tracing)).rhythm
        assert rhythm.statement.startswith("no P wave found"), record
    for record in (1, 9, 37, 113, 149, 191):
        tracing = ludb_tracing(record)
        rhythm = read(tracing if form == "digital" else as_page(tracing)).rhythm
        assert rhythm.statement == "sinus P waves", record
