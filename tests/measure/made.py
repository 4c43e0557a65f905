"""Hand-made measurements with exactly known values, for tests of what is built on them."""

from dataclasses import replace

import numpy as np

from digitize.tracing import LEADS, Known, PageSource, Panel, Tracing
from measure.average import DominantBeat
from measure.beats import Beats
from measure.boundaries import Boundaries, Edges
from measure.criteria import judge
from measure.criteria.finding import Clause, Finding
from measure.quantity import Quantity, missing
from measure.reading import Person, Reading
from measure.rhythm import Rhythm
from measure.waves import Deflection, LeadWaves, Notch

MALE, FEMALE, UNKNOWN = Person("male"), Person("female"), Person()
QRS_ON_MS = -60.0


def ms(value, se=0.0):
    return Quantity(float(value), se, "ms", LEADS, 8)


def mv(value, se=0.0):
    return Quantity(float(value), se, "mV", (), 8)


def wave(name, amplitude_mv, onset_ms, offset_ms, *, peak_ms=None, se_mv=0.0):
    peak = (onset_ms + offset_ms) / 2 if peak_ms is None else peak_ms
    area = amplitude_mv * (offset_ms - onset_ms) / 2
    return Deflection(name, amplitude_mv, se_mv, onset_ms, peak, offset_ms, area)


def notch(onset_ms, peak_ms, *, kind="notch", prominence_se=10.0):
    return Notch(kind, onset_ms, peak_ms, 0.1, prominence_se)


def lead(name, shape, *deflections, **changes):
    """One lead; R peak time, net area and a discordant T follow from its deflections."""
    up = [d for d in deflections if d.name.startswith("R")]
    area = sum(d.area_mv_ms for d in deflections)
    made = LeadWaves(
        lead=name,
        shape=shape,
        deflections=deflections,
        notches=(),
        r_peak_time_ms=ms(up[-1].peak_ms) if up else missing("ms", "no R wave"),
        net_area_mv_ms=Quantity(area, 0.0, "mV ms", (name,), 8),
        st_mv={after: mv(0.0) for after in (0, 40, 60, 80)},
        t_mv=mv(-0.3 if area > 0 else 0.3),
        p_mv=mv(0.1),
        smallest_mv=0.02,
        qrs_complete=True,
        beats=8,
    )
    return replace(made, **changes)


def lbbb_leads():
    """A textbook complete left bundle branch block with a QRS of 150 ms."""
    notched = (notch(55, 70),)
    tall = {
        name: lead(name, "notched R", wave("R", 1.0, 0, 150, peak_ms=90), notches=notched)
        for name in ("I", "aVL", "V5", "V6")
    }
    deep = {
        name: lead(name, "rS", wave("R", 0.05, 0, 20), wave("S", -1.5, 20, 150, peak_ms=60))
        for name in ("III", "aVF", "V1", "V2", "V3")
    }
    rest = {
        "II": lead("II", "R", wave("R", 0.5, 0, 150)),
        "aVR": lead("aVR", "QS", wave("QS", -0.8, 0, 150)),
        "V4": lead("V4", "RS", wave("R", 0.6, 0, 80, peak_ms=70), wave("S", -0.6, 80, 150)),
    }
    return {name: {**tall, **deep, **rest}[name] for name in LEADS}


def rbbb_leads():
    """A textbook complete right bundle branch block."""
    right = {
        name: lead(
            name,
            "rsR'",
            wave("R", 0.2, 0, 25),
            wave("S", -0.3, 25, 50),
            wave("R'", 0.9, 50, 140, peak_ms=90),
        )
        for name in ("V1", "V2")
    }
    left = {
        name: lead(
            name,
            "qRs",
            wave("Q", -0.08, 0, 15),
            wave("R", 0.9, 15, 65, peak_ms=38),
            wave("S", -0.4, 65, 140),
        )
        for name in ("I", "aVL", "V4", "V5", "V6")
    }
    rest = {
        name: lead(name, "RS", wave("R", 0.6, 0, 60), wave("S", -0.5, 60, 140))
        for name in ("II", "III", "aVF", "V3")
    }
    rest["aVR"] = lead("aVR", "QR", wave("Q", -0.7, 0, 60), wave("R", 0.3, 60, 140))
    return {name: {**right, **left, **rest}[name] for name in LEADS}


def normal_leads():
    """Normal conduction with a QRS of 90 ms."""
    left = {
        name: lead(
            name,
            "qRs",
            wave("Q", -0.08, 0, 15),
            wave("R", 1.0, 15, 60, peak_ms=38),
            wave("S", -0.1, 60, 90),
            t_mv=mv(0.3),
        )
        for name in ("I", "II", "III", "aVL", "aVF", "V4", "V5", "V6")
    }
    right = {
        name: lead(name, "rS", wave("R", 0.2, 0, 30), wave("S", -1.0, 30, 90), t_mv=mv(0.2))
        for name in ("V1", "V2", "V3")
    }
    rest = {"aVR": lead("aVR", "QS", wave("QS", -0.9, 0, 90), t_mv=mv(-0.2))}
    return {name: {**left, **right, **rest}[name] for name in LEADS}


