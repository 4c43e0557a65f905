"""The annotated ECG against rules of its schema and guide; see `aecg_rules` for their source."""

import pytest

from digitize.formats import export
from digitize.formats.measurements import NOTHING, Judged, Measurements, Number
from tests.digitize.formats.aecg_rules import violations
from tests.digitize.made_tracing import tracing

MEASURED = Measurements(
    (
        Number("qrs_ms", 164.2, 3.1),
        Number("pr_ms", None, None, "no P wave"),
        Number("rr_ms", 812.0, 2.0),
    ),
    (Judged("LBBB", "a source", "met"),),
)


def content(measured=NOTHING, hole=True):
    made = tracing()
    if hole:
        made.lead("V2").mv[300:340] = float("nan")
    (found,) = export(made, "chart", "aecg", measured).values()
    return found


@pytest.mark.parametrize("measured", [NOTHING, MEASURED], ids=["leads", "measured"])
@pytest.mark.parametrize("hole", [False, True])
def test_no_rule_is_broken(measured, hole):
    assert violations(content(measured, hole)) == []


@pytest.mark.parametrize(
    ("there", "instead", "said"),
    [
        (b"<id root=", b"<id extension=", "root None"),
        (b'<effectiveTime nullFlavor="UNK" />', b"", "effectiveTime stands 0 times"),
        (b'nullFlavor="UNK"', b'nullFlavor="WHY"', "null flavour WHY"),
        (b' codeSystem="2.16.840.1.113883.6.12"', b"", "a code needs its system"),
        (b"TIME_RELATIVE", b"MDC_ECG_LEAD_II", "one sequence of time stands first"),
        (b'unit="uV"', b'unit="microvolt"', "is no quantity"),
        (b"<digits>", b"<digits>0.5 ", "digits that are no whole numbers"),
        (b"<digits>", b"<digits>7 ", "leads of different lengths"),
        (b'increment value="0.002"', b'increment value="0"', "time does not go on"),
        (b"MDC_ECG_LEAD_V2", b"MDC_ECG_LEAD_V1", "leads"),
        (b"SLIST_PQ", b"SLIST", "type 'SLIST'"),
        (b"<head ", b"<tail ", "GLIST_PQ holds"),
        (b"<softwareName>", b"<note/><softwareName>", "note may not stand there"),
        (b'<code code="RHYTHM"', b'<author/><code code="RHYTHM"', "the order is"),
    ],
)
def test_what_breaks_a_rule_is_found(there, instead, said):
    """Otherwise the rules would prove nothing."""
    whole = content(hole=False)
    assert there in whole
    broken = whole.replace(there, instead, 1 if there == b"<digits>" else -1)
    assert any(said in text for text in violations(broken)), violations(broken)
