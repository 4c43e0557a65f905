"""Model ECGs with exact truth, as digital recordings and as panels of a page."""

from dataclasses import replace
from functools import cache

import numpy as np

from digitize.tracing import FS_HZ, LEADS, Known, Panel, Tracing
from measure.sources import tracing_from_samples
from tests.drawn.heart import HeartSpec, Recording, record_model

COLUMNS = (("I", "II", "III"), ("aVR", "aVL", "aVF"), ("V1", "V2", "V3"), ("V4", "V5", "V6"))
COLUMN_S = 2.5


@cache
def recording(spec: HeartSpec) -> Recording:
    """The model recording of a specification."""
    return record_model(spec)


def digital(spec: HeartSpec) -> Tracing:
    """The model as a digital recording of 12 simultaneous leads."""
    return tracing_from_samples(recording(spec).mv.T, LEADS, FS_HZ, file_name="model")


def as_page(tracing: Tracing, strip: str | None = "II") -> Tracing:
    """The same recording as a page of 3 rows and 4 consecutive columns would show it."""
    panels = [
        _part(tracing.lead(lead), row, number * COLUMN_S)
        for number, column in enumerate(COLUMNS)
        for row, lead in enumerate(column)
    ]
    if strip is not None:
        panels.append(replace(tracing.lead(strip), strip=True, row=3))
    layout = Known("3x4+1" if strip else "3x4", "found")
    timing = Known("consecutive", "found")
    return replace(tracing, panels=tuple(panels), layout=layout, timing=timing)


def _part(panel: Panel, row: int, start_s: float) -> Panel:
    first = round(start_s * FS_HZ)
    span = slice(first, first + round(COLUMN_S * FS_HZ))
    return replace(
        panel, row=row, start_s=start_s, mv=panel.mv[span], sigma_mv=panel.sigma_mv[span]
    )


def true_at_s(spec: HeartSpec) -> np.ndarray:
    """Times of the true QRS onsets within the recording, in seconds."""
    truth = recording(spec).truth
    assert truth is not None
    times = np.array([beat.qrs_on_s for beat in truth.beats])
    return times[(times > 0.1) & (times < spec.duration_s - 0.2)]
