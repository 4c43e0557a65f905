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
from PIL import Image

from digitize.errors import InputError
from digitize.tracing import Tracing
from tests.benchmark.pages import Case
from tests.benchmark.score import PageScore, score_page
from tests.drawn.files import write_page
from tests.drawn.page import PageTruth, draw_page


@dataclass(frozen=True)
class Result:
    """What became of one page."""

    name: str
    family: str
    source: str
    score: PageScore
    seconds: float
    ratio: float  # to decoding the file and making it grey
    peak_mb: float
    error: str | None  # why there is no tracing

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
        page = draw_page(case.recording(), case.spec)
        write_page(page, path)
        part = kept.with_suffix(".part")
        part.write_bytes(pickle.dumps(page.truth))
        part.rename(kept)
    return path, pickle.loads(kept.read_bytes())


def read(case: Case, save: Path | None = None) -> Result:
    """Return the result of reading one page."""
    import digitize  # here, so that drawing alone needs no reader

    path, truth = drawn(case)
    tracing, error = None, None
    start = time.perf_counter()
    try:
        tracing = next(iter(digitize.read_pages(path)))
    except InputError as refused:
        error = str(refused)
    seconds = time.perf_counter() - start
    peak_mb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    score = score_page(truth, tracing)
    if save is not None:
        _draw_over(path, truth, tracing, save / f"{path.stem}.png")
    ratio = seconds / _decode_seconds(path)
    return Result(case.name, case.family, case.source, score, seconds, ratio, peak_mb, error)


def _maker_hash() -> str:
    """Hash of the page maker's own source: another maker, other pages."""
    sources = sorted((Path(__file__).parents[1] / "drawn").glob("*.py"))
    text = b"".join(s.read_bytes() for s in sources if not s.name.startswith(("test_", "sample")))
    return hashlib.sha256(text).hexdigest()[:10]


def _decode_seconds(path: Path) -> float:
    """Time to decode the file and make it grey once."""
    start = time.perf_counter()
    with Image.open(path) as image:
        pixels = np.asarray(image.convert("RGB"))
    cv2.cvtColor(pixels, cv2.COLOR_RGB2GRAY)
    return time.perf_counter() - start


def _draw_over(path: Path, truth: PageTruth, tracing: Tracing | None, out: Path) -> None:
    """Save the page with the truth in red and what was read, placed by the truth, in blue."""
    with Image.open(path) as image:
        canvas = np.array(image.convert("RGB"))
    for true in truth.panels:
        _polyline(canvas, truth, true.x_mm, true.y_mm, (220, 0, 0))
    for panel in tracing.panels if tracing is not None else ():
        fitting = [t for t in truth.panels if t.lead == panel.lead and t.strip == panel.strip]
        if fitting:
            t = fitting[0]
            x_mm = t.left_mm + np.arange(len(panel.mv)) / panel.fs_hz * t.speed_mm_s
            centred = panel.mv - np.nanmean(panel.mv) + t.mv.mean() if panel.mv.size else panel.mv
            _polyline(canvas, truth, x_mm, t.baseline_mm - centred * t.gain_mm_mv, (0, 60, 255))
    Image.fromarray(canvas).save(out)


def _polyline(
    canvas: np.ndarray,
    truth: PageTruth,
    x_mm: np.ndarray,
    y_mm: np.ndarray,
    colour: tuple[int, int, int],
) -> None:
    seen = np.isfinite(y_mm)
    x_px, y_px = truth.page_map.to_px(x_mm[seen], y_mm[seen])
    points = np.round(np.stack([x_px, y_px], axis=1) * 8).astype(np.int32)
    cv2.polylines(canvas, [points], False, colour, 1, cv2.LINE_AA, 3)
