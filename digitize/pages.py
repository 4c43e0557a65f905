"""Files into pages of pixels."""

from dataclasses import dataclass

import numpy as np

from digitize.tracing import PageSource


@dataclass(frozen=True, eq=False)
class Page:
    """One page as pixels, turned as its EXIF tag says.

    `pixels` is uint8, (rows, cols) for grey and 1-bit pages (0 black, 255 white) or
    (rows, cols, 3) RGB. `source.dpi` is (across, down), None where the file does not say.
    """

    pixels: np.ndarray
    source: PageSource
    bilevel: bool = False
