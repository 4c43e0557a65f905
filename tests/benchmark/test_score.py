"""The benchmark's own judgement, on answers known to be right and wrong."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.tracing import Check, Known, PageSource, Panel, Tracing
from tests.benchmark.score import score_page, score_panel, snr_db
from tests.drawn.composition import PanelTruth
from tests.drawn.heart import HeartSpec, record_model
from tests.drawn.page import PageTruth, draw_page
from tests.drawn.spec import CaptureSpec, PageSpec


@pytest.fixture(scope="module")
def truth() -> PageTruth:
    spec = PageSpec(capture=CaptureSpec(dpi=(75.0, 75.0)))
    return draw_page(record_model(HeartSpec(seed=5)), spec).truth


def _panel(true: PanelTruth, mv: np.ndarray | None = None) -> Panel:
    mv = true.mv if mv is None else mv
    return Panel(
        true.lead, true.strip, true.row, true.start_s, true.fs_hz, mv, np.zeros(len(mv)),
        true.box_mm, true.speed_mm_s, true.gain_mm_mv,
    )  # fmt: skip


def _tracing(truth: PageTruth, panels: tuple[Panel, ...]) -> Tracing:
    return Tracing(
        PageSource("a.png", "0", 1, 10, 10, None),
        panels,
        speed_mm_s=Known(25.0, "found", 0.1),
        gain_mm_mv=Known(10.0, "found", 0.1),
        layout=Known("3x4+1", "found"),
        timing=Known("consecutive", "found"),
    )


@pytest.mark.parametrize(("share", "expected_db"), [(0.1, 20.0), (0.01, 40.0), (1.0, 0.0)])
def test_error_of_known_size_gives_its_decibels(share: float, expected_db: float) -> None:
    # Definition of the decibel: amplitude ratio 10 is 20 dB.
    t = np.arange(1000) / 1000
    signal, error = np.sin(2 * np.pi * 5 * t), np.cos(2 * np.pi * 5 * t)
    assert snr_db(signal, signal + share * error) == pytest.approx(expected_db, abs=1e-6)


def test_constant_offset_is_no_error() -> None:
    signal = np.sin(np.arange(500) / 9)
    assert snr_db(signal, signal + 3.0) == 99.0


def test_nothing_read_is_zero_db_and_half_read_is_between() -> None:
    signal = np.sin(2 * np.pi * np.arange(1000) / 100)
    assert snr_db(signal, np.full(1000, np.nan)) == 0.0
    half = np.where(np.arange(1000) < 500, signal, np.nan)
    # Half the power is missing: 10 log10(2).
    assert snr_db(signal, half) == pytest.approx(10 * np.log10(2), abs=1e-9)


def test_shift_within_the_limit_is_found_and_beyond_it_is_error(truth: PageTruth) -> None:
    true = truth.panels[1]
    t_s = np.arange(-200, len(true.mv) + 200) / true.fs_hz
    whole = np.interp(t_s, np.arange(len(true.mv)) / true.fs_hz, true.mv)
    near = score_panel(true, _panel(true, whole[200 - 20 :]))
    assert near.snr_db == 99.0
    assert near.shift_s == pytest.approx(0.040, abs=1e-9)
    far = score_panel(true, _panel(true, whole[200 - 150 :]))
    assert far.snr_db < 6


def test_wrong_gain_is_measured(truth: PageTruth) -> None:
    true = truth.panels[1]
    score = score_panel(true, _panel(true, 1.1 * true.mv))
    assert score.gain_error == pytest.approx(0.1, abs=1e-9)
    assert score.snr_db == pytest.approx(20.0, abs=1e-6)
    assert not score.amplitudes_right


def test_right_page_is_right(truth: PageTruth) -> None:
    score = score_page(truth, _tracing(truth, tuple(map(_panel, truth.panels))))
    assert score.names_right
    assert score.unflagged == ()
    assert min(lead.snr_db for lead in score.leads) == 99.0


def test_swapped_names_are_noticed_and_a_failed_check_flags_them(truth: PageTruth) -> None:
    panels = list(map(_panel, truth.panels))
    panels[2] = replace(panels[2], lead=truth.panels[3].lead)
    panels[3] = replace(panels[3], lead=truth.panels[2].lead)
    tracing = _tracing(truth, tuple(panels))
    score = score_page(truth, tracing)
    assert not score.names_right
    assert score.unflagged == ("leads",)
    warned = replace(tracing, checks=(Check("Einthoven", False, "III is not II - I"),))
    assert score_page(truth, warned).unflagged == ()


def test_wrong_speed_and_gain_are_noticed_unless_assumed(truth: PageTruth) -> None:
    panels = tuple(replace(_panel(t), gain_mm_mv=5.0) for t in truth.panels)
    tracing = replace(_tracing(truth, panels), speed_mm_s=Known(50.0, "found", 0.1))
    assert score_page(truth, tracing).unflagged == ("speed", "gain")
    assumed = replace(tracing, speed_mm_s=Known(50.0, "assumed"), gain_mm_mv=Known(5.0, "assumed"))
    assert score_page(truth, assumed).unflagged == ()


def test_no_tracing_scores_zero(truth: PageTruth) -> None:
    score = score_page(truth, None)
    assert {lead.snr_db for lead in score.leads} == {0.0}
    assert not score.names_right
