"""What is read before pages are forked goes through every stage, else it would load too little."""

from digitize.archive.reading import read_for_store
from digitize.archive.warm import GIVEN, invented_page


def test_the_invented_page_is_read_to_the_end():
    row, files = read_for_store(invented_page(), GIVEN)
    assert (row.leads, row.read_share > 0.9) == (1, True)
    assert {".overlay.png", ".csv", ".json"} <= files.keys()
