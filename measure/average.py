"""The dominant beat: the usual beats of each lead, aligned and averaged."""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True, eq=False)
class DominantBeat:
    """One averaged beat of all leads on a common time raster.

    `time_ms` is (n,), 0 at the fiducial point within the QRS. `mv` and `se_mv` are
    (len(leads), n): the average about the baseline before the P wave or QRS, and its standard
    error (scatter over beats and sigma of the samples together); NaN where no beat covers the
    place. `beats` counts the beats in each lead's average, 0 where there is none.
    """

    leads: tuple[str, ...]
    time_ms: np.ndarray
    mv: np.ndarray
    se_mv: np.ndarray
    beats: tuple[int, ...]
    fs_hz: float

    def lead(self, name: str) -> np.ndarray:
        """Average of one lead in mV, (n,); KeyError where the lead is not there."""
        if name not in self.leads:
            raise KeyError(name)
        return self.mv[self.leads.index(name)]
