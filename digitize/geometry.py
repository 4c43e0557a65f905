"""The geometry of a page as plain numbers for the JSON, and back.

With it and the samples a tracing can be drawn back onto its page by anyone, at any later time.
"""

from typing import Any

import numpy as np

from digitize.grid import Grid
from digitize.layout import Layout
from digitize.pagemap import PageMap
from digitize.trace import Stroke


def to_geometry(grid: Grid, layout: Layout, strokes: tuple[Stroke, ...]) -> dict[str, Any]:
    """Return what ties the panels to the pixels of the page, as JSON can hold it.

    `turn_deg` is the clockwise turn of the page before all else; `map` is the projective matrix,
    the spline coefficients and their extent, as `PageMap` takes them; `panels` follow the order of
    the tracing's panels: where 0 mV stands, how wide the pen is, how much of the ink the redrawn
    trace leaves unexplained, how sure the lead's name is.
    """
    page_map = grid.page_map
    return {
        "turn_deg": 0,
        "map": {
            "homography": page_map.homography.tolist(),
            "bend_px": np.round(page_map.bend_px, 5).tolist(),
            "extent_mm": [float(value) for value in page_map.extent_mm],
        },
        "px_per_mm": [float(value) for value in grid.px_per_mm],
        "source": grid.source,
        "method": grid.method,
        "scale_se": float(grid.scale_se),
        "residual_mm": float(grid.residual_mm),
        "ruled_mm": [float(value) for value in grid.ruled_mm],
        "marks_mm": [
            [mark.left_mm, mark.top_mm, mark.right_mm, mark.bottom_mm] for mark in layout.marks
        ],
        "panels": [
            {
                "column": place.column,
                "baseline_mm": float(place.baseline_mm),
                "upside_down": place.lead.startswith("-"),
                "lead_score": float(place.lead_score),
                "pen_mm": float(stroke.pen_mm),
                "unexplained": float(stroke.unexplained),
            }
            for place, stroke in zip(layout.panels, strokes, strict=True)
        ],
        "notes": list(layout.notes),
    }


def page_map_of(geometry: dict[str, Any]) -> PageMap:
    """The map from millimetres to pixels that `to_geometry` wrote down."""
    stored = geometry["map"]
    left, top, right, bottom = stored["extent_mm"]
    return PageMap(
        np.array(stored["homography"], float),
        np.array(stored["bend_px"], float),
        (left, top, right, bottom),
    )
