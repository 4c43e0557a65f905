"""How many pages have which value: bins of a number, or the words of a finding, as text or a page.

Pages without a value are counted, never left out in silence.
"""

import itertools
import math
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from measure.report.html import document
from measure.report.svg import rect, text

MOST_BINS = 40
_STEPS = (1.0, 2.0, 2.5, 5.0, 10.0)  # of a scale that people read easily (common practice)
_WIDTH_MM, _ROW_MM, _LABEL_MM = 186.0, 5.0, 42.0
_BAR_SIGNS = 40
_INK = "#34505c"


@dataclass(frozen=True)
class Histogram:
    """Pages by value of `name`; `labels` and `counts` belong together, `missing` has no value."""

    name: str
    labels: tuple[str, ...]
    counts: tuple[int, ...]
    missing: int


def histogram(name: str, values: Iterable[float | str | None]) -> Histogram:
    """Return the histogram of one name over pages; None is a page without a value."""
    known = Counter(values)
    missing = known.pop(None, 0)
    if any(isinstance(value, str) for value in known):
        ordered = known.most_common()
        labels = tuple(str(value) for value, _ in ordered)
        return Histogram(name, labels, tuple(count for _, count in ordered), missing)
    numbers = np.repeat(
        np.array([float(value) for value in known if value is not None]), list(known.values())
    )
    if not len(numbers):
        return Histogram(name, (), (), missing)
    edges = bin_edges(numbers)
    counts, _ = np.histogram(numbers, edges)
    labels = tuple(f"{low:g} to {high:g}" for low, high in itertools.pairwise(edges))
    return Histogram(name, labels, tuple(counts.tolist()), missing)


def bin_edges(numbers: np.ndarray) -> np.ndarray:
    """Edges at round numbers, as wide as Freedman and Diaconis advise, `MOST_BINS` bins at most.

    A bin holds its lower edge.

    References
    ----------
    Freedman and Diaconis, Z Wahrscheinlichkeitstheorie 57:453-476 (1981).
    """
    low, high = float(numbers.min()), float(numbers.max())
    quarter, three_quarters = np.percentile(numbers, [25, 75])
    advised = 2 * (three_quarters - quarter) / len(numbers) ** (1 / 3)
    # Rounding to whole steps may add a bin at either end.
    width = max(float(advised), (high - low) / (MOST_BINS - 2)) or 1.0
    power = 10 ** math.floor(math.log10(width))
    step = next(power * s for s in _STEPS if power * s >= width * (1 - 1e-9))
    first = math.floor(low / step + 1e-9)
    last = math.floor(high / step + 1e-9) + 1
    return np.round(np.arange(first, last + 1) * step, 12)


def as_text(shown: Histogram) -> str:
    """Lines for the terminal: value, pages, bar."""
    rows = _rows(shown)
    wide = max(len(shown.name), *(len(label) for label, _ in rows))
    most = max(count for _, count in rows)
    lines = [f"{shown.name:>{wide}}  {'pages':>9}"]
    for label, count in rows:
        bar = "#" * round(_BAR_SIGNS * count / most) if most else ""
        lines.append(f"{label:>{wide}}  {count:>9}  {bar}".rstrip())
    return "\n".join(lines) + "\n"


def as_page(shown: Histogram, asked: str) -> str:
    """A page of HTML with the bars as a drawing, that loads nothing from elsewhere."""
    rows = _rows(shown)
    most = max(count for _, count in rows) or 1
    height = _ROW_MM * len(rows)
    parts = [
        f'<svg viewBox="0 0 {_WIDTH_MM:g} {height:g}" role="img" '
        f'aria-label="Histogram of {shown.name}">'
    ]
    for number, (label, count) in enumerate(rows):
        top = number * _ROW_MM
        length = (_WIDTH_MM - _LABEL_MM - 20) * count / most
        parts.append(text(_LABEL_MM - 2, top + 3.6, label, size=3.2, anchor="end"))
        parts.append(rect(_LABEL_MM, top + 0.6, length, _ROW_MM - 1.2, fill=_INK))
        parts.append(text(_LABEL_MM + length + 1.5, top + 3.6, str(count), size=3.2))
    total = sum(shown.counts) + shown.missing
    headline = (f"{total} pages, {shown.missing} of them without a value.", f"Asked: {asked}")
    return document(f"Pages by {shown.name}", headline, "".join([*parts, "</svg>"]))


def _rows(shown: Histogram) -> Sequence[tuple[str, int]]:
    return (*zip(shown.labels, shown.counts, strict=True), ("missing", shown.missing))
