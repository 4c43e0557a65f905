"""Ends of a QRS in a single lead that rests in its midst."""

import numpy as np
import pytest

from measure.activity import Leads, leads_of
from measure.edges import qrs_edges

WITHIN_MS = (-60.0, 80.0)  # of the QRS over all leads


def two_waves(first_mv: float = 0.08, last_mv: float = 0.0) -> Leads:
    """An early small r, 40 ms at rest, a tall R, and where asked a late small wave."""
    time_ms = np.arange(-400.0, 401.0)
    at = [-56, -48, -40, 0, 20, 45, 66, 72, 78]
    mv = [0, first_mv, 0, 0, 1.0, 0, 0, last_mv, 0]
    return leads_of(time_ms, np.interp(time_ms, at, mv)[None])


def test_an_early_wave_is_where_the_lead_begins() -> None:
    onset, _ = qrs_edges(two_waves(), within_ms=WITHIN_MS)
    assert onset.at_ms == pytest.approx(-56, abs=4)


def test_without_an_early_wave_the_lead_begins_with_its_r() -> None:
    onset, _ = qrs_edges(two_waves(first_mv=0.0), within_ms=WITHIN_MS)
    assert onset.at_ms == pytest.approx(0, abs=4)


def test_a_late_wave_is_where_the_lead_ends() -> None:
    _, early = qrs_edges(two_waves(), within_ms=WITHIN_MS)
    _, late = qrs_edges(two_waves(last_mv=-0.08), within_ms=WITHIN_MS)
    assert early.at_ms == pytest.approx(45, abs=5)
    assert late.at_ms == pytest.approx(78, abs=5)
