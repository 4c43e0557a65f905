"""The command: files out, one line per failure, exit codes, and nothing lost.

The stages are stood in for by a tracing made by hand, so that these tests are about files and
words; pages are opened as they are in use.
"""

import json
import resource
import subprocess
import sys
from dataclasses import replace

import numpy as np
import pytest
from PIL import Image
from typer.testing import CliRunner

import digitize
from digitize import CAUTION
from digitize.checks import find_checks
from digitize.cli import app
from digitize.errors import NoGrid
from digitize.explain import PICTURES
from digitize.geometry import to_geometry
from digitize.read import Stages
from digitize.tracing import Known
from digitize.tracing_files import read_tracing
from tests.digitize import made_files as made
from tests.digitize.made_tracing import grid, layout_of, tracing

RESULTS = ["chart.csv", "chart.json", "chart.overlay.png"]


def stand_in(page, options, *, on_stage=lambda name: None):
    """Stages without work; a page that is black in its first pixel has no grid."""
    on_stage("grid")
    if page.pixels.flat[0] == 0:
        raise NoGrid("no grid was found: give --px-per-mm")
    known = Known(options.speed_mm_s, "given") if options.speed_mm_s else Known(25.0, "assumed")
    read = tracing(speed_mm_s=known, source=page.source)
    layout, strokes = layout_of(read)
    read = replace(read, geometry=to_geometry(grid(), layout, strokes), checks=find_checks(read))
    on_stage("")
    return Stages(page, grid(), None, None, None, layout, strokes, read)


@pytest.fixture
def stages(monkeypatch):
    monkeypatch.setattr("digitize.read.read_page", stand_in)


@pytest.fixture
def chart(tmp_path, stages):
    return save(tmp_path / "chart.png", 255)


def save(path, level):
    Image.fromarray(np.full((160, 232), level, np.uint8)).save(path)
    return path


def run(*words):
    return CliRunner().invoke(app, ["page", *map(str, words)])


def names(folder):
    return sorted(path.name for path in folder.iterdir())


# ---- what comes out --------------------------------------------------------------------------


def test_results_stand_beside_the_file(chart):
    result = run(chart)
    assert result.exit_code == 0
    assert names(chart.parent) == sorted(["chart.png", *RESULTS])
    assert "12 leads, layout 3x4+1 (found), 25 mm/s (assumed)" in result.stdout
    assert "look: The paper speed could not be found" in result.stdout
    assert result.stdout.rstrip().endswith(CAUTION)
    assert result.stderr == ""
    assert read_tracing(chart.with_suffix(".csv")).source.file_name == "chart.png"


def test_results_go_to_the_folder_asked_for(chart, tmp_path):
    assert run(chart, "-o", tmp_path / "out").exit_code == 0
    assert names(tmp_path / "out") == RESULTS
    assert names(tmp_path) == ["chart.png", "out"]


def test_same_file_same_bytes(chart, tmp_path):
    for folder in ("a", "b"):
        run(chart, "-o", tmp_path / folder)
    for name in RESULTS:
        assert (tmp_path / "a" / name).read_bytes() == (tmp_path / "b" / name).read_bytes()


def test_what_was_given_is_in_the_json(chart):
    run(chart, "--speed", "50", "--leads", "I, II", "--px-per-mm", "8.04,3.85", "--turn", "90")
    document = json.loads(chart.with_suffix(".json").read_text())
    assert document["speed_mm_s"] == {"value": 50.0, "source": "given", "se": None}
    assert document["source"]["file_name"] == "chart.png"


def test_pages_of_one_file_get_names_of_their_own(tmp_path, stages):
    path = tmp_path / "chart.tiff"
    pages = [Image.new("L", (232, 160), level) for level in (200, 0, 220)]
    pages[0].save(path, save_all=True, append_images=pages[1:])
    result = run(path)
    assert result.exit_code == 1
    assert result.stderr == "chart.tiff, page 2: no grid was found: give --px-per-mm\n"
    assert [name for name in names(tmp_path) if name.endswith("csv")] == [
        "chart.csv",
        "chart.p3.csv",
    ]


def test_pictures_of_the_stages_are_written_only_when_asked_for(chart, monkeypatch):
    monkeypatch.setattr("digitize.run.draw_stage", lambda stages, name: name.encode())
    assert run(chart, "--explain").exit_code == 0
    pictures = [chart.with_name(f"chart.explain-{name}.png") for name in PICTURES]
    assert names(chart.parent) == sorted(["chart.png", *RESULTS, *(p.name for p in pictures)])
    assert pictures[0].read_bytes() == b"1-grid"
    # Results are not taken for scans, and not written over.
    assert "chart.explain-1-grid.png: left out" in run(pictures[0]).stderr
    for name in RESULTS:
        (chart.parent / name).unlink()
    again = run(chart, "--explain")
    assert again.exit_code == 1
    assert "is there already" in again.stderr
    assert not any((chart.parent / name).exists() for name in RESULTS)


def test_timings_go_to_stderr(chart):
    result = run(chart, "--timings")
    assert result.stderr.startswith("chart, seconds: page 0.")
    assert "grid 0." in result.stderr
    assert "files " in result.stderr
    assert "seconds" not in result.stdout


