"""A page as a PDF whose traces are paths, as a program prints it that never had pixels.

Written by hand from the PDF standard (ISO 32000-1, clauses 7.5, 8.4-8.5 and 9.4): one page, one
content stream, the fonts that every reader has. Programs differ in how they draw the same line:
one path per lead, one path per beat-long piece, or one path per sample; with or without a scaling
matrix; with or without compression.
"""

import zlib
from pathlib import Path

import numpy as np

from tests.drawn.capture import MM_PER_INCH, CaptureMap
from tests.drawn.composition import Composition, Stroke, compose
from tests.drawn.heart import Recording
from tests.drawn.page import PageTruth, truth_of
from tests.drawn.spec import Colour, PageSpec

PT_PER_MM = 72 / MM_PER_INCH
_FONTS = {"sans": "Helvetica", "serif": "Times-Roman", "mono": "Courier"}


def write_vector_page(recording: Recording, spec: PageSpec, path: Path) -> PageTruth:
    """Write the page as a vector PDF and return its truth, the map in points from the top left.

    What capture and wear say of the page is left out: nothing was captured.
    """
    composition = compose(recording, spec)
    rng = np.random.default_rng([spec.seed, 6])
    content = "\n".join(
        [
            _ground(spec),
            _grid(spec),
            _strokes(composition, spec, pieces=int(rng.choice([0, 1, 400]))),
            _words(composition, spec),
        ]
    )
    path.write_bytes(_document(content, spec, compress=bool(rng.random() < 0.7)))
    offset, size = spec.paper.offset_mm, spec.paper.size_mm
    homography = np.diag([PT_PER_MM, PT_PER_MM, 1.0])
    homography[:2, 2] = PT_PER_MM * offset[0], PT_PER_MM * offset[1]
    size_pt = (round(size[0] * PT_PER_MM), round(size[1] * PT_PER_MM))
    page_map = CaptureMap(homography, np.zeros(3), spec.paper, None, size_pt)
    return truth_of(recording, composition, spec, page_map)


def _colour(colour: Colour, operator: str) -> str:
    return " ".join(f"{c / 255:.3f}" for c in colour) + f" {operator}"


