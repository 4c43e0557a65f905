"""The path of each trace: a pen line whose own stroke reproduces the ink."""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True, eq=False)
class Stroke:
    """The pen's way through one panel, in millimetres of paper.

    `x_mm`, `y_mm`, `sigma_mm` are (n,): x evenly spaced and increasing, y downward, sigma the
    standard error of y; y and sigma are NaN where ink is hidden or missing. `unexplained` is the
    share of the panel's ink that the redrawn stroke does not reproduce. `notes` gives the reasons
    for gaps, in words.
    """

    x_mm: np.ndarray
    y_mm: np.ndarray
    sigma_mm: np.ndarray
    pen_mm: float  # estimated pen width
    unexplained: float
    notes: tuple[str, ...] = ()
