"""Columns in which every trace is plain to see: as many strokes as panels, each in its own row.

There the uppermost stroke is the uppermost panel's, and so on down; whatever the traces do between
two such columns, they come back in that order.
"""

from itertools import pairwise

import numpy as np

from digitize.layout import PanelPlace

_THICK_MM = 1.2  # a taller run of ink is a flank, or two traces that have met
_LEAST_MM = 0.5  # of width over which the strokes must run on


def find_anchors(
    inked: np.ndarray, panels: tuple[PanelPlace, ...], rows: np.ndarray, cols: np.ndarray
) -> list[np.ndarray]:
    """Rows in which each panel's trace stands beyond doubt.

    Parameters
    ----------
    inked : (m, n) bool array
        True in ink.
    panels : tuple of PanelPlace
    rows : (m,) float array
        y in millimetres of each row of `inked`.
    cols : (n,) float array
        x in millimetres of each column.

    Returns
    -------
    list of (2, n) int arrays
        For each panel first and last row of its stroke; -1 where in doubt.
    """
    found = [np.full((2, len(cols)), -1) for _ in panels]
    ends = {edge for p in panels for edge in (p.box.left_mm, p.box.right_mm)}
    cuts = np.unique(np.searchsorted(cols, sorted(ends)))
    for start, stop in pairwise(cuts):
        middle = 0.5 * (cols[start] + cols[stop - 1])
        here = [k for k, p in enumerate(panels) if p.box.left_mm <= middle <= p.box.right_mm]
        here.sort(key=lambda k: panels[k].baseline_mm)
        if here:
            bounds = _zones([panels[k].baseline_mm for k in here])
            strokes = _strokes(inked[:, start:stop], rows, bounds)
            for k, stroke in zip(here, strokes, strict=True):
                found[k][:, start:stop] = stroke
    return found


def _zones(baselines_mm: list[float]) -> np.ndarray:
    """Bounds between rows, and as far again above the first and below the last."""
    levels = np.array(baselines_mm)
    between = 0.5 * (levels[1:] + levels[:-1])
    outer = 0.5 * np.diff(levels).mean() if len(levels) > 1 else 10.0
    return np.concatenate([[levels[0] - outer], between, [levels[-1] + outer]])


def _strokes(inked: np.ndarray, rows: np.ndarray, bounds: np.ndarray) -> np.ndarray:
    """(panels, 2, cols): the strokes of columns that hold one in every zone and no other."""
    count, cols = len(bounds) - 1, inked.shape[1]
    step_mm = rows[1] - rows[0]
    found = np.full((count, 2, cols), -1)
    top, bottom = np.searchsorted(rows, bounds[[0, -1]])
    change = np.diff(np.pad(inked[top:bottom].astype(np.int8), ((1, 1), (0, 0))), axis=0)
    plain = np.flatnonzero((change == 1).sum(axis=0) == count)
    if not len(plain):
        return found
    first = np.nonzero(change[:, plain].T == 1)[1].reshape(-1, count) + top
    last = np.nonzero(change[:, plain].T == -1)[1].reshape(-1, count) + top - 1
    middle = rows[0] + step_mm * 0.5 * (first + last)
    fits = (last - first + 1) * step_mm <= _THICK_MM
    fits &= (middle > bounds[:-1]) & (middle < bounds[1:])
    good = np.zeros(cols, bool)
    good[plain] = fits.all(axis=1)
    found[:, 0, plain], found[:, 1, plain] = first.T, last.T
    least = max(round(_LEAST_MM / step_mm), 2)
    return np.where(_lasting(good, least), found, -1)


def _lasting(good: np.ndarray, least: int) -> np.ndarray:
    """Only stretches of at least so many columns."""
    edges = np.flatnonzero(np.diff(np.pad(good.astype(np.int8), 1)))
    for start, stop in zip(edges[::2], edges[1::2], strict=True):
        if stop - start < least:
            good[start:stop] = False
    return good
