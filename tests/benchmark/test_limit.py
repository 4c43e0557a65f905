"""The limit of the pen fit: it follows the physics of pen and pixel."""

from dataclasses import replace

import numpy as np

from tests.benchmark.limit import limit
from tests.drawn.heart import HeartSpec, record_model
from tests.drawn.spec import CaptureSpec, LayoutSpec, PageSpec

STRIP = PageSpec(
    layout=LayoutSpec(rows=1, columns=1, strips=("II",), panel_s=3.0),
    capture=CaptureSpec(dpi=(200.0, 200.0), noise=1.0, tilt_deg=1.0),
)


def test_finer_pixels_and_less_noise_raise_the_limit() -> None:
    recording = record_model(HeartSpec())
    fine = limit(recording, STRIP)[0]
    coarse = limit(recording, replace(STRIP, capture=CaptureSpec(dpi=(80.0, 80.0), noise=8.0)))[0]
    # With all but the pen known, one pixel of 0.13 mm is 13 uV: more than 20 dB under an R wave.
    assert fine.snr_db > 20
    assert fine.read_share > 0.99
    assert coarse.snr_db < fine.snr_db
    assert np.isfinite(fine.gain_error)
    assert abs(fine.gain_error) < 0.02
