"""Numbers in words: rounded as far as they are known, never without their error or reason."""

import math

import pytest

from measure.criteria.finding import Clause, Evidence, Finding
from measure.quantity import Quantity, missing
from measure.reference import usual
from measure.wording import clause_lines, deciding, evidence_lines, nice, number, origin, signed
from tests.measure.made import ms


@pytest.mark.parametrize(
    ("quantity", "text"),
    [
        (Quantity(154.4, 4.2, "ms"), "154 ± 4 ms"),
        (Quantity(154.44, 0.31, "ms"), "154.4 ± 0.3 ms"),
        (Quantity(1.234, 0.021, "mV"), "1.23 ± 0.02 mV"),
        (Quantity(-12.3, 5.1, "deg"), "−12 ± 5°"),
        (Quantity(-0.2, 5.1, "deg"), "0 ± 5°"),
        (Quantity(72.06, 0.42, "1/min"), "72.1 ± 0.4 /min"),
        (Quantity(72.0, math.nan, "1/min"), "72.0 /min"),
        (missing("ms", "no P wave found"), "not measured: no P wave found"),
    ],
)
def test_number(quantity, text):
    assert number(quantity) == text


def test_origin_names_few_leads_and_counts_many():
    assert origin(Quantity(1.0, 0.1, "ms", ("I", "aVF"), 1)) == "I, aVF; 1 beat"
    assert origin(ms(100)) == "12 leads; 8 beats"
    assert origin(missing("ms", "why")) == ""


def test_signed_has_a_dash_for_nothing():
    assert signed(Quantity(0.31, 0.01, "mV")) == "+0.31"
    assert signed(missing("mV", "why")) == "–"


def test_evidence_of_one_kind_stands_on_one_line_with_its_leads():
    seen = (
        Evidence("V5", "R peak time", 72.0, 3.0, "ms", "> 60 ms"),
        Evidence("V6", "R peak time", 81.0, 3.0, "ms", "> 60 ms"),
        Evidence("I", "notch", 0.1, 0.01, "mV", "within 40 to 100 ms", 55.0),
        Evidence("V1", "shape rS", math.nan, math.nan, "", "a notch"),
    )
    assert evidence_lines(seen) == (
        "R peak time (> 60 ms): V5 72 ± 3, V6 81 ± 3",
        "notch (within 40 to 100 ms): I at 55 ms 0.10 ± 0.01 mV",
        "shape (a notch): V1 rS",
    )


def test_a_value_against_two_thresholds_is_shown_once():
    seen = tuple(
        Evidence("overall", "QRS duration", 115.0, 4.0, "ms", limit)
        for limit in (">= 110 ms", "< 120 ms")
    )
    assert evidence_lines(seen) == ("QRS duration (≥ 110 ms, < 120 ms): 115 ± 4",)


def test_open_clause_says_what_settles_it():
    clause = Clause("QRS >= 120 ms", "undecided", (), "a sharper copy")
    assert clause_lines(clause) == ("to settle it: a sharper copy",)


def test_deciding_clauses():
    met, failed = Clause("a", "met"), Clause("b", "not met")
    optional = Clause("c", "not met", required=False)
    assert deciding(Finding("k", "d", "s", "not met", (met, failed, optional))) == (failed,)
    assert deciding(Finding("k", "d", "s", "met", (met, optional))) == (met,)


def test_signs_are_printed_as_signs():
    assert nice("QRS >= 120 ms, axis -45 to -90") == "QRS ≥ 120 ms, axis −45 to −90"


@pytest.mark.parametrize(
    ("key", "value", "se", "place"),
    [
        ("qrs_ms", 110.0, 0.0, "within"),
        ("qrs_ms", 111.0, 0.0, "above"),
        ("qrs_ms", 111.0, 4.0, "at the limit"),
        ("pr_ms", 119.0, 0.0, "below"),
        ("pr_ms", 120.0, 0.0, "within"),
        ("pr_ms", 200.0, 0.0, "within"),
        ("pr_ms", 201.0, 0.0, "above"),
        ("qtc_bazett_ms", 449.0, 0.0, "within"),
        ("qtc_bazett_ms", 450.0, 0.0, "above"),
        ("qt_ms", 500.0, 0.0, ""),
    ],
)
def test_place_beside_the_usual_range(key, value, se, place):
    # PR 120-200 ms and QRS up to 110 ms are common practice; QTc AHA/ACCF/HRS 2009 part IV
    assert usual("male")[key].place(Quantity(value, se, "ms")) == place


def test_qtc_range_follows_the_sex():
    assert usual("female")["qtc_bazett_ms"].text == "below 460 ms"
    assert usual("male")["qtc_bazett_ms"].text == "below 450 ms"
    unknown = usual(None)["qtc_bazett_ms"]
    assert unknown.text == "below 450 ms"
    assert "women 460" in unknown.source
