"""Shapes that several definitions ask for: q absent, QS or rS, broad, notched or slurred R.

Each function looks at one lead and says met, not met or undecided with the evidence. A
deflection counts from the lead's own `smallest_mv`; one whose amplitude lies within its standard
error of that is neither there nor absent.
"""

import math
from collections.abc import Sequence

import numpy as np

from measure.criteria.case import Case
from measure.criteria.decide import Limit, Look, every, look_at, some, unseen
from measure.criteria.finding import Evidence, Result
from measure.quantity import Quantity, missing
from measure.waves import Deflection, LeadWaves, Notch

BROAD_R_MS = 80.0  # two small squares; no statement gives a number (common practice)
SURE_NOTCH_SE = 3.0  # a notch is the largest of many bends: one standard error is not enough
VISIBLE_MV = 0.05  # half a small square (common practice)
LEVEL_MS = 12.0  # the level before the QRS, as amplitudes are measured
LONGEST_Q_MS = 40.0  # where there is no R to end it
CONCORDANT_ST_MV = 0.1  # 1 mm, as in Sgarbossa et al., N Engl J Med 1996;334:481 (memory)


def no_q(case: Case, waves: LeadWaves) -> Look:
    """No Q wave: its depth stays below the smallest deflection that counts."""
    q = waves.find("Q") or waves.find("QS")
    limit = Limit("<", waves.smallest_mv, "mV")
    if q is not None:
        return look_at(
            Quantity(-q.amplitude_mv, q.se_mv, "mV"),
            limit,
            lead=waves.lead,
            what="q depth",
            time_ms=q.peak_ms,
        )
    depth, time_ms = _initial_depth(case, waves)
    seen = Evidence(waves.lead, "q depth", depth.value, depth.se, "mV", str(limit), time_ms)
    # Deep enough yet no Q: too short to count as a wave, or a sloping baseline. A reader decides.
    if depth.value - depth.se > waves.smallest_mv:
        note = f"whether a brief dip of {depth.value:.2f} mV at the onset is a q"
        return Look("undecided", (seen,), ((waves.lead, note),))
    return look_at(depth, limit, lead=waves.lead, what="q depth", time_ms=time_ms)


def has_q(case: Case, waves: LeadWaves) -> Look:
    """A Q wave before an R wave."""
    if waves.find("R") is None:
        return described("not met", waves, "a q before an R")
    absent = no_q(case, waves)
    turned: dict[Result, Result] = {"met": "not met", "not met": "met", "undecided": "undecided"}
    evidence = tuple(
        Evidence(
            e.lead,
            e.what,
            e.value,
            e.se,
            e.unit,
            str(Limit(">=", waves.smallest_mv, "mV")),
            e.time_ms,
        )
        for e in absent.evidence
    )
    return Look(turned[absent.result], evidence, absent.open)


def qs_or_rs(waves: LeadWaves) -> Look:
    """QS, or a small r and a larger S, and nothing else.

    Readers of paper do not see deflections below half a small square; where only those spoil the
    shape it is undecided.
    """
    if [d.name for d in waves.deflections] in (["QS"], ["R", "S"]):
        return _down_or_small_up(waves, waves.deflections)
    visible = tuple(d for d in waves.deflections if abs(d.amplitude_mv) >= VISIBLE_MV)
    if _down_or_small_up(waves, visible).result == "not met":
        return described("not met", waves, "QS or rS")
    note = f"whether the deflections below {VISIBLE_MV:g} mV are real"
    seen = described("undecided", waves, "QS or rS").evidence
    return Look("undecided", seen, ((waves.lead, note),))


def rs(waves: LeadWaves) -> Look:
    """An r, and an S larger than it."""
    r, s = waves.find("R"), waves.find("S")
    if r is None or s is None:
        return described("not met", waves, "rS")
    return _larger(waves.lead, s, r)


def qr(case: Case, waves: LeadWaves) -> Look:
    """A q, and an R larger than any negative deflection."""
    r, s = waves.find("R"), waves.find("S")
    q = waves.find("Q")
    if r is None:
        return described("not met", waves, "qR")
    looks = [has_q(case, waves)]
    looks += [_larger(waves.lead, r, below) for below in (q, s) if below is not None]
    return every(looks)


def upright(waves: LeadWaves) -> Look:
    """The QRS as a whole points upward: its net area is positive."""
    limit = Limit(">", 0.0, "mV ms")
    return look_at(waves.net_area_mv_ms, limit, lead=waves.lead, what="net area of the QRS")


def broad(case: Case, waves: LeadWaves) -> Look:
    """The upright part of the QRS is broad."""
    peaks = upward(waves)
    if not peaks:
        return described("not met", waves, "a broad R")
    span = Quantity(peaks[-1].offset_ms - peaks[0].onset_ms, case.edge_se_ms(waves.lead), "ms")
    limit = Limit(">=", BROAD_R_MS, "ms")
    return look_at(span, limit, lead=waves.lead, what="width of the R", time_ms=peaks[0].peak_ms)


def notched_or_slurred(
    waves: LeadWaves, *, from_ms: float, to_ms: float, at: str = "peak_ms"
) -> Look:
    """A notch or slur whose `at` ("onset_ms" or "peak_ms") lies within a stretch of the QRS."""
    wanted = f"within {from_ms:.0f} to {to_ms:.0f} ms"
    return _surest([n for n in bends(waves) if from_ms < getattr(n, at) < to_ms], waves, wanted, at)


