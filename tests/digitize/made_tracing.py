"""Layouts, strokes and tracings made by hand, with every value known."""

from dataclasses import replace

import numpy as np

from digitize.grid import Grid
from digitize.layout import Box, Layout, PanelPlace
from digitize.pagemap import uniform_page_map
from digitize.trace import Stroke
from digitize.tracing import FS_HZ, Known, PageSource, Panel, Tracing

SOURCE = PageSource("chart.png", "ab" * 32, 1, 2480, 1754, (300.0, 300.0))
COLUMNS = (("I", "II", "III"), ("aVR", "aVL", "aVF"), ("V1", "V2", "V3"), ("V4", "V5", "V6"))


def beat(time_s: np.ndarray, *, height_mv: float = 1.0, period_s: float = 0.8) -> np.ndarray:
    """A train of narrow and broad bumps: a QRS and a T wave in outline, in mV."""
    phase = (time_s % period_s) - 0.3
    return height_mv * (
        np.exp(-((phase / 0.012) ** 2)) + 0.25 * np.exp(-(((phase - 0.25) / 0.05) ** 2))
    )


def slow(time_s: np.ndarray) -> np.ndarray:
    """A second shape, so that two leads are not multiples of one another, in mV."""
    phase = (time_s % 0.8) - 0.32
    return 0.8 * np.exp(-((phase / 0.03) ** 2)) - 0.3 * np.exp(-(((phase + 0.06) / 0.01) ** 2))


def leads_at(time_s: np.ndarray) -> dict[str, np.ndarray]:
    """Twelve leads in mV; the limb leads obey Einthoven and Goldberger exactly."""
    one, two = beat(time_s), slow(time_s)
    chest = {
        f"V{n}": (1 - n / 4) * beat(time_s) + (n / 5) * slow(time_s - 0.004 * n)
        for n in range(1, 7)
    }
    return {
        "I": one,
        "II": two,
        "III": two - one,
        "aVR": -(one + two) / 2,
        "aVL": one - two / 2,
        "aVF": two - one / 2,
        **chest,
    }


def panel(
    lead: str, mv: np.ndarray, *, start_s: float = 0.0, sigma_mv: float = 0.005, **fields
) -> Panel:
    """A panel of given samples at the standard run."""
    values = {
        "strip": False,
        "row": 0,
        "box_mm": (10.0, 20.0, 10.0 + 25 * len(mv) / FS_HZ, 50.0),
        "speed_mm_s": 25.0,
        "gain_mm_mv": 10.0,
    }
    sigma = np.where(np.isnan(mv), np.nan, sigma_mv)
    return Panel(
        lead=lead, start_s=start_s, fs_hz=FS_HZ, mv=mv, sigma_mv=sigma, **{**values, **fields}
    )


def tracing(panels: tuple[Panel, ...] | None = None, **fields) -> Tracing:
    """A 3x4+1 page, read perfectly, unless told otherwise."""
    values = {
        "source": SOURCE,
        "speed_mm_s": Known(25.0, "printed", 0.0),
        "gain_mm_mv": Known(10.0, "found", 0.05),
        "layout": Known("3x4+1", "found"),
        "timing": Known("consecutive", "found"),
    }
    return Tracing(panels=page_3x4_1() if panels is None else panels, **{**values, **fields})


def page_3x4_1() -> tuple[Panel, ...]:
    """The thirteen panels of a 3x4+1 page with consecutive columns."""
    panels = []
    for column, names in enumerate(COLUMNS):
        time_s = (column * 1250 + np.arange(1250)) / FS_HZ
        left_mm = 15 + 62.5 * column
        panels += [
            panel(
                name,
                leads_at(time_s)[name],
                start_s=column * 2.5,
                row=row,
                box_mm=(left_mm, 40.0 + 35 * row, left_mm + 62.5, 75.0 + 35 * row),
            )
            for row, name in enumerate(names)
        ]
    strip = leads_at(np.arange(5000) / FS_HZ)["II"]
    panels.append(panel("II", strip, strip=True, row=3, box_mm=(15.0, 145.0, 265.0, 180.0)))
    return tuple(panels)


def place(lead: str = "II", **fields) -> PanelPlace:
    """A place of 62.5 x 30 mm at the standard run whose baseline is at 60 mm."""
    values = {
        "lead_source": "printed",
        "lead_score": 0.9,
        "strip": False,
        "row": 0,
        "column": 0,
        "box": Box(20.0, 40.0, 82.5, 70.0),
        "baseline_mm": 60.0,
        "start_s": 0.0,
        "speed_mm_s": 25.0,
        "gain_mm_mv": 10.0,
    }
    return PanelPlace(lead=lead, **{**values, **fields})


def stroke(x_mm: np.ndarray, y_mm: np.ndarray, sigma_mm: float = 0.02, **fields) -> Stroke:
    """A stroke through given places."""
    sigma = np.where(np.isnan(y_mm), np.nan, sigma_mm)
    return Stroke(x_mm, y_mm, sigma, **{"pen_mm": 0.35, "unexplained": 0.02, **fields})


def layout_of(made: Tracing) -> tuple[Layout, tuple[Stroke, ...]]:
    """The layout and strokes from which a tracing would have come, 0 mV in the box's middle."""
    places, strokes = [], []
    for item in made.panels:
        box = Box(*item.box_mm)
        baseline_mm = (box.top_mm + box.bottom_mm) / 2
        column = round((box.left_mm - 15) / 62.5)
        places.append(
            replace(
                place(item.lead),
                strip=item.strip,
                row=item.row,
                column=0 if item.strip else column,
                box=box,
                baseline_mm=baseline_mm,
                start_s=item.start_s,
                speed_mm_s=item.speed_mm_s,
                gain_mm_mv=item.gain_mm_mv,
            )
        )
        x_mm = box.left_mm + (item.time_s - item.start_s) * item.speed_mm_s
        y_mm = baseline_mm - item.mv * item.gain_mm_mv
        strokes.append(Stroke(x_mm, y_mm, item.sigma_mv * item.gain_mm_mv, 0.35, 0.02, item.notes))
    layout = Layout(
        name=made.layout,
        speed_mm_s=made.speed_mm_s,
        gain_mm_mv=made.gain_mm_mv,
        timing=made.timing,
        panels=tuple(places),
        marks=(Box(7.0, 50.0, 12.0, 60.0),),
        words=(),
    )
    return layout, tuple(strokes)


def grid(px_per_mm: float = 8.0) -> Grid:
    """A grid of a page scanned straight, its origin at the first pixel."""
    return Grid(
        page_map=uniform_page_map(px_per_mm, px_per_mm),
        source="found",
        method="phase of the ruled grid",
        px_per_mm=(px_per_mm, px_per_mm),
        scale_se=1e-4,
        residual_mm=0.01,
        ruled_mm=(5.0, 30.0, 285.0, 190.0),
    )