def intervals(**changes):
    """Intervals at 60/min, where every QTc equals QT."""
    values = {
        "rate_bpm": Quantity(60.0, 0.2, "1/min", LEADS, 8),
        "rr_ms": ms(1000),
        "p_ms": ms(100),
        "pr_ms": ms(160),
        "qrs_ms": ms(150),
        "qt_ms": ms(430),
        "jt_ms": ms(280),
        "qtc_bazett_ms": ms(430),
        "qtc_fridericia_ms": ms(430),
        "qtc_framingham_ms": ms(430),
        "qtc_hodges_ms": ms(430),
        "p_axis_deg": Quantity(50.0, 5.0, "deg", LEADS, 8),
        "qrs_axis_deg": Quantity(0.0, 0.0, "deg", LEADS, 8),
        "t_axis_deg": Quantity(60.0, 5.0, "deg", LEADS, 8),
    }
    return {**values, **changes}


def rhythm(**changes):
    made = Rhythm(
        rate_bpm=Quantity(60.0, 0.2, "1/min", LEADS, 8),
        rr_ms=ms(1000),
        regular=True,
        statement="sinus P waves",
        why=("P upright in I and aVF", "one P before each QRS"),
        premature=0,
        odd=0,
        paced=False,
    )
    return replace(made, **changes)


def boundaries(leads=LEADS, qrs_ms=150.0):
    edges = Edges(
        p_on_ms=ms(QRS_ON_MS - 160, 4.0),
        p_off_ms=ms(QRS_ON_MS - 60, 4.0),
        qrs_on_ms=ms(QRS_ON_MS),
        qrs_off_ms=ms(QRS_ON_MS + qrs_ms),
        t_off_ms=ms(QRS_ON_MS + 430, 8.0),
    )
    return Boundaries(edges, dict.fromkeys(leads, edges))


def beat(leads):
    """Straight lines from peak to peak of each lead's deflections, and a round T."""
    time_ms = np.arange(-300.0, 500.0, 1.0)
    rows = []
    for waves in leads.values():
        knots = {-300.0: 0.0, QRS_ON_MS: 0.0, 500.0: 0.0}
        for d in waves.deflections:
            knots.setdefault(QRS_ON_MS + d.onset_ms, 0.0)
            knots[QRS_ON_MS + d.peak_ms] = d.amplitude_mv
            knots[QRS_ON_MS + d.offset_ms] = 0.0
        at = sorted(knots)
        t_wave = waves.t_mv.value * np.exp(-(((time_ms - 280) / 45) ** 2))
        p_wave = 0.1 * np.exp(-(((time_ms + 170) / 20) ** 2))
        rows.append(np.interp(time_ms, at, [knots[t] for t in at]) + t_wave + p_wave)
    count = len(leads)
    mv_rows = np.array(rows).reshape(count, -1)
    return DominantBeat(
        tuple(leads), time_ms, mv_rows, np.full(mv_rows.shape, 1e-3), (8,) * count, 1000.0
    )


def with_delta(drawn, leads, names, slow_ms):
    """The same beat, its R in some leads beginning slowly: 0.1 mV in `slow_ms`, then steep."""
    rows = drawn.mv.copy()
    for name in names:
        r = leads[name].deflections[0]
        at = [QRS_ON_MS, QRS_ON_MS + slow_ms, QRS_ON_MS + r.peak_ms]
        inside = (drawn.time_ms >= at[0]) & (drawn.time_ms <= at[2])
        drawn_to = np.interp(drawn.time_ms[inside], at, [0.0, 0.1, r.amplitude_mv])
        rows[drawn.leads.index(name), inside] = drawn_to
    return replace(drawn, mv=rows)


def findings(
    leads, person=MALE, *, rhythm_changes=None, drawn=None, **interval_changes
) -> dict[str, Finding]:
    """All findings by key."""
    found = judge(
        leads,
        boundaries(tuple(leads)),
        intervals(**interval_changes),
        rhythm(**(rhythm_changes or {})),
        drawn or beat(leads),
        person,
    )
    return {f.key: f for f in found}


def clause(finding: Finding, start: str) -> Clause:
    """The clause whose text begins with `start`."""
    (one,) = [c for c in finding.clauses if c.text.startswith(start)]
    return one


def reading(leads=None, person=MALE, **interval_changes) -> Reading:
    """A whole reading of a drawn 12-lead recording of the Marram Head Infirmary."""
    leads = lbbb_leads() if leads is None else leads
    made_beat = beat(leads)
    wave_row = np.concatenate([np.tile(made_beat.mv, 1)] * 3, axis=1)
    panels = tuple(
        Panel(
            name,
            False,
            row,
            0.0,
            500.0,
            wave_row[row],
            np.full(wave_row.shape[1], 0.01),
            (0.0, 25.0 * row, 60.0, 25.0 * row + 25.0),
            25.0,
            10.0,
        )
        for row, name in enumerate(leads)
    )
    tracing = Tracing(
        source=PageSource("marram_head_07.png", "0" * 63 + "7", 1, 3508, 2480, (300.0, 300.0)),
        panels=panels,
        speed_mm_s=Known(25.0, "printed", 0.1),
        gain_mm_mv=Known(10.0, "found", 0.05),
        layout=Known("12x1", "found"),
        timing=Known("simultaneous", "found"),
    )
    measured = intervals(**interval_changes)
    edges, heart = boundaries(tuple(leads)), rhythm()
    return Reading(
        tracing=tracing,
        person=person,
        beats=Beats(
            np.arange(8.0), ("usual",) * 8, np.ones(8, bool), np.zeros(8, bool), np.zeros(0)
        ),
        rhythm=heart,
        beat=made_beat,
        boundaries=edges,
        waves=leads,
        intervals=measured,
        findings=judge(leads, edges, measured, heart, made_beat, person),
        cautions=("This is no diagnosis. A qualified clinician reads the original tracing.",),
    )
