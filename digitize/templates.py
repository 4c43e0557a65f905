"""The usual arrangements of leads on paper: hypotheses to hold against a page."""

from dataclasses import dataclass

from digitize.tracing import LEADS

CABRERA = ("aVL", "I", "-aVR", "II", "aVF", "III")


@dataclass(frozen=True)
class Template:
    """An arrangement of short panels, row by row.

    `prior` is the log of how common it is against the most common; `panel_s` the usual length of
    one panel.
    """

    name: str
    leads: tuple[tuple[str, ...], ...]
    prior: float
    panel_s: float

    @property
    def rows(self) -> int:
        """Rows of short panels."""
        return len(self.leads)

    @property
    def columns(self) -> int:
        """Columns of short panels."""
        return len(self.leads[0])


def _by_column(order: tuple[str, ...], rows: int) -> tuple[tuple[str, ...], ...]:
    """Lead names row by row, where the page is filled column by column."""
    return tuple(order[row::rows] for row in range(rows))


_USUAL, _CABRERA = LEADS, (*CABRERA, *LEADS[6:])
_POSTERIOR = (*LEADS[:9], "V7", "V8", "V9")  # the last three electrodes moved to the back
# Common practice: how often each is met, and for how long each panel runs.
TEMPLATES = (
    Template("3x4", _by_column(_USUAL, 3), 0.0, 2.5),
    Template("6x2", _by_column(_USUAL, 6), -0.7, 5.0),
    Template("12x1", _by_column(_USUAL, 12), -0.7, 10.0),
    Template("4x3", (LEADS[0:3], LEADS[3:6], LEADS[6:9], LEADS[9:12]), -2.0, 3.3),
    Template("4x3", _by_column(_USUAL, 4), -2.5, 3.3),
    Template("3x4", _by_column(_CABRERA, 3), -2.5, 2.5),
    Template("6x2", _by_column(_CABRERA, 6), -2.5, 5.0),
    Template("12x1", _by_column(_CABRERA, 12), -3.0, 10.0),
    Template("3x4", _by_column(_POSTERIOR, 3), -4.0, 2.5),
    Template("6x2", _by_column(_POSTERIOR, 6), -4.0, 5.0),
    Template("6x1", _by_column(LEADS[:6], 6), -2.0, 10.0),
    Template("6x1", _by_column(LEADS[6:], 6), -2.0, 10.0),
    Template("6x1", _by_column(CABRERA, 6), -3.5, 10.0),
    Template("3x1", _by_column(LEADS[:3], 3), -3.5, 10.0),
    Template("1x1", (("II",),), -1.5, 10.0),
)
"""Most common first."""
