"""The printing outside the traces: kept where it is asked for, sorted into fields by patterns."""

import dataclasses
from types import SimpleNamespace

import pytest

from digitize.archive.header import header_fields, header_text, read_patterns
from digitize.errors import UnreadableFile
from digitize.sheet import Box
from digitize.words import Printing, Word
from tests.digitize.made_tracing import tracing

LINES = (
    ("Recorded 2024-03-01 at Marram Head Infirmary", Box(90, 5, 180, 9)),
    ("Name: Invented Patient", Box(20, 5, 80, 9)),
    ("25mm/s 10mm/mV", Box(20, 200, 90, 204)),
    ("aVR V1", Box(20, 205, 60, 209)),
    ("seen by A. Nobody", Box(100, 45, 120, 48)),
)


@pytest.fixture
def stages(monkeypatch):
    """What `header_text` asks of a page that was read: its printing and where its panels lie."""
    lines = tuple(Word(box, text, 0.95, {}) for text, box in LINES)
    monkeypatch.setattr(
        "digitize.archive.header.read_printing", lambda ink: Printing((), lines, ())
    )
    page = SimpleNamespace(drawing=None)
    return SimpleNamespace(page=page, grid=None, ink=None, tracing=tracing())


def test_header_is_what_is_printed_outside_the_traces_in_the_order_of_reading(stages):
    assert header_text(stages) == (
        "Name: Invented Patient\nRecorded 2024-03-01 at Marram Head Infirmary"
    )


def test_fields_are_what_the_patterns_say_and_nothing_else(stages):
    text = header_text(stages)
    assert header_fields(text, ()) == {}
    patterns = (r"Name: (?P<name>.+)", r"Recorded (?P<date>\d{4}-\d\d-\d\d)", r"ID (?P<id>\d+)")
    assert header_fields(text, patterns) == {"name": "Invented Patient", "date": "2024-03-01"}


def test_a_field_with_two_values_is_left_out():
    text = "ID 17\nID 18\nWard 3\nWard 3"
    assert header_fields(text, (r"ID (?P<id>\d+)", r"Ward (?P<ward>\d)")) == {"ward": "3"}


def test_patterns_of_a_file(tmp_path):
    path = tmp_path / "fields.txt"
    path.write_text("# of our printouts\n\nName: (?P<name>.+)\n")
    assert read_patterns(path) == ("Name: (?P<name>.+)",)


@pytest.mark.parametrize(
    ("content", "said"),
    [
        (b"Name: (?P<name>", "line 1 is no regular expression"),
        (b"\nName: (.+)", r"line 2 names no field"),
        (b"\xff\xfe\x00", "it is no text"),
    ],
)
def test_what_is_no_file_of_patterns(tmp_path, content, said):
    path = tmp_path / "fields.txt"
    path.write_bytes(content)
    with pytest.raises(UnreadableFile, match=f"fields.txt: .*{said}"):
        read_patterns(path)
    with pytest.raises(UnreadableFile, match="cannot be read"):
        read_patterns(tmp_path / "none.txt")


def test_a_mistake_of_the_program_is_told_as_one(monkeypatch):
    from digitize.archive import reading
    from digitize.errors import ProgramFault
    from digitize.options import Options

    def fail(page, options):
        raise IndexError("Invented Patient")

    monkeypatch.setattr(reading, "read_page", fail)
    with pytest.raises(ProgramFault, match="the program failed on this page") as told:
        reading.read_for_store(None, Options())
    assert "Invented" not in str(told.value)


def test_row_of_a_page_has_no_header_unless_it_is_asked_for(stages, monkeypatch):
    from digitize.archive import reading
    from digitize.options import Options

    monkeypatch.setattr(reading, "read_page", lambda page, options: stages)
    monkeypatch.setattr(reading, "cover", lambda stages: None)
    monkeypatch.setattr(reading, "draw_overlay", lambda page, tracing: b"")
    monkeypatch.setattr(reading, "_thumbnail", lambda overlay: b"")
    row, files = reading.read_for_store(None, Options())
    assert (row.header, row.header_fields) == (None, None)
    assert "Invented" not in str(dataclasses.asdict(row))
    row, kept = reading.read_for_store(None, Options(), header=(r"Name: (?P<name>\w+)",))
    assert row.header.startswith("Name: Invented Patient")
    assert row.header_fields == '{"name": "Invented"}'
    assert kept == files  # in the row alone: no file of the page holds it
