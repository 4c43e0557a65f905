"""Three-valued logic: one standard error decides, one clear no settles a definition."""

import math

import pytest

from measure.criteria.decide import Limit, Look, at_least, by_sex, clause, every, finding, some
from measure.criteria.finding import Evidence

MET, NOT, OPEN = Look("met"), Look("not met"), Look("undecided", (), (("V1", "more beats"),))


@pytest.mark.parametrize(
    ("value", "se", "result"),
    [
        (120.0, 0.0, "met"),
        (119.9, 0.0, "not met"),
        (124.0, 4.0, "met"),  # exactly one standard error away is decided
        (123.9, 4.0, "undecided"),
        (116.1, 4.0, "undecided"),
        (116.0, 4.0, "not met"),
        (math.nan, 4.0, "undecided"),
        (150.0, math.nan, "undecided"),  # an error that nobody knows decides nothing
    ],
)
def test_limit_is_decided_from_one_standard_error(value, se, result):
    assert Limit(">=", 120, "ms").judge(value, se) == result


@pytest.mark.parametrize(
    ("sign", "result"), [(">=", "met"), (">", "not met"), ("<=", "met"), ("<", "not met")]
)
def test_limit_at_the_threshold_follows_its_sign(sign, result):
    assert Limit(sign, 60, "ms").judge(60.0, 0.0) == result


def test_every_some_and_at_least():
    assert every([MET, MET]).result == "met"
    assert every([MET, OPEN]).result == "undecided"
    assert every([NOT, OPEN]).result == "not met"
    assert some([NOT, OPEN]).result == "undecided"
    assert some([MET, OPEN]).result == "met"
    assert some([NOT, NOT]).result == "not met"
    assert at_least(2, [MET, OPEN, NOT]).result == "undecided"
    assert at_least(2, [MET, NOT, NOT]).result == "not met"
    assert at_least(2, [MET, MET, OPEN]).result == "met"


def test_undecided_says_what_would_settle_it_once():
    assert every([OPEN, OPEN, MET]).settle == "V1: more beats"
    other = Look("undecided", (), (("V2", "more beats"), ("overall", "a sharper copy")))
    assert every([OPEN, other]).settle == "V1, V2: more beats; a sharper copy"
    assert every([MET]).settle is None


def test_a_clear_no_settles_a_definition_and_an_optional_clause_does_not_count():
    refused = finding("k", "d", "s", [clause("a", OPEN), clause("b", NOT)])
    assert refused.result == "not met"
    optional = finding("k", "d", "s", [clause("a", MET), clause("b", NOT, required=False)])
    assert optional.result == "met"


def test_unknown_sex_shows_both_where_they_differ():
    man = Look("not met", (Evidence("overall", "QRS", 135.0, 2.0, "ms", ">= 140 ms"),))
    woman = Look("met", (Evidence("overall", "QRS", 135.0, 2.0, "ms", ">= 130 ms"),))
    both = by_sex(None, male=man, female=woman)
    assert both.result == "undecided"
    assert both.settle == "the patient's sex: met for a woman, not met for a man"
    assert [e.threshold for e in both.evidence] == [">= 140 ms", ">= 130 ms"]
    assert by_sex("female", male=man, female=woman) == woman
    assert by_sex("male", male=man, female=woman) == man
    assert by_sex(None, male=MET, female=MET).result == "met"
