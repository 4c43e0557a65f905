"""Self-checks of a tracing, in plain words for the person who relies on it.

Each check compares something on the page with something else on it, or says what was assumed
because the page does not tell. A check that failed asks a person to look; one that could not be
judged says why.
"""

from collections.abc import Iterator

import numpy as np

from digitize.relations import check_relations
from digitize.tracing import FS_HZ, LEADS, Check, Known, Panel, Tracing

REPEAT_LIMIT_DB = 10.0  # a panel and its strip: the difference holds a tenth of the power
REPEAT_SHORTEST_S = 0.6  # of common time: about one beat
REPEAT_SAME_S = 0.1  # a panel that fits no farther away than this fits where it stands
REPEAT_ELSEWHERE = 0.9  # correlation from which on a panel is said to fit another time better
COVERAGE_LIMIT = 0.9  # share of a panel's samples that were read
UNEXPLAINED_LIMIT = 0.25  # share of a panel's ink that its redrawn trace leaves over
SCALE_SE_LIMIT = 0.03  # relative standard error of speed or gain
FLAT_TOP_MM = 0.06  # samples this close to the extreme are at it: a pen is five times as broad
FLAT_TOP_S = 0.030  # no QRS stands still at its summit for so long, twice, at one height
FLAT_TOP_LEAST_MM = 10.0  # recorders run out of paper, not out of small voltages
# The limits above are rules of thumb.


def find_checks(tracing: Tracing) -> tuple[Check, ...]:
    """Return every self-check of a tracing, in the order in which a person would ask.

    Parameters
    ----------
    tracing : Tracing
        Its `geometry` may hold, panel by panel, the share of unexplained ink.
    """
    return (
        _check_scale("speed", "paper speed", "mm/s", tracing.speed_mm_s, "times"),
        _check_scale("gain", "gain", "mm/mV", tracing.gain_mm_mv, "voltages"),
        _check_layout(tracing),
        _check_timing(tracing),
        _check_names(tracing),
        _check_twelve(tracing),
        *check_relations(tracing),
        *_check_repeats(tracing),
        _check_coverage(tracing),
        *_check_ink(tracing),
        *_check_flat_tops(tracing),
    )


def _check_scale(name: str, words: str, unit: str, known: Known, depends: str) -> Check:
    """Whether speed or gain was measured, read or given, and well enough."""
    value = f"{known.value:g} {unit}"
    how = {
        "found": "was measured on the page",
        "printed": "is printed on the page",
        "given": "was given",
    }
    if known.source == "assumed":
        message = (
            f"The {words} could not be found on the page: {value} is assumed, and all {depends} "
            f"hang on it. Give --{name} if you know it."
        )
        return Check(name, False, message)
    relative = known.se / known.value if known.se is not None and known.value else None
    sure = relative is None or relative <= SCALE_SE_LIMIT
    message = f"The {words} {how[known.source]}: {value}."
    if relative is not None and not sure:
        message += f" It is uncertain by {relative:.0%}: compare it with the page."
    return Check(name, sure, message, relative, SCALE_SE_LIMIT)


def _check_layout(tracing: Tracing) -> Check:
    """Whether the arrangement of the leads was seen or assumed."""
    known = tracing.layout
    if known.source == "assumed":
        return Check(
            "layout",
            False,
            f"The arrangement of the leads is not certain: {known.value} is assumed. Compare the "
            "lead names with the page, or give --layout.",
        )
    return Check("layout", True, f"The leads are arranged as {known.value}.")


def _check_timing(tracing: Tracing) -> Check:
    """Whether it is known how the columns follow in time."""
    words = {
        "consecutive": "The columns follow one another in time",
        "simultaneous": "All columns show the same instant",
    }
    known = tracing.timing
    if known.source == "assumed":
        message = (
            f"{words[known.value]}: this is assumed, the page does not tell. Rhythm across columns "
            "hangs on it, measurements within a lead do not."
        )
        return Check("timing", None, message)
    return Check("timing", True, f"{words[known.value]}.")


