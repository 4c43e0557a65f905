"""Speed and gain: as printed, as the calibration marks show, as given; else assumed."""

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from digitize.columns import marks_of_row
from digitize.marks import PULSE_S, Mark
from digitize.options import Options
from digitize.rows import Rows
from digitize.tracing import Known
from digitize.words import GAINS_MM_MV, SPEEDS_MM_S, Printing, printed_gains, printed_speeds

USUAL_SPEED_MM_S, USUAL_GAIN_MM_MV = 25.0, 10.0  # common practice
MOST_S = 14.0  # usual recordings are 10 s; of longer rows the speed is not taken from marks alone
SIDE_BY_SIDE_MM = 12.0  # marks at the two ends of a row stand far apart
NEAR = 0.06  # a mark this near to a usual size has that size


@dataclass(frozen=True)
class Scale:
    """Speed and gain of a page, with the gain of each row's left and right end where it differs.

    `row_gain` is keyed by the height of the row: (limb leads, chest leads) in mm/mV, from that
    row's marks.
    """

    speed_mm_s: Known
    gain_mm_mv: Known
    chest_gain_mm_mv: float | None
    row_gain: Mapping[float, tuple[float, float]]
    notes: tuple[str, ...]

    def gain_of(self, row_mm: float, lead: str) -> float:
        """Gain of one panel in mm/mV."""
        chest = lead.startswith("V")
        if self.gain_mm_mv.source != "given" and row_mm in self.row_gain:
            return self.row_gain[row_mm][1 if chest else 0]
        if chest and self.chest_gain_mm_mv is not None:
            return self.chest_gain_mm_mv
        return float(self.gain_mm_mv.value)


def find_scale(printing: Printing, rows: Rows, marks: Sequence[Mark], options: Options) -> Scale:
    """Return speed and gain of a page and where each comes from."""
    notes: list[str] = []
    longest_mm = max((row.right_mm - row.left_mm for row in rows.rows), default=0.0)
    speed = _speed(printed_speeds(printing), marks, longest_mm, options, notes)
    gains = printed_gains(printing)
    row_gain = _row_gains(rows, marks, gains)
    chest = gains[1] if len(gains) > 1 else None
    row_gain = _between_rows(row_gain, notes)
    if row_gain and chest is not None:
        chest = float(np.median([pair[1] for pair in row_gain.values()]))
    gain = _gain(gains, row_gain, marks, options, notes)
    if options.gain_mm_mv is not None:
        chest = None
    return Scale(speed, gain, chest, row_gain, tuple(notes))


def _speed(
    printed: Sequence[float],
    marks: Sequence[Mark],
    longest_mm: float,
    options: Options,
    notes: list[str],
) -> Known:
    drawn = _usual(np.array([m.width_mm / PULSE_S for m in marks]), SPEEDS_MM_S)
    if options.speed_mm_s is not None:
        return Known(options.speed_mm_s, "given")
    if len(set(printed)) > 1:
        notes.append(f"more than one speed is printed: {_listed(printed)} mm/s")
    if printed:
        if drawn is not None and drawn[0] != printed[0]:
            notes.append(
                f"speed printed as {printed[0]:g} mm/s, but the calibration marks are "
                f"{drawn[0] * PULSE_S:g} mm wide, which would be {drawn[0]:g} mm/s"
            )
        return Known(printed[0], "printed")
    if drawn is not None and longest_mm > drawn[0] * MOST_S:
        notes.append(
            f"calibration marks are {drawn[0] * PULSE_S:g} mm wide: {drawn[0]:g} mm/s, and rows of "
            f"{longest_mm / drawn[0]:.0f} s, or shorter marks at {2 * drawn[0]:g} mm/s, which is "
            f"assumed; give --speed if you know it"
        )
        return Known(2 * drawn[0], "assumed")
    if drawn is not None:
        return Known(drawn[0], "found", drawn[1])
    notes.append(
        f"speed is not printed and no calibration mark was found: "
        f"{USUAL_SPEED_MM_S:g} mm/s assumed; give --speed if you know it"
    )
    return Known(USUAL_SPEED_MM_S, "assumed")


