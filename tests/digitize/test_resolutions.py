"""Scales by size and tag: a table of pages that people have."""

import pytest

from digitize.resolutions import Resolution, possible_resolutions, same_scale


def best(*args: object, bilevel: bool = True) -> Resolution:
    return possible_resolutions(*args, bilevel=bilevel)[0]  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("size_px", "dpi", "bilevel", "scale"),
    [
        # ITU-T T.4 (from memory): 8.04 pels and 3.85 or 7.7 lines per mm; A4 is 210 x 297 mm.
        ((1688, 1143), None, True, (8.04, 3.85)),
        ((1688, 2287), None, True, (8.04, 7.7)),
        ((2388, 808), None, True, (8.04, 3.85)),  # fed sideways
        ((1143, 1688), None, True, (3.85, 8.04)),  # turned afterwards
        ((1736, 2151), (204.0, 196.0), True, (8.04, 7.7)),  # Letter
        ((2480, 3508), None, False, (11.81, 11.81)),  # A4 at 300 dpi
        ((1700, 2200), (200.0, 200.0), False, (7.874, 7.874)),  # Letter at 200 dpi
    ],
)
def test_whole_sheets_are_recognised(size_px, dpi, bilevel, scale) -> None:
    found = best(*size_px, dpi, bilevel=bilevel)
    assert found.sheet
    assert (found.across, found.down) == pytest.approx(scale, rel=3e-3)
    assert found.tagged == (dpi is not None)


def test_the_sides_of_a_sheet_measure_its_scale() -> None:
    # ISO 216: A4 is 297 x 210 mm. A tag of 204 x 196 dpi is 0.2 % off the 7.7 lines of T.4.
    found = best(2385, 1620, (204.0, 196.0))
    assert (found.across, found.down) == pytest.approx((2385 / 297, 1620 / 210), rel=1e-9)
    assert found.tagged


def test_a_fax_line_of_1728_pels_gives_the_scale_across() -> None:
    found = possible_resolutions(1728, 1010, None, bilevel=True)
    assert all(one.fax_line and one.across == pytest.approx(8.04, rel=1e-3) for one in found)
    assert {one.down for one in found} == {3.85, 7.7, 15.4}  # how long it is, its lines do not say
    assert not possible_resolutions(1728, 1010, None, bilevel=False)


def test_a_tag_that_makes_the_page_a_poster_is_not_heard() -> None:
    # A fax of 2388 pels that says 72 dpi would be 842 mm wide.
    found = possible_resolutions(2388, 808, (72.0, 72.0), bilevel=True)
    assert [one.tagged for one in found] == [False]


def test_a_wrong_tag_stands_beside_the_sheet() -> None:
    found = possible_resolutions(1688, 2287, (300.0, 300.0), bilevel=True)
    assert [(one.sheet, one.tagged) for one in found] == [(True, False), (False, True)]
    assert not same_scale(*found)


def test_a_cut_page_without_a_tag_says_nothing() -> None:
    assert possible_resolutions(1234, 567, None, bilevel=True) == ()
