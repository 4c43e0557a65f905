"""The scale of a page from two places whose distance is known."""

import pytest

from digitize.errors import NoGrid
from digitize.two_places import scale_from


def test_two_places_are_a_scale_in_both_directions():
    # a fine fax has 8.04 pels and 7.7 lines per mm (ITU-T T.4, from memory)
    dpi = (204.2, 195.6)
    for points in ([(0, 0), (804, 0)], [(0, 0), (0, 770)]):
        assert scale_from(points, 100.0, dpi) == pytest.approx((8.04, 7.70), rel=1e-3)
    assert scale_from([(0, 0), (30, 40)], 10.0, None) == (5.0, 5.0)


@pytest.mark.parametrize("mm", [0.0, -5.0, float("nan"), 1e9])
def test_a_distance_that_is_none_is_refused(mm):
    with pytest.raises(NoGrid, match="distance in millimetres"):
        scale_from([(0, 0), (100, 0)], mm, None)
    with pytest.raises(NoGrid, match="too close"):
        scale_from([(0, 0), (5, 5)], 10.0, None)
