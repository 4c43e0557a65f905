"""Einthoven's and Goldberger's relations find the mistakes that break them, and only those."""

import numpy as np
import pytest

from digitize.relations import LIMB, check_relations, leftover
from tests.digitize.made_tracing import leads_at, panel, tracing

TIME_S = np.arange(1250) / 500
TRUE = leads_at(TIME_S)


def page(names=("I", "II", "III"), sigma_mv=0.005, **changed):
    """A page whose limb leads start together; `changed` replaces the samples of some."""
    return tracing(
        tuple(panel(name, changed.get(name, TRUE[name]), sigma_mv=sigma_mv) for name in names)
    )


def only(made):
    (check,) = check_relations(made)
    return check


def test_the_table_of_leads_is_einthoven_and_goldberger():
    # Einthoven: II = I + III; Goldberger: aVR = -(I + II)/2, aVL = (I - III)/2, aVF = (II + III)/2.
    one, two, three, avr, avl, avf = (np.array(LIMB[n]) for n in LIMB)
    np.testing.assert_allclose(two, one + three)
    np.testing.assert_allclose(avr, -(one + two) / 2)
    np.testing.assert_allclose(avl, (one - three) / 2)
    np.testing.assert_allclose(avf, (two + three) / 2)
    np.testing.assert_allclose(avr + avl + avf, 0)


def test_leads_that_agree_leave_nothing_over():
    mv = np.array([TRUE[name] for name in LIMB])
    assert leftover(tuple(LIMB), mv) == pytest.approx(0, abs=1e-12)
    assert leftover(tuple(LIMB), mv + np.arange(6)[:, None]) == pytest.approx(0, abs=1e-12)


def test_unrelated_leads_leave_everything_over():
    noise = np.random.default_rng(3).normal(size=(3, 20_000))
    assert leftover(("I", "II", "III"), noise) == pytest.approx(1, abs=0.02)


@pytest.mark.parametrize("names", [("I", "II", "III"), ("aVR", "aVL", "aVF"), tuple(LIMB)])
def test_true_leads_pass(names):
    check = only(page(names))
    assert check.passed
    assert check.leads == names


@pytest.mark.parametrize(
    ("changed", "said"),
    [
        ({"III": -TRUE["III"]}, "lead III were upside down"),
        ({"I": -TRUE["I"]}, "lead I were upside down"),
        ({"I": 2 * TRUE["I"]}, "lead I were at twice the gain"),
        ({"III": TRUE["III"] / 2}, "lead III were at half the gain"),
        ({"I": TRUE["II"], "II": TRUE["I"]}, "I and II were exchanged"),
    ],
)
def test_a_single_mistake_is_explained(changed, said):
    check = only(page(**changed))
    assert check.passed is False
    assert said in check.message


def test_the_odd_one_out_of_six_is_named():
    check = only(page(tuple(LIMB), aVL=TRUE["V2"]))
    assert check.passed is False
    assert "lead aVL were another" in check.message


def test_what_nothing_explains_is_said():
    check = only(page(III=TRUE["V5"][::-1]))
    assert check.passed is False
    assert "No single lead" in check.message


def test_exchanging_i_and_iii_keeps_the_relation_and_cannot_be_seen():
    # II = I + III is the same with I and III exchanged: the check must not claim to know.
    assert only(page(I=TRUE["III"], III=TRUE["I"])).passed


def test_reading_errors_are_no_contradiction():
    rng = np.random.default_rng(5)
    noisy = {name: TRUE[name] + rng.normal(0, 0.05, 1250) for name in ("I", "II", "III")}
    assert only(page(sigma_mv=0.05, **noisy)).passed
    assert only(page(sigma_mv=0.005, **noisy)).passed is False


def test_leads_smaller_than_their_errors_are_not_judged():
    assert only(page(sigma_mv=0.5)).passed is None


def test_gaps_are_left_out():
    gap = TRUE["I"].copy()
    gap[100:200] = np.nan
    assert only(page(I=gap)).passed


def test_a_strip_joins_the_column_that_it_runs_under():
    made = tracing()
    groups = [set(check.leads) for check in check_relations(made)]
    assert groups == [{"I", "II", "III"}, {"aVR", "aVL", "aVF", "II"}]
    assert all(check.passed for check in check_relations(made))


def test_without_three_leads_at_one_moment_nothing_is_claimed():
    assert only(page(("I", "II"))).passed is None
    assert only(tracing(())).passed is None
