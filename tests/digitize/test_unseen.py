"""Paper that is said to be no ECG: unseen, and nothing beside it changed."""

import numpy as np

from digitize.ink import Ink
from digitize.marks import Mark
from digitize.sheet import Box, Raster
from digitize.unseen import hide, hide_around, seen_marks, seen_printing
from digitize.words import Printing, Word

# 4 pixels per mm, the centre of pixel (0, 0) an eighth of a millimetre from the corner
RASTER = Raster(0.125, 0.125, 4.0)
INK = Ink(
    density=np.full((40, 80), 0.5, np.float32),
    hidden=np.zeros((40, 80), bool),
    raster=RASTER,
    noise=0.01,
    ruled_mm=(0.0, 0.0, 20.0, 10.0),
    source_px_per_mm=(4.0, 4.0),
)


def test_a_region_is_unseen_and_the_rest_is_as_it_was():
    masked = hide(INK, Box(5.0, 2.0, 10.0, 4.0))
    # 5 x 2 mm at 4 pixels per mm
    assert masked.hidden.sum() == 20 * 8
    assert masked.hidden[8:16, 20:40].all()
    assert (masked.density[masked.hidden] == 0).all()
    assert (masked.density[~masked.hidden] == 0.5).all()
    assert not INK.hidden.any()


def test_a_region_beyond_the_paper_hides_what_there_is():
    assert hide(INK, Box(-50.0, -50.0, 1.0, 50.0)).hidden.sum() == 4 * 40
    assert not hide(INK, Box(30.0, 0.0, 40.0, 10.0)).hidden.any()


def test_a_crop_leaves_its_inside_alone():
    cropped = hide_around(INK, Box(5.0, 2.0, 10.0, 40.0))
    assert (~cropped.hidden).sum() == 20 * 32
    assert cropped.ruled_mm == (5.0, 2.0, 10.0, 10.0)


def test_printing_on_unseen_paper_is_not_read():
    inside, outside = Box(6.0, 2.5, 7.0, 3.5), Box(15.0, 2.5, 16.0, 3.5)
    words = tuple(Word(box, "V1", 0.9, {}) for box in (inside, outside))
    printing = Printing(words, words, (inside, outside))
    seen = seen_printing(printing, hide(INK, Box(5.0, 2.0, 10.0, 4.0)))
    assert seen == Printing(words[1:], words[1:], (outside,))


def test_marks_on_hidden_paper_are_no_longer_seen():
    left, right = Mark(1.0, 3.0, 2.0, 6.0), Mark(15.0, 17.0, 2.0, 6.0)
    assert seen_marks((left, right), hide_around(INK, Box(0.0, 0.0, 10.0, 10.0))) == (left,)