def _check_names(tracing: Tracing) -> Check:
    """Whether enough lead names were read to be sure of all, and none twice."""
    short = [panel for panel in tracing.panels if not panel.strip] or list(tracing.panels)
    places = [(panel.lead, panel.start_s) for panel in short]
    twice = tuple(sorted({lead for lead, start in places if places.count((lead, start)) > 1}))
    if twice:
        message = f"{_leads(twice)} named twice at one time: one of them is another lead."
        return Check("lead_names", False, message, leads=twice)
    assumed = tuple(
        f"{panel.lead} (strip)" if panel.strip else panel.lead
        for panel in tracing.panels
        if panel.lead_source == "assumed"
    )
    share = len(assumed) / len(tracing.panels) if tracing.panels else 0.0
    if share > 0.5:
        message = f"Most lead names could not be read: {_leads(assumed)} named by the usual order."
        return Check("lead_names", False, message, share, 0.5, assumed)
    message = "The lead names were read."
    if assumed:
        message = f"{_leads(assumed)} named by place; the names around them were read."
    return Check("lead_names", True, message, share, 0.5, assumed)


def _check_twelve(tracing: Tracing) -> Check:
    """Which of the twelve leads are not there."""
    read = {panel.lead for panel in tracing.panels if not np.isnan(panel.mv).all()}
    missing = tuple(lead for lead in LEADS if lead not in read)
    if missing:
        return Check(
            "twelve_leads", None, f"Not on this page: {', '.join(missing)}.", leads=missing
        )
    return Check("twelve_leads", True, "All twelve leads are there.")


def _check_repeats(tracing: Tracing) -> Iterator[Check]:
    """Every short panel against the rhythm strip that repeats its lead."""
    for strip in (panel for panel in tracing.panels if panel.strip):
        for short in tracing.panels:
            if short.strip or short.lead != strip.lead:
                continue
            check = _check_repeat(short, strip)
            if check is not None:
                yield check


def _check_repeat(short: Panel, strip: Panel) -> Check | None:
    """One panel against its strip; None where they share too little time."""
    lag = round((short.start_s - strip.start_s) * strip.fs_hz)
    found = _agreement(short.mv, strip.mv, lag)
    if found is None:
        return None
    snr_db, _ = found
    name, lead = "repeated_lead", short.lead
    if snr_db >= REPEAT_LIMIT_DB:
        message = f"Lead {lead} and its rhythm strip show the same beats ({snr_db:.0f} dB)."
        return Check(name, True, message, snr_db, REPEAT_LIMIT_DB, (lead,))
    message = f"Lead {lead} and its rhythm strip differ at the same time ({snr_db:.0f} dB)."
    best_s = _best_time(short, strip)
    if best_s is not None:
        message += (
            f" The panel fits the strip at {best_s:.2f} s instead of {short.start_s:.2f} s: "
            "the columns may not follow one another as assumed (see --timing)."
        )
    else:
        message += " One of them may be another lead, at another gain, or badly traced."
    return Check(name, False, message, snr_db, REPEAT_LIMIT_DB, (lead,))


def _agreement(short: np.ndarray, strip: np.ndarray, lag: int) -> tuple[float, float] | None:
    """Ratio of signal to difference in dB, and correlation, with the panel `lag` samples along."""
    low, high = max(lag, 0), min(lag + len(short), len(strip))
    if high - low < REPEAT_SHORTEST_S * FS_HZ:
        return None
    one, other = short[low - lag : high - lag], strip[low:high]
    both = np.isfinite(one) & np.isfinite(other)
    if both.sum() < REPEAT_SHORTEST_S * FS_HZ:
        return None
    one, other = one[both] - one[both].mean(), other[both] - other[both].mean()
    power, error = np.mean(other**2), np.mean((one - other) ** 2)
    if power == 0:
        return None
    snr_db = 10 * np.log10(power / max(error, 1e-12))
    scale = np.sqrt(power * np.mean(one**2))
    return float(snr_db), float(np.mean(one * other) / scale) if scale > 0 else 0.0