def _at(spec: PageSpec, x_mm: np.ndarray, y_mm: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Places in points, from the lower left corner of the sheet."""
    offset, size = spec.paper.offset_mm, spec.paper.size_mm
    return PT_PER_MM * (x_mm + offset[0]), PT_PER_MM * (size[1] - offset[1] - y_mm)


def _ground(spec: PageSpec) -> str:
    wide, high = (PT_PER_MM * v for v in spec.paper.size_mm)
    return f"{_colour(spec.paper.colour, 'rg')} 0 0 {wide:.2f} {high:.2f} re f"


def _grid(spec: PageSpec) -> str:
    """The ruling: thin lines every millimetre, thicker ones every five."""
    paper = spec.paper
    if paper.grid == "none":
        return ""
    left, top = -paper.offset_mm[0], -paper.offset_mm[1]
    frame = paper.frame_mm or (left, top, left + paper.size_mm[0], top + paper.size_mm[1])
    fine = tuple(
        round(p + (1 - paper.fine_amount) * (c - p))
        for c, p in zip(paper.colour, paper.grid_colour, strict=True)
    )
    kinds = [(5, paper.coarse_mm, paper.grid_colour)]
    if paper.grid == "lines":
        kinds.insert(0, (1, paper.fine_mm, (fine[0], fine[1], fine[2])))
    lines = []
    for step, width_mm, colour in kinds:
        lines.append(f"{_colour(colour, 'RG')} {width_mm * PT_PER_MM:.3f} w")
        for x in np.arange(step * np.ceil(frame[0] / step), frame[2] + 0.01, step):
            lines.append(_path(*_at(spec, np.array([x, x]), np.array([frame[1], frame[3]]))))
        for y in np.arange(step * np.ceil(frame[1] / step), frame[3] + 0.01, step):
            lines.append(_path(*_at(spec, np.array([frame[0], frame[2]]), np.array([y, y]))))
    return "\n".join(lines)


def _path(x_pt: np.ndarray, y_pt: np.ndarray) -> str:
    points = [f"{x:.3f} {y:.3f}" for x, y in zip(x_pt, y_pt, strict=True)]
    return f"{points[0]} m " + " ".join(f"{p} l" for p in points[1:]) + " S"


def _strokes(composition: Composition, spec: PageSpec, *, pieces: int) -> str:
    """Traces, marks and separators; `pieces` samples to a path, 0: the whole lead in one."""
    lines = [f"{_colour(spec.pen.colour, 'RG')} 1 J 1 j"]
    for stroke in composition.strokes:
        lines.append(f"{stroke.width_mm * PT_PER_MM:.3f} w")
        lines += [_path(*_at(spec, *part)) for part in _cut(stroke, pieces)]
    return "\n".join(lines)


def _cut(stroke: Stroke, pieces: int) -> list[tuple[np.ndarray, np.ndarray]]:
    """A stroke in parts that share their end points."""
    if not pieces or not stroke.trace:
        return [(stroke.x_mm, stroke.y_mm)]
    starts = range(0, len(stroke.x_mm) - 1, pieces)
    return [(stroke.x_mm[k : k + pieces + 1], stroke.y_mm[k : k + pieces + 1]) for k in starts]


def _words(composition: Composition, spec: PageSpec) -> str:
    lines = ["BT", _colour(spec.letters.colour, "rg")]
    names = list(_FONTS)
    for word in composition.words:
        kind = next((k for k in names if word.font.startswith(k)), "sans")
        x_pt, y_pt = _at(spec, np.array(word.x_mm), np.array(word.y_mm))
        size_pt = word.height_mm / 0.72 * PT_PER_MM
        text = word.text.replace("\\", "\\\\").replace("(", "\\(").replace(")", "\\)")
        lines.append(f"/F{names.index(kind)} {size_pt:.2f} Tf")
        lines.append(f"1 0 0 1 {x_pt:.2f} {y_pt:.2f} Tm ({text}) Tj")
    return "\n".join([*lines, "ET"])


def _document(content: str, spec: PageSpec, *, compress: bool) -> bytes:
    """The file: catalogue, page tree, page, content, fonts, and the table of where they start."""
    stream, coding = content.encode("latin-1"), ""
    if compress:
        stream, coding = zlib.compress(stream), " /Filter /FlateDecode"
    wide, high = (PT_PER_MM * v for v in spec.paper.size_mm)
    fonts = " ".join(f"/F{k} {5 + k} 0 R" for k in range(len(_FONTS)))
    bodies = [
        b"<< /Type /Catalog /Pages 2 0 R >>",
        b"<< /Type /Pages /Kids [3 0 R] /Count 1 >>",
        f"<< /Type /Page /Parent 2 0 R /MediaBox [0 0 {wide:.2f} {high:.2f}] /Contents 4 0 R "
        f"/Resources << /Font << {fonts} >> >> >>".encode(),
        f"<< /Length {len(stream)}{coding} >>\nstream\n".encode() + stream + b"\nendstream",
        *(
            f"<< /Type /Font /Subtype /Type1 /BaseFont /{name} >>".encode()
            for name in _FONTS.values()
        ),
    ]
    out, starts = b"%PDF-1.5\n", []
    for number, body in enumerate(bodies, start=1):
        starts.append(len(out))
        out += f"{number} 0 obj\n".encode() + body + b"\nendobj\n"
    table = "".join(f"{start:010d} 00000 n \n" for start in starts)
    tail = f"xref\n0 {len(bodies) + 1}\n0000000000 65535 f \n{table}"
    tail += f"trailer\n<< /Size {len(bodies) + 1} /Root 1 0 R >>\nstartxref\n{len(out)}\n%%EOF\n"
    return out + tail.encode()
