"""Vector pages from a second, independent maker: what was plotted is what is read.

matplotlib writes the PDF (its own paths, clips, fonts and form of content streams); the ECG is the
model heart's.
"""

from pathlib import Path

import matplotlib as mpl
import numpy as np
import pypdfium2 as pdfium
import pytest
from matplotlib.backends.backend_pdf import FigureCanvasPdf
from matplotlib.figure import Figure

from digitize import Options
from digitize.pages import open_pages
from digitize.read import Stages, read_page
from tests.drawn.heart import HeartSpec, record_model

RECORDING = record_model(HeartSpec(seed=3, muscle_mv=0.005, wander_mv=0.02))
FS_HZ = 500
ROWS = (("I", "aVR", "V1", "V4"), ("II", "aVL", "V2", "V5"), ("III", "aVF", "V3", "V6"))
WIDE_MM, HIGH_MM = 279.4, 215.9  # Letter
LEFT_MM, COLUMN_MM = 20.0, 62.5
Truth = dict[tuple[str, bool], np.ndarray]


def lead_mv(lead: str, column: int) -> np.ndarray:
    first = round(column * 2.5 * FS_HZ)
    return RECORDING.lead(lead)[first : first + round(2.5 * FS_HZ)]


def plot(path: Path, *, whole_rows: bool = False, ruled: bool = True, size: float = 1.0) -> Truth:
    """Plot a 3x4+1 page and return the millivolts of each panel."""
    truth = {(lead, False): lead_mv(lead, c) for row in ROWS for c, lead in enumerate(row)}
    truth["II", True] = RECORDING.lead("II")[: 10 * FS_HZ]
    with mpl.rc_context({"path.simplify": False}):
        figure = Figure(figsize=(WIDE_MM / 25.4 * size, HIGH_MM / 25.4 * size))
        FigureCanvasPdf(figure)
        axes = figure.add_axes((0, 0, 1, 1))
        axes.set(xlim=(0, WIDE_MM), ylim=(HIGH_MM, 0))
        axes.set_axis_off()
        for step, width in ((1, 0.2), (5, 0.5)) if ruled else ():
            axes.vlines(np.arange(10, 270, step), 15, 205, color="#f0b8b8", lw=width * size)
            axes.hlines(np.arange(15, 206, step), 10, 270, color="#f0b8b8", lw=width * size)
        lines = [
            (40.0 * r + 50, [truth[lead, False] for lead in row], row) for r, row in enumerate(ROWS)
        ]
        for base_mm, parts, names in [*lines, (170.0, [truth["II", True]], ("II",))]:
            for column, name in enumerate(names):
                x_mm = LEFT_MM + COLUMN_MM * column + 1
                axes.text(x_mm, base_mm - 12, name, fontsize=9 * size)
            for column, mv in enumerate([np.concatenate(parts)] if whole_rows else parts):
                x_mm = LEFT_MM + COLUMN_MM * column + np.arange(len(mv)) / FS_HZ * 25
                axes.plot(x_mm, base_mm - 10 * mv, color="black", lw=0.9 * size)
        axes.text(12, 211, "25 mm/s   10 mm/mV", fontsize=8 * size)
        figure.savefig(path)
    return truth


def read(path: Path) -> Stages:
    return read_page(next(iter(open_pages(path))), Options())


def worst_db(stages: Stages, truth: Truth) -> float:
    """Lowest signal-to-noise ratio of a panel, no shift allowed, a missing sample an error."""
    ratios = []
    for panel in stages.tracing.panels:
        true = truth[panel.lead, panel.strip]
        read_mv = np.zeros(len(true))
        count = min(len(true), len(panel.mv))
        read_mv[:count] = np.nan_to_num(panel.mv[:count])
        error = (read_mv - read_mv.mean()) - (true - true.mean())
        ratios.append(10 * np.log10(true.var() / error.var()))
    return float(min(ratios))


@pytest.mark.parametrize("whole_rows", [False, True])
def test_plotted_samples_come_back(tmp_path: Path, whole_rows: bool) -> None:
    truth = plot(tmp_path / "plot.pdf", whole_rows=whole_rows)
    stages = read(tmp_path / "plot.pdf")
    assert {(p.lead, p.strip) for p in stages.tracing.panels} == set(truth)
    assert stages.tracing.layout.value == "3x4+1"
    assert worst_db(stages, truth) > 60
    assert stages.grid.method.startswith("ruled lines drawn in the document")


def test_sigma_holds_the_errors(tmp_path: Path) -> None:
    truth = plot(tmp_path / "plot.pdf")
    for panel in read(tmp_path / "plot.pdf").tracing.panels:
        error = panel.mv - truth[panel.lead, panel.strip]
        error -= np.median(error)
        assert np.mean(np.abs(error) <= 2 * panel.sigma_mv) > 0.95
        assert panel.sigma_mv.max() < 0.05


def test_a_page_printed_smaller_has_the_same_millivolts(tmp_path: Path) -> None:
    truth = plot(tmp_path / "small.pdf", size=0.75)
    stages = read(tmp_path / "small.pdf")
    assert stages.grid.px_per_mm == pytest.approx((0.75 * 300 / 25.4,) * 2, rel=2e-3)
    assert worst_db(stages, truth) > 60


def test_a_page_turned_sideways_is_turned_back(tmp_path: Path) -> None:
    truth = plot(tmp_path / "plot.pdf")
    with pdfium.PdfDocument(tmp_path / "plot.pdf") as document:
        document[0].set_rotation(90)
        document.save(tmp_path / "turned.pdf")
    stages = read(tmp_path / "turned.pdf")
    assert stages.tracing.geometry["turn_deg"] == 270
    assert worst_db(stages, truth) > 60