def _best_time(short: Panel, strip: Panel) -> float | None:
    """Where else along the strip the panel fits, in seconds; None where nowhere."""
    step = 5  # samples: 10 ms, a third of the narrowest QRS
    best, best_s = REPEAT_ELSEWHERE, None
    for lag in range(0, len(strip.mv) - len(short.mv) + 1, step):
        found = _agreement(short.mv, strip.mv, lag)
        if found is not None and found[1] > best:
            best, best_s = found[1], strip.start_s + lag / strip.fs_hz
    near = best_s is not None and abs(best_s - short.start_s) < REPEAT_SAME_S
    return None if near else best_s


def _check_coverage(tracing: Tracing) -> Check:
    """How much of the printed traces was read, and where it was not enough."""
    shares = [
        (panel.lead, float(np.isfinite(panel.mv).mean()))
        for panel in tracing.panels
        if len(panel.mv)
    ]
    least = min((share for _, share in shares), default=0.0)
    gaps = [(lead, share) for lead, share in shares if share < COVERAGE_LIMIT]
    if gaps:
        listed = ", ".join(f"{lead} {share:.0%}" for lead, share in gaps)
        message = f"Parts of the trace could not be read and are left blank; read of {listed}."
    else:
        message = f"At least {least:.0%} of every trace was read."
    return Check(
        "coverage", not gaps, message, least, COVERAGE_LIMIT, tuple(lead for lead, _ in gaps)
    )


def _check_ink(tracing: Tracing) -> Iterator[Check]:
    """Whether the redrawn traces account for the ink of their panels."""
    facts = tracing.geometry.get("panels", [])
    shares = [
        (panel.lead, fact["unexplained"])
        for panel, fact in zip(tracing.panels, facts, strict=False)
        if fact.get("unexplained") is not None and np.isfinite(fact["unexplained"])
    ]
    if not shares:
        return
    worst = max(share for _, share in shares)
    doubtful = tuple(lead for lead, share in shares if share > UNEXPLAINED_LIMIT)
    message = f"The redrawn traces account for the ink: at most {worst:.0%} is left over."
    if doubtful:
        message = (
            f"Ink beside the trace of {', '.join(doubtful)}: up to {worst:.0%} is not accounted "
            "for. A neighbouring trace, writing or a stamp may have been followed."
        )
    yield Check("ink", not doubtful, message, worst, UNEXPLAINED_LIMIT, doubtful)


def _check_flat_tops(tracing: Tracing) -> Iterator[Check]:
    """Traces that stop again and again at one height, as if cut off by the edge of the paper."""
    cut = tuple(
        panel.lead
        for panel in tracing.panels
        if _flat_top(panel.mv * panel.gain_mm_mv, panel.fs_hz)
        or _flat_top(-panel.mv * panel.gain_mm_mv, panel.fs_hz)
    )
    if cut:
        yield Check(
            "cut_off",
            False,
            f"The trace of {', '.join(cut)} stops at one height several times, as if cut off: "
            "its true peaks may be larger.",
            leads=cut,
        )


def _flat_top(height_mm: np.ndarray, fs_hz: float) -> bool:
    """Whether the trace rests at its greatest height at least twice."""
    read = height_mm[np.isfinite(height_mm)]
    if len(read) == 0 or read.max() - np.median(read) < FLAT_TOP_LEAST_MM:
        return False
    at_top = np.concatenate([[0], (height_mm > read.max() - FLAT_TOP_MM).astype(int), [0]])
    starts, ends = np.flatnonzero(np.diff(at_top) == 1), np.flatnonzero(np.diff(at_top) == -1)
    return int(((ends - starts) >= FLAT_TOP_S * fs_hz).sum()) >= 2


def _leads(names: tuple[str, ...]) -> str:
    """ "Lead V1 is" or "Leads V1, V2 are"."""
    return f"Lead {names[0]} is" if len(names) == 1 else f"Leads {', '.join(names)} are"
