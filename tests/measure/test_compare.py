"""Old against new: what is new, what is wider beyond the joint error, what cannot be compared."""

import json
from importlib import resources

import jsonschema
import pytest

from measure.compare import compare, comparison_json, headline, side, verdict_text
from measure.quantity import Quantity, missing
from measure.reading_files import document
from measure.report import comparison_page
from tests.measure import made
from tests.measure.made import ms
from tests.measure.test_report import Page


def of(leads=None, name="page", date=None, sha="a", **changes):
    content = document(made.reading(leads, **changes))
    content["source"] = {**content["source"], "sha256": sha * 64}
    return side(content, name, date)


def old_and_new(**changes):
    old = of(made.normal_leads(), "old", sha="a", qrs_ms=ms(92, 4))
    return old, of(made.lbbb_leads(), "new", sha="b", **{"qrs_ms": ms(150, 4), **changes})


def change(comparison, key):
    (one,) = [c for c in comparison.changes if c.key == key]
    return one


def test_new_block_is_found_and_said():
    comparison = compare(old_and_new())
    verdicts = {b.key: b.verdict for b in comparison.blocks}
    assert verdicts["lbbb_european_2013"] == "new"
    assert verdicts["rbbb_complete"] == "in neither"
    assert headline(comparison)[0] == "QRS is wider: 92 ± 4 ms before, 150 ± 4 ms now."
    assert headline(comparison)[1].startswith("Criteria met now and not before: left bundle")


def test_block_gone_there_and_open():
    old, new = old_and_new()
    assert {b.verdict for b in compare([new, old]).blocks if b.key == "lbbb_aha"} == {"gone"}
    assert {b.verdict for b in compare([new, new]).blocks if b.key == "lbbb_aha"} == {
        "there in both"
    }
    unsure = of(made.lbbb_leads(), qrs_ms=ms(121, 4))
    assert {b.verdict for b in compare([old, unsure]).blocks if b.key == "lbbb_aha"} == {"open"}


@pytest.mark.parametrize(
    ("qrs_ms", "verdict"),
    # joint standard error of 3 and 4 ms is 5 ms; a change counts beyond twice that
    [(110, "no sure change"), (111, "larger"), (89, "smaller"), (90, "no sure change")],
)
def test_qrs_change_beyond_twice_the_joint_error(qrs_ms, verdict):
    old = of(qrs_ms=ms(100, 3))
    found = change(compare([old, of(qrs_ms=ms(qrs_ms, 4))]), "qrs_ms")
    assert found.verdict == verdict
    assert found.difference.value == qrs_ms - 100
    assert found.difference.se == pytest.approx(5.0)


@pytest.mark.parametrize(
    ("before", "after", "shift"), [(-170.0, 170.0, -20.0), (10.0, -50.0, -60.0), (100, -100, 160)]
)
def test_axis_shift_goes_the_short_way_round(before, after, shift):
    sides = [of(qrs_axis_deg=Quantity(float(a), 2.0, "deg")) for a in (before, after)]
    found = change(compare(sides), "qrs_axis_deg")
    assert found.difference.value == pytest.approx(shift)
    assert verdict_text(found) == f"turned to the {'right' if shift > 0 else 'left'}"


def test_missing_value_is_not_comparable_and_says_where():
    old, new = of(name="old", pr_ms=missing("ms", "no P wave found")), of(name="new")
    found = change(compare([old, new]), "pr_ms")
    assert found.verdict == "not comparable"
    assert found.difference.reason == "old: no P wave found"


def test_beats_are_compared_within_the_qrs():
    old, new = old_and_new()
    same = compare([new, new]).beat_change_mv
    assert max(same.values()) == 0.0
    changed = compare([old, new]).beat_change_mv
    # at 90 ms the old S of V1 is over, the new one still 1.0 mV deep
    assert changed["V1"] == pytest.approx(1.0, abs=0.01)


def test_same_page_twice_is_noticed():
    assert any("same page" in c for c in compare([of(), of()]).cautions)
    assert not any("same page" in c for c in compare(old_and_new()).cautions)


def test_one_reading_is_no_comparison():
    with pytest.raises(ValueError, match="two readings"):
        compare([of()])


def test_json_follows_its_schema_and_is_deterministic():
    schema = json.loads(
        resources.files("measure").joinpath("schema/compare.schema.json").read_text()
    )
    jsonschema.Draft202012Validator.check_schema(schema)
    for sides in (old_and_new(), [of(date="2021-02-03"), of(), of(date="2024-05-06")]):
        content = comparison_json(compare(sides))
        jsonschema.Draft202012Validator(schema).validate(json.loads(content))
        assert content == comparison_json(compare(sides))


def test_page_shows_both_and_the_beats():
    page = Page(comparison_page(compare(old_and_new())))
    assert page.loads == []
    assert page.text.startswith("ECGs compared: old and new")
    assert "QRS 92 ± 4 ms 150 ± 4 ms +58 ± 6 ms larger" in page.text
    assert page.tags.count("polyline") == 24
    assert "no diagnosis" in page.text


def test_three_readings_give_a_course_over_their_dates():
    sides = [
        of(name=f"page{k}", date=date, qrs_ms=ms(qrs_ms, 4))
        for k, (date, qrs_ms) in enumerate(
            [("2020-01-01", 100), ("2021-01-01", 110), ("2030-01-01", 150)]
        )
    ]
    page = comparison_page(compare(sides))
    assert "Course over all readings" in page
    course = page[page.index("QRS over the readings") :]
    points = course[course.index('points="') + 8 :].split('"')[0].split()
    x = [float(point.split(",")[0]) for point in points]
    # the second reading follows after one year of ten
    assert (x[1] - x[0]) / (x[2] - x[0]) == pytest.approx(366 / 3653, abs=0.001)
