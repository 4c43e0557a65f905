"""Beats are found and told apart."""

import numpy as np
import pytest

from digitize.errors import NoTrace
from digitize.tracing import LEADS, Tracing
from measure.beats import find_beats
from measure.sources import tracing_from_samples
from tests.drawn.heart import HeartSpec
from tests.measure.model import as_page, digital, true_at_s
from tests.measure.open_data import folder, ludb_marks, ludb_tracing, ptbxl_tracing

SPECS = {
    "normal": HeartSpec(seed=1, wander_mv=0.2, muscle_mv=0.01),
    "left bundle branch block": HeartSpec(conduction="lbbb", rate_bpm=95, seed=2, muscle_mv=0.01),
    "fibrillation": HeartSpec(rhythm="fibrillation", rate_bpm=110, seed=3, muscle_mv=0.01),
    "paced": HeartSpec(conduction="paced", rhythm="paced", rate_bpm=70, seed=4),
    "low voltage": HeartSpec(size=0.25, seed=5, muscle_mv=0.005),
    "slow": HeartSpec(rate_bpm=38, seed=6),
    "fast": HeartSpec(rate_bpm=150, pr_ms=130, seed=7),
}


def distance_s(found_s: np.ndarray, true_s: np.ndarray) -> np.ndarray:
    """Distance of each true beat from the nearest found one, its middle some way after onset."""
    return np.abs(found_s[None, :] - true_s[:, None] - 0.05).min(axis=1)


@pytest.mark.parametrize("name", SPECS)
@pytest.mark.parametrize("form", ["digital", "page"])
def test_no_beat_is_missed_and_none_invented(name: str, form: str) -> None:
    tracing = digital(SPECS[name])
    tracing = tracing if form == "digital" else as_page(tracing)
    found_s = find_beats(tracing).time_s
    true_s = true_at_s(SPECS[name])
    assert distance_s(found_s, true_s).max() < 0.1
    inside = found_s[(found_s > true_s[0] - 0.1) & (found_s < true_s[-1] + 0.25)]
    assert len(inside) == len(true_s)


def test_a_turned_and_scaled_trace_has_the_same_beats() -> None:
    tracing = digital(SPECS["normal"])
    mv = np.column_stack([-3 * tracing.lead(lead).mv + 5 for lead in LEADS])
    turned = find_beats(tracing_from_samples(mv, LEADS, 500.0))
    np.testing.assert_allclose(turned.time_s, find_beats(tracing).time_s, atol=0.002)


def test_a_t_wave_taller_than_the_qrs_is_no_beat() -> None:
    time_s = np.arange(5000) / 500
    mv = np.zeros(5000)
    for at_s in np.arange(0.5, 9.6, 0.9):
        mv += 0.5 * np.exp(-0.5 * ((time_s - at_s) / 0.010) ** 2)
        mv += 0.9 * np.exp(-0.5 * ((time_s - at_s - 0.28) / 0.040) ** 2)
    beats = find_beats(tracing_from_samples(mv[:, None], ["V3"], 500.0))
    np.testing.assert_allclose(beats.time_s, np.arange(0.5, 9.6, 0.9), atol=0.02)


def test_early_atrial_beats_are_early_and_set_aside() -> None:
    beats = find_beats(digital(HeartSpec(early_atrial=(4, 8), seed=1)))
    assert beats.kind.count("early") == 2
    assert set(beats.kind) == {"usual", "early"}
    assert not beats.dominant[[kind == "early" for kind in beats.kind]].any()


def test_early_ventricular_beats_have_another_shape() -> None:
    beats = find_beats(digital(HeartSpec(early_ventricular=(4, 8), seed=1)))
    assert beats.kind.count("early aberrant") == 2


def test_pacing_spikes_are_seen_and_bridged() -> None:
    beats = find_beats(digital(SPECS["paced"]))
    assert beats.paced.mean() > 0.8
    assert 10 <= len(beats.spike_s) <= 12
    assert not find_beats(digital(SPECS["normal"])).paced.any()


def test_nothing_is_found_in_a_flat_line() -> None:
    with pytest.raises(NoTrace, match="no beat stands out"):
        find_beats(tracing_from_samples(np.zeros((5000, 1)), ["II"], 500.0))


def ludb_missed_and_invented(record: int) -> tuple[int, int, int]:
    """Beats marked by the cardiologists in four leads or more: their number, missed, invented."""
    marks = ludb_marks(record)
    at_s = np.sort(np.concatenate([s[y == "N"] / 500 for s, y in marks.values()]))
    groups = np.split(at_s, np.flatnonzero(np.diff(at_s) > 0.12) + 1)
    marked_s = np.array([np.median(group) for group in groups if len(group) >= 4])
    found_s = find_beats(ludb_tracing(record)).time_s
    missed = (np.abs(found_s[None, :] - marked_s[:, None]).min(axis=1) > 0.12).sum()
    # The first and last beats of the recordings carry no marks.
    inside = found_s[(found_s > marked_s[0] - 0.1) & (found_s < marked_s[-1] + 0.1)]
    invented = (np.abs(inside[:, None] - marked_s[None, :]).min(axis=1) > 0.12).sum()
    return len(marked_s), int(missed), int(invented)


def test_ludb_beats() -> None:
    folder("LUDB_DIR")
    records = (1, 35, 45, 51, 83, 93, 95, 101, 103, 105, 109, 111, 125, 127, 173)
    counts = np.array([ludb_missed_and_invented(record) for record in records])
    total, missed, invented = counts.sum(axis=0)
    assert missed + invented <= 0.005 * total


@pytest.mark.parametrize(
    ("record", "count"),
    # counted by eye on a drawing of all leads
    [("13261_lr", 23), ("17601_lr", 10), ("18293_lr", 13), ("18325_lr", 11), ("20877_lr", 26)],
)
def test_ptbxl_beats_counted_by_eye(record: str, count: int) -> None:
    tracing: Tracing = ptbxl_tracing(record)
    assert len(find_beats(tracing).time_s) == count