# ---- nothing is lost -------------------------------------------------------------------------


def test_earlier_results_are_kept_unless_asked(chart):
    old = chart.with_suffix(".csv")
    old.write_text("mine")
    result = run(chart)
    assert result.exit_code == 1
    assert "chart.png, page 1: " in result.stderr
    assert "--replace" in result.stderr
    assert old.read_text() == "mine"
    assert names(chart.parent) == ["chart.csv", "chart.png"]
    assert run(chart, "--replace").exit_code == 0
    assert old.read_text().startswith("time_s,")


def test_two_files_of_one_name_do_not_overwrite_each_other(tmp_path, stages):
    paths = [save(tmp_path / f"chart.{kind}", 255) for kind in ("png", "tiff")]
    result = run(*paths, "--replace")
    assert result.exit_code == 1
    assert "chart.tiff, page 1: another file of the same name" in result.stderr
    document = json.loads((tmp_path / "chart.json").read_text())
    assert document["source"]["file_name"] == "chart.png"


def test_overlays_are_no_scans(chart):
    run(chart)
    result = run(*sorted(chart.parent.glob("*.png")), "--replace")
    assert result.exit_code == 0
    assert "chart.overlay.png: left out" in result.stderr
    assert names(chart.parent) == sorted(["chart.png", *RESULTS])


# ---- bad input -------------------------------------------------------------------------------

BAD = [
    ("empty.png", b"", "the file is empty"),
    ("words.png", b"no picture\n" * 99, "no picture or document"),
    ("cut.pdf", made.empty_pdf()[:50], "the PDF is damaged"),
    ("none.pdf", made.empty_pdf(), "has no page"),
    ("locked.pdf", made.locked_pdf(), "locked with a password"),
    ("bomb.png", made.bomb_png(12_000, 12_000), "--max-megapixels"),
]


@pytest.mark.parametrize(("name", "content", "said"), BAD, ids=[name for name, _, _ in BAD])
def test_bad_file_is_one_line_and_the_others_are_read(chart, name, content, said):
    bad = made.write(chart.parent / name, content)
    result = run(bad, chart)
    assert result.exit_code == 1
    assert result.stderr.count("\n") == 1
    assert result.stderr.startswith(f"{name}")
    assert said in result.stderr
    assert names(chart.parent) == sorted([name, "chart.png", *RESULTS])


def test_missing_file_and_folder_are_one_line_each(chart):
    result = run(chart.parent / "nothing.png", chart.parent, chart)
    assert result.exit_code == 1
    assert result.stderr.splitlines() == [
        "nothing.png: there is no such file: check the name",
        f"{chart.parent.name}: this is a folder: give the files in it",
    ]
    assert chart.with_suffix(".csv").exists()


def test_output_that_cannot_be_written(chart, tmp_path):
    (tmp_path / "out").write_bytes(b"")
    result = run(chart, "-o", tmp_path / "out")
    assert result.exit_code == 1
    assert "cannot write to" in result.stderr
    assert names(tmp_path) == ["chart.png", "out"]


# ---- wrong usage -----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (["--speed", "0"], "paper speed of 0"),
        (["--speed", "nan"], "paper speed"),
        (["--gain", "-5"], "gain of -5"),
        (["--layout", "three"], "3x4+1"),
        (["--turn", "45"], "0, 90, 180 or 270"),
        (["--timing", "later"], "consecutive or simultaneous"),
        (["--px-per-mm", "8,9,10"], "8.04,3.85"),
        (["--px-per-mm", "many"], "8.04,3.85"),
        (["--px-per-mm", "0"], "0.5 to 100"),
        (["--leads", "I,,II"], "lead name"),
        (["--max-megapixels", "0"], "above 0"),
        (["--unknown"], "--unknown"),
    ],
)
def test_wrong_values_are_usage_errors(chart, words, said):
    result = run(chart, *words)
    assert result.exit_code == 2
    assert said in result.stderr
    assert names(chart.parent) == ["chart.png"]


def test_no_file_is_a_usage_error():
    assert run().exit_code == 2


# ---- start -----------------------------------------------------------------------------------

LIGHT = """
import sys
import digitize, digitize.tracing, digitize.cli
heavy = {"cv2", "PIL", "scipy", "skimage", "numba", "onnxruntime", "rapidocr", "pypdfium2"}
print(sorted(heavy & set(sys.modules)))
"""


def test_the_start_is_light():
    done = subprocess.run([sys.executable, "-c", LIGHT], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_version_comes_quickly():
    words = [sys.executable, "-c", "from digitize.cli import main; main()", "--version"]
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    done = subprocess.run(words, capture_output=True, text=True, check=True)
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    assert done.stdout == f"digitize {digitize.program_version()}\n"
    # processor time: what a person waits on an idle machine, whatever else runs here
    assert after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime < 0.7


def test_help_carries_the_caution():
    result = CliRunner().invoke(app, ["--help"])
    assert "no diagnosis" in " ".join(result.stdout.split())