def notched_or_slurred_r(waves: LeadWaves, *, from_ms: float, to_ms: float) -> Look:
    """The same on an R wave: a slur of the S, as in right block, is no second R."""
    wanted = f"on the R within {from_ms:.0f} to {to_ms:.0f} ms"
    on_r = [
        n
        for n in waves.notches
        if any(r.onset_ms <= n.peak_ms <= r.offset_ms for r in upward(waves))
    ]
    inside = [n for n in (*on_r, *_crossing(waves)) if from_ms < n.peak_ms < to_ms]
    return _surest(inside, waves, wanted, "peak_ms")


def _surest(inside: Sequence[Notch], waves: LeadWaves, wanted: str, at: str) -> Look:
    if not inside:
        return described("not met", waves, f"a notch or slur {wanted}")
    best = max(inside, key=lambda n: n.prominence_se)
    se_mv = best.depth_mv / best.prominence_se if best.prominence_se > 0 else math.nan
    seen = Evidence(waves.lead, best.kind, best.depth_mv, se_mv, "mV", wanted, getattr(best, at))
    if best.prominence_se >= SURE_NOTCH_SE:
        return Look("met", (seen,))
    note = f"the {best.kind} at {best.peak_ms:.0f} ms is hardly above the noise"
    return Look("undecided", (seen,), ((waves.lead, note),))


def broad_notched_or_slurred(case: Case, waves: LeadWaves) -> Look:
    """European wording: an upright R that is broad, notched or slurred."""
    late = notched_or_slurred_r(waves, from_ms=0.0, to_ms=case.intervals["qrs_ms"].value)
    return every([upright(waves), some([broad(case, waves), late])])


def discordant(waves: LeadWaves) -> Look:
    """T opposite to the QRS, and ST not displaced with the QRS by 1 mm or more."""
    area = waves.net_area_mv_ms
    if not area.known or not waves.t_mv.known:
        reason = area.reason or waves.t_mv.reason
        return unseen(waves.lead, f"QRS area or T wave: {reason}")
    sign = 1.0 if area.value > 0 else -1.0
    t_look = look_at(
        waves.t_mv,
        Limit("<" if sign > 0 else ">", 0.0, "mV"),
        lead=waves.lead,
        what=f"T with {'an upright' if sign > 0 else 'a negative'} QRS",
    )
    if abs(area.value) < area.se:
        return Look("undecided", t_look.evidence, ((waves.lead, "the QRS points neither way"),))
    st = waves.st_mv.get(60)
    if st is None or not st.known:
        return t_look
    st_limit = Limit("<" if sign > 0 else ">", sign * CONCORDANT_ST_MV, "mV")
    return every([t_look, look_at(st, st_limit, lead=waves.lead, what="ST at J + 60 ms")])


def upward(waves: LeadWaves) -> tuple[Deflection, ...]:
    """The R waves of a lead, in order."""
    return tuple(d for d in waves.deflections if d.name.startswith("R"))


def bends(waves: LeadWaves) -> tuple[Notch, ...]:
    """Notches and slurs, and an S so deep between R and R' that it crosses the baseline."""
    return (*waves.notches, *_crossing(waves))


def _crossing(waves: LeadWaves) -> tuple[Notch, ...]:
    peaks = upward(waves)
    between = waves.find("S")
    if len(peaks) < 2 or between is None or not peaks[0].peak_ms < between.peak_ms:
        return ()
    depth = min(peaks[0].amplitude_mv, peaks[1].amplitude_mv) - between.amplitude_mv
    prominence_se = depth / between.se_mv if between.se_mv > 0 else math.inf
    return (Notch("notch", peaks[0].peak_ms, between.peak_ms, depth, prominence_se),)


def described(result: Result, waves: LeadWaves, wanted: str) -> Look:
    """A look whose evidence is the shape in letters."""
    seen = Evidence(waves.lead, f"shape {waves.shape}", math.nan, math.nan, "", wanted)
    return Look(result, (seen,))


def _initial_depth(case: Case, waves: LeadWaves) -> tuple[Quantity, float]:
    """Deepest point between the QRS onset and the first R peak, below the level at the onset."""
    time_ms, mv, se_mv = case.samples(waves.lead)
    peaks = upward(waves)
    end_ms = peaks[0].peak_ms if peaks else LONGEST_Q_MS
    before = (time_ms >= -LEVEL_MS) & (time_ms <= 0) & np.isfinite(mv)
    inside = np.flatnonzero((time_ms >= 0) & (time_ms <= end_ms) & np.isfinite(mv))
    if inside.size == 0 or not before.any():
        return missing("mV", "no sample at the onset"), math.nan
    lowest = inside[np.argmin(mv[inside])]
    depth_mv = max(float(mv[before].mean() - mv[lowest]), 0.0)
    return Quantity(depth_mv, float(se_mv[lowest]), "mV"), float(time_ms[lowest])


def _larger(lead: str, large: Deflection, small: Deflection) -> Look:
    """One deflection is larger than another."""
    gain = abs(large.amplitude_mv) - abs(small.amplitude_mv)
    return look_at(
        Quantity(gain, math.hypot(large.se_mv, small.se_mv), "mV"),
        Limit(">", 0.0, "mV"),
        lead=lead,
        what=f"{large.name} beyond {small.name}",
        time_ms=large.peak_ms,
    )


def _down_or_small_up(waves: LeadWaves, deflections: tuple[Deflection, ...]) -> Look:
    """One negative deflection, or a positive one and a larger negative one."""
    signs = [d.amplitude_mv > 0 for d in deflections]
    if signs == [False]:
        return described("met", waves, "QS or rS")
    if signs == [True, False]:
        return _larger(waves.lead, deflections[1], deflections[0])
    return described("not met", waves, "QS or rS")
