"""What the first reading has to load, done once in the process that pages are forked from.

Parts of libraries are loaded when they are first used, which takes five times as long as a reading.
So an invented ECG is read before the fork, and all others find these things in their memory. To
import this module is to do so.
"""

from contextlib import suppress

import numpy as np

from digitize.tracing import FS_HZ, LEADS, Tracing
from measure.reading import read
from measure.reading_files import to_json
from measure.sources import tracing_from_samples

_WAVES = ((-180, 25, 0.1), (-22, 8, -0.1), (0, 10, 1.0), (25, 10, -0.2), (280, 45, 0.3))  # ms, mV
_EVERY_MS, _BEATS = 800.0, 12


def _warm() -> None:
    with suppress(Exception):  # what fails here fails again, and is told, where a page needs it
        to_json(read(invented()))


def invented() -> Tracing:
    """Twelve leads over ten seconds."""
    time_ms = 1000 * np.arange(10 * FS_HZ) / FS_HZ
    centres = 400 + _EVERY_MS * np.arange(_BEATS)
    beat = sum(
        mv * np.exp(-0.5 * ((time_ms[:, None] - centres - at) / width) ** 2).sum(axis=1)
        for at, width, mv in _WAVES
    )
    sizes = np.linspace(-0.6, 1.2, len(LEADS))
    return tracing_from_samples(np.outer(beat, sizes), LEADS, FS_HZ)


_warm()
