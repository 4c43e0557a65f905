"""Drawing the pages once, reading each with the clock running, and scoring what came out."""

import hashlib
import pickle
import resource
import tempfile
import time
from dataclasses import dataclass
from pathlib import Path

import cv2
import numpy as np
import pypdfium2 as pdfium
from PIL import Image

from digitize.errors import InputError
from digitize.tracing import Panel, Tracing
from tests.benchmark.limit import limit
from tests.benchmark.pages import Case
from tests.benchmark.score import PageScore, score_page
from tests.drawn.composition import PanelTruth
from tests.drawn.files import write_page
from tests.drawn.page import PageTruth, draw_page
from tests.drawn.vector import write_vector_page


@dataclass(frozen=True)
class Result:
    """What became of one page."""

    name: str
    family: str
    source: str
    score: PageScore
    seconds: float  # of processor time, so that other programs do not count
    ratio: float  # to decoding the file and making it grey
    peak_mb: float
    error: str | None  # why there is no tracing
    limit_db: tuple[float, ...] = ()  # what the pen fit alone reaches, panel by panel

    @property
    def median_db(self) -> float:
        """Median over the page's panels."""
        return float(np.median([lead.snr_db for lead in self.score.leads]))


def drawn(case: Case) -> tuple[Path, PageTruth]:
    """Return the file and the truth of a page, drawing it unless it was drawn before."""
    folder = Path(tempfile.gettempdir()) / f"drawn_pages_{_maker_hash()}"
    folder.mkdir(exist_ok=True)
    key = hashlib.sha256(repr((case.source, case.number, case.spec)).encode()).hexdigest()[:12]
    place = folder / key
    path = place / case.name
    kept = place / "truth.pickle"
    if not kept.exists():
        place.mkdir(exist_ok=True)
        if case.family == "vector pdf":
            truth = write_vector_page(case.recording(), case.spec, path)
        else:
            page = draw_page(case.recording(), case.spec)
            write_page(page, path)
            truth = page.truth
        part = kept.with_suffix(".part")
        part.write_bytes(pickle.dumps(truth))
        part.rename(kept)
    return path, pickle.loads(kept.read_bytes())


def read(case: Case, save: Path | None = None, *, with_limit: bool = False) -> Result:
    """Return the result of reading one page; with a picture in the folder `save`."""
    import digitize  # here, so that drawing alone needs no reader

    path, truth = drawn(case)
    tracing, error = None, None
    start = time.process_time()
    try:
        tracing = next(iter(digitize.read_pages(path)))
    except InputError as refused:
        error = str(refused)
    seconds = time.process_time() - start
    peak_mb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    score = score_page(truth, tracing)
    if save is not None:
        _draw_over(path, truth, tracing, save / f"{path.stem}.png")
    ratio = seconds / _decode_seconds(path)
    best: tuple[float, ...] = ()
    if with_limit and case.family != "vector pdf":  # paths have no pen to fit
        best = tuple(lead.snr_db for lead in limit(case.recording(), case.spec))
    return Result(case.name, case.family, case.source, score, seconds, ratio, peak_mb, error, best)


def _maker_hash() -> str:
    """Hash of the page maker's own source: another maker, other pages."""
    sources = sorted((Path(__file__).parents[1] / "drawn").glob("*.py"))
    text = b"".join(s.read_bytes() for s in sources if not s.name.startswith(("test_", "sample")))
    return hashlib.sha256(text).hexdigest()[:10]


def _decode_seconds(path: Path) -> float:
    """Time to decode the file and make it grey once."""
    start = time.process_time()
    cv2.cvtColor(_picture(path), cv2.COLOR_RGB2GRAY)
    return time.process_time() - start


def _picture(path: Path, wide_px: int = 0) -> np.ndarray:
    """RGB pixels of a file; a PDF is rendered `wide_px` wide, or at 300 dpi."""
    if path.suffix != ".pdf":
        with Image.open(path) as image:
            return np.array(image.convert("RGB"))
    with pdfium.PdfDocument(path) as document:
        page = document[0]
        scale = wide_px / page.get_width() if wide_px else 300 / 72
        return np.array(page.render(scale=scale).to_pil().convert("RGB"))


def _draw_over(path: Path, truth: PageTruth, tracing: Tracing | None, out: Path) -> None:
    """Save the page with the truth in red and what was read, placed by the truth, in blue."""
    own_px = truth.page_map.size_px[0]
    zoom = 1 if own_px > 1000 else 3  # points of a vector page are too coarse to look at
    canvas = _picture(path, own_px * zoom)
    for true in truth.panels:
        x_px, y_px = truth.page_map.to_px(true.x_mm, true.y_mm)
        _polyline(canvas, zoom * x_px, zoom * y_px, (220, 0, 0))
    for panel in tracing.panels if tracing is not None else ():
        for true in truth.panels:
            if (true.lead, true.strip) == (panel.lead, panel.strip):
                x_px, y_px = truth.page_map.to_px(*_places(panel, true))
                _polyline(canvas, zoom * x_px, zoom * y_px, (0, 60, 255))
    Image.fromarray(canvas).save(out)


def _places(panel: Panel, true: PanelTruth) -> tuple[np.ndarray, np.ndarray]:
    """Where the pen would have drawn what was read, in mm; the mean level is the truth's."""
    x_mm = true.left_mm + np.arange(len(panel.mv)) / panel.fs_hz * true.speed_mm_s
    read = np.isfinite(panel.mv)
    level_mv = true.mv.mean() - panel.mv[read].mean() if read.any() else 0.0
    return x_mm[read], true.baseline_mm - (panel.mv[read] + level_mv) * true.gain_mm_mv


def _polyline(
    canvas: np.ndarray, x_px: np.ndarray, y_px: np.ndarray, colour: tuple[int, int, int]
) -> None:
    points = np.round(np.stack([x_px, y_px], axis=1) * 8).astype(np.int32)
    cv2.polylines(canvas, [points], False, colour, 1, cv2.LINE_AA, 3)