def _gain(
    printed: Sequence[float],
    row_gain: Mapping[float, tuple[float, float]],
    marks: Sequence[Mark],
    options: Options,
    notes: list[str],
) -> Known:
    if options.gain_mm_mv is not None:
        return Known(options.gain_mm_mv, "given")
    if row_gain:
        limb = float(np.median([pair[0] for pair in row_gain.values()]))
        every = {g for pair in row_gain.values() for g in pair}
        if printed and not set(printed) & every:
            notes.append(
                f"gain printed as {_listed(printed)} mm/mV, but the calibration marks are "
                f"{_listed(sorted(every))} mm high; the marks were used"
            )
            return Known(limb, "found", _spread(marks, limb))
        return Known(limb, "printed" if printed else "found", _spread(marks, limb))
    if printed:
        return Known(printed[0], "printed")
    notes.append(
        f"gain is not printed and no calibration mark was found: "
        f"{USUAL_GAIN_MM_MV:g} mm/mV assumed; give --gain if you know it"
    )
    return Known(USUAL_GAIN_MM_MV, "assumed")


def _row_gains(
    rows: Rows, marks: Sequence[Mark], printed: Sequence[float]
) -> dict[float, tuple[float, float]]:
    """Gain of limb and chest leads on each row that has a mark of its own.

    Where two gains are printed, limb leads first, a single mark speaks for the leads next to it.
    """
    gains = {}
    for row in rows.rows:
        own = sorted(marks_of_row(row, marks, rows.pitch_mm), key=lambda m: m.left_mm)
        heights = _heights(own, marks)
        if heights:
            limb, chest = heights[0], heights[-1]
            if len(heights) == 1 and len(printed) == 2 and heights[0] in printed:
                limb, chest = printed[0], printed[1]
            gains[row.y_mm] = (limb, chest)
    return gains


def _heights(own: Sequence[Mark], marks: Sequence[Mark]) -> list[float]:
    """Usual heights of a row's marks, from left to right.

    A recorder draws one mark at an end of a row. Of two side by side that differ, one is something
    else, such as black ruling; the height that more marks of the page have is believed.
    """
    usual = {m: _usual(np.array([m.height_mm]), GAINS_MM_MV) for m in marks}
    votes = Counter(known[0] for known in usual.values() if known is not None)
    heights: list[float] = []
    last_mm = -np.inf
    for mark in own:
        known = usual[mark]
        if known is None:
            continue
        if mark.left_mm - last_mm > SIDE_BY_SIDE_MM:
            heights.append(known[0])
        elif votes[known[0]] > votes[heights[-1]]:
            heights[-1] = known[0]
        last_mm = mark.right_mm
    return heights


def _between_rows(
    row_gain: Mapping[float, tuple[float, float]], notes: list[str]
) -> dict[float, tuple[float, float]]:
    """Gains of the rows, where those of some rows differ from those of the first.

    A mark that stands left of limb and chest leads alike speaks for the limb leads if a row of
    other height is on the page: a strip of a chest lead with its own gain.
    """
    heights = {gain for pair in row_gain.values() for gain in pair}
    if len(heights) != 2 or any(limb != chest for limb, chest in row_gain.values()):
        return dict(row_gain)
    first = row_gain[min(row_gain)][0]
    (other,) = heights - {first}
    notes.append(
        f"calibration marks of {first:g} and {other:g} mm on one page: limb leads are read at "
        f"{first:g}, chest leads at {other:g} mm/mV; give --gain if all are at one"
    )
    return {y: (limb, other) for y, (limb, _) in row_gain.items()}


def _usual(values: np.ndarray, usual: Sequence[float]) -> tuple[float, float] | None:
    """The usual value that most of the measured ones are near, and their standard error."""
    if len(values) == 0:
        return None
    middle = float(np.median(values))
    nearest = _nearest(middle, usual)
    if abs(middle / nearest - 1) > NEAR:
        return None
    return nearest, float(np.std(values) / np.sqrt(len(values)))


def _spread(marks: Sequence[Mark], gain_mm_mv: float) -> float | None:
    """Standard error of a gain from the scatter of all marks, each about its own usual height."""
    off = np.array([m.height_mm / _nearest(m.height_mm, GAINS_MM_MV) for m in marks])
    if len(off) < 2:
        return None
    scatter = 1.4826 * float(np.median(np.abs(off - np.median(off))))
    return scatter * gain_mm_mv / float(np.sqrt(len(off)))


def _nearest(value: float, usual: Sequence[float]) -> float:
    return min(usual, key=lambda u: abs(np.log(value / u)))


def _listed(values: Sequence[float]) -> str:
    return " and ".join(f"{v:g}" for v in values)
