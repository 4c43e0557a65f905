"""The pages in `sample_scans/`, drawn again with what they truly show.

`python -m tests.drawn.samples` writes each with `NAME.expected.json` beside it.
"""

import json
from pathlib import Path
from typing import Any

from tests.drawn.files import write_page
from tests.drawn.heart import record_model
from tests.drawn.page import PageTruth, draw_page
from tests.drawn.sample_hard_pages import ALL_SAMPLES
from tests.drawn.sample_pages import Sample
from tests.drawn.vector import write_vector_page

FOLDER = Path(__file__).parents[2] / "sample_scans"


def expected(sample: Sample, truth: PageTruth) -> dict[str, Any]:
    """Return what a perfect reading of a sample page says, for its JSON."""
    heart = truth.heart
    assert heart is not None
    layout = sample.page.layout
    return {
        "about": sample.about,
        "layout": truth.layout,
        "timing": truth.timing,
        "speed_mm_s": truth.speed_mm_s,
        "gain_mm_mv": truth.gain_mm_mv,
        "chest_gain_mm_mv": layout.chest_gain_mm_mv or truth.gain_mm_mv,
        "panels": [
            {"lead": p.lead, "strip": p.strip, "row": p.row, "start_s": round(p.start_s, 3)}
            for p in truth.panels
        ],
        "rate_bpm": round(heart.rate_bpm, 1),
        "p_ms": heart.p_ms,
        "pr_ms": heart.pr_ms,
        "qrs_ms": heart.qrs_ms,
        "qt_ms": heart.qt_ms,
        "qrs_axis_deg": round(heart.qrs_axis_deg, 1),
        "conduction": heart.label,
        "early_beats": sum(
            beat.kind != "usual" and 0 < beat.qrs_start_s < sample.heart.duration_s
            for beat in heart.beats
        ),
    }


def draw_sample(sample: Sample) -> Path:
    """Draw one sample page with what it truly shows beside it; return its file."""
    recording, path = record_model(sample.heart), FOLDER / sample.file
    if path.suffix == ".pdf":
        truth = write_vector_page(recording, sample.page, path)
    else:
        drawn = draw_page(recording, sample.page)
        write_page(drawn, path)
        truth = drawn.truth
    text = json.dumps(expected(sample, truth), indent=1)
    path.with_name(f"{path.stem}.expected.json").write_text(text + "\n")
    return path


def main() -> None:
    """Draw every sample page anew."""
    FOLDER.mkdir(exist_ok=True)
    for sample in ALL_SAMPLES:
        path = draw_sample(sample)
        print(f"{path.name}  {path.stat().st_size / 1000:.0f} kB")


if __name__ == "__main__":
    main()
