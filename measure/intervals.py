"""Intervals, corrected QT and frontal axes, each with its standard error."""

import math
from collections.abc import Callable, Mapping

import numpy as np

from measure.average import DominantBeat
from measure.boundaries import Boundaries
from measure.quantity import Quantity, missing
from measure.rhythm import Rhythm
from measure.waves import LeadWaves

_LEAST_AXIS_SE = 2.0  # a vector shorter than this many standard errors points nowhere
_LEVEL_MS = 4


def qtc_bazett_ms(qt_ms: float, rr_ms: float) -> float:
    """QT over the square root of RR in seconds (Bazett, Heart 1920;7:353)."""
    return qt_ms / math.sqrt(rr_ms / 1000)


def qtc_fridericia_ms(qt_ms: float, rr_ms: float) -> float:
    """QT over the cube root of RR in seconds (Fridericia, Acta Med Scand 1920;53:469)."""
    return qt_ms / (rr_ms / 1000) ** (1 / 3)


def qtc_framingham_ms(qt_ms: float, rr_ms: float) -> float:
    """QT + 0.154 (1 - RR) in seconds (Sagie et al., Am J Cardiol 1992;70:797)."""
    return qt_ms + 0.154 * (1000 - rr_ms)


def qtc_hodges_ms(qt_ms: float, rr_ms: float) -> float:
    """QT + 1.75 ms for each beat per minute over 60 (Hodges et al., JACC 1983;1:694)."""
    return qt_ms + 1.75 * (60000 / rr_ms - 60)


_FORMULAS: Mapping[str, Callable[[float, float], float]] = {
    "qtc_bazett_ms": qtc_bazett_ms,
    "qtc_fridericia_ms": qtc_fridericia_ms,
    "qtc_framingham_ms": qtc_framingham_ms,
    "qtc_hodges_ms": qtc_hodges_ms,
}


def measure_intervals(
    beat: DominantBeat,
    boundaries: Boundaries,
    rhythm: Rhythm,
    waves: Mapping[str, LeadWaves],
) -> dict[str, Quantity]:
    """Return the overall intervals and axes; the keys are those of `Reading.intervals`."""
    edges = boundaries.overall
    qt_ms = _between(edges.qrs_on_ms, edges.t_off_ms)
    corrected = {key: _corrected(qt_ms, rhythm.rr_ms, f) for key, f in _FORMULAS.items()}
    return {
        "rate_bpm": rhythm.rate_bpm,
        "rr_ms": rhythm.rr_ms,
        "p_ms": _between(edges.p_on_ms, edges.p_off_ms),
        "pr_ms": _between(edges.p_on_ms, edges.qrs_on_ms),
        "qrs_ms": _between(edges.qrs_on_ms, edges.qrs_off_ms),
        "qt_ms": qt_ms,
        "jt_ms": _between(edges.qrs_off_ms, edges.t_off_ms),
        **corrected,
        "p_axis_deg": _wave_axis(beat, edges.p_on_ms, edges.p_off_ms),
        "qrs_axis_deg": frontal_axis({lead: w.net_area_mv_ms for lead, w in waves.items()}),
        "t_axis_deg": frontal_axis({lead: w.t_mv for lead, w in waves.items()}),
    }


def _between(start: Quantity, end: Quantity) -> Quantity:
    if not start.known:
        return missing("ms", start.reason or "its beginning cannot be seen")
    if not end.known:
        return missing("ms", end.reason or "its end cannot be seen")
    se = math.hypot(start.se, end.se)
    return Quantity(end.value - start.value, se, "ms", end.leads, min(start.beats, end.beats))


def _corrected(
    qt_ms: Quantity, rr_ms: Quantity, formula: Callable[[float, float], float]
) -> Quantity:
    """QT for a rate of 60/min, its error by small steps of QT and RR."""
    for needed in (qt_ms, rr_ms):
        if not needed.known:
            return missing("ms", needed.reason or "QT or RR is missing")
    value = formula(qt_ms.value, rr_ms.value)
    se = math.hypot(
        formula(qt_ms.value + qt_ms.se, rr_ms.value) - value,
        formula(qt_ms.value, rr_ms.value + rr_ms.se) - value,
    )
    return Quantity(value, se, "ms", qt_ms.leads, qt_ms.beats)


def _wave_axis(beat: DominantBeat, start: Quantity, end: Quantity) -> Quantity:
    """Axis by the area of a wave about the line between its ends."""
    if not (start.known and end.known):
        return missing("deg", start.reason or end.reason or "the wave cannot be seen")
    low, high = np.searchsorted(beat.time_ms, [start.value, end.value])
    areas = {}
    for k, lead in enumerate(beat.leads):
        mv, se = beat.mv[k, low:high], beat.se_mv[k, low:high]
        if beat.beats[k] and len(mv) > 2 * _LEVEL_MS and np.isfinite(mv).all():
            ends = mv[:_LEVEL_MS].mean(), mv[-_LEVEL_MS:].mean()
            area = float((mv - np.linspace(*ends, len(mv))).sum())
            areas[lead] = Quantity(
                area, float(se.mean() * len(mv) / 2), "mV ms", (lead,), beat.beats[k]
            )
    return frontal_axis(areas)


def frontal_axis(sizes: Mapping[str, Quantity]) -> Quantity:
    """Return the frontal axis in degrees from the sizes of a wave in lead I and aVF.

    Einthoven's and Goldberger's geometry: aVF is scaled by 2 / sqrt(3), since the augmented leads
    are shorter than the bipolar ones. Without aVF it follows from I and II, or I and III.
    """
    one, foot = sizes.get("I"), _foot(sizes)
    if one is None or not one.known or foot is None:
        return missing("deg", "leads I and aVF (or II or III) are needed")
    x, y = one.value, 2 / math.sqrt(3) * foot.value
    x_se, y_se = one.se, 2 / math.sqrt(3) * foot.se
    length = math.hypot(x, y)
    if length < _LEAST_AXIS_SE * math.hypot(x_se, y_se):
        return missing("deg", "the wave is too small, or too balanced, to have a direction")
    se = math.degrees(math.hypot(x * y_se, y * x_se) / length**2)
    leads = (*one.leads, *foot.leads)
    return Quantity(math.degrees(math.atan2(y, x)), se, "deg", leads, min(one.beats, foot.beats))


def _foot(sizes: Mapping[str, Quantity]) -> Quantity | None:
    """Size in aVF, measured or from the other limb leads."""
    known = {lead: size for lead, size in sizes.items() if size.known}
    if "aVF" in known:
        return known["aVF"]
    for lead, sign in (("II", -0.5), ("III", 0.5)):
        if lead in known and "I" in known:
            other, one = known[lead], known["I"]
            value = other.value + sign * one.value
            se = math.hypot(other.se, one.se / 2)
            return Quantity(value, se, other.unit, (lead,), min(other.beats, one.beats))
    return None
