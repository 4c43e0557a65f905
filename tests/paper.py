"""Recordings drawn on a 3x4+1 page, scanned, faxed or photographed, and read back.

Drawing and reading take some ten seconds a page, measuring a fraction of one: the tracings are
kept in a folder of the system's temporary ones under the names of recording and page. They belong
to the reader that made them: its sources are part of the folder's name.
"""

import hashlib
import pickle
import tempfile
from dataclasses import replace
from pathlib import Path

import numpy as np

from digitize.errors import InputError
from digitize.options import Options
from digitize.pages import Page
from digitize.read import read_page
from digitize.tracing import PageSource, Tracing
from tests.drawn.heart import Recording
from tests.drawn.page import draw_page
from tests.drawn.spec import CaptureSpec, PageSpec, PaperSpec, PenSpec
from tests.drawn.variety import GRID_COLOURS, PAPER_COLOURS, vary_fax, vary_photo

WAYS = ("scan", "fax", "photo")


def page_spec(way: str, seed: int) -> PageSpec:
    """A 3x4+1 page of 10 s on A4; paper, grid, pen and how it lay differ by seed.

    "scan" is a flat-bed scan in colour at 300 dpi, "fax" a fine one (204 x 196 lines per inch,
    black and white, at its most usual settings), "photo" a hand-held photograph.
    """
    rng = np.random.default_rng([seed, 11])
    paper = PaperSpec(
        colour=PAPER_COLOURS[rng.integers(len(PAPER_COLOURS))],
        grid_colour=GRID_COLOURS[rng.integers(len(GRID_COLOURS))],
        fine_amount=float(rng.uniform(0.4, 0.8)),
    )
    scan = CaptureSpec(
        tilt_deg=float(rng.uniform(-1.5, 1.5)),
        blur_mm=float(rng.uniform(0.03, 0.07)),
        noise=float(rng.uniform(0.5, 3.0)),
    )
    capture = {
        "scan": scan,
        "fax": replace(vary_fax(seed, 196.0), turn_deg=0, dpi_tag="right"),
        "photo": replace(vary_photo(seed), turn_deg=0),
    }[way]
    pen = PenSpec(width_mm=float(rng.uniform(0.25, 0.4)))
    return PageSpec(paper=paper, pen=pen, capture=capture, seed=seed)


def read_back(recording: Recording, spec: PageSpec) -> Tracing | None:
    """The recording as read from its page, None where the page was refused."""
    key = hashlib.sha256(recording.mv.tobytes() + repr(spec).encode()).hexdigest()[:12]
    kept = folder() / f"{recording.name.replace(' ', '_')}_{key}.pickle"
    if not kept.exists():
        part = kept.with_suffix(".part")
        part.write_bytes(pickle.dumps(_read(recording, spec)))
        part.rename(kept)
    tracing: Tracing | None = pickle.loads(kept.read_bytes())
    return tracing


def _read(recording: Recording, spec: PageSpec) -> Tracing | None:
    drawn = draw_page(recording, spec)
    pixels = drawn.pixels
    dpi = spec.capture.dpi if spec.capture.photo is None else None
    source = PageSource(recording.name, "0" * 64, 1, pixels.shape[1], pixels.shape[0], dpi)
    try:
        return read_page(Page(pixels, source, bilevel=drawn.bilevel), Options()).tracing
    except InputError:
        return None


def folder() -> Path:
    """Where tracings are kept: another reader or another page maker, another folder."""
    root = Path(__file__).parents[1]
    sources = sorted((root / "digitize").glob("*.py")) + sorted((root / "tests/drawn").glob("*.py"))
    made_by = hashlib.sha256(b"".join(source.read_bytes() for source in sources)).hexdigest()[:10]
    place = Path(tempfile.gettempdir()) / f"read_back_{made_by}"
    place.mkdir(exist_ok=True)
    return place
