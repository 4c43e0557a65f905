"""One page read for the store: its files, and its row of the catalogue."""

import io
import json
from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np
from PIL import Image

from digitize import program_version
from digitize.archive.catalogue import GOOD, LOOK, PageRow
from digitize.archive.header import header_fields, header_text
from digitize.options import Options
from digitize.overlay import draw_overlay
from digitize.pages import Page
from digitize.read import FAULTS, program_fault, read_page
from digitize.redact import cover
from digitize.tracing import Tracing
from digitize.tracing_files import tracing_files

THUMB_PX = 560  # wide enough to see a trace that jumped a row


def read_for_store(
    page: Page, options: Options, *, header: Sequence[str] | None = None
) -> tuple[PageRow, Mapping[str, bytes]]:
    """Return the row of a page and its files, ending to content.

    Nothing of the printing outside the traces is kept: the overlay is drawn on a covered page.
    Where `header` is given, that printing goes into the row as text, with the fields that these
    patterns find.

    Raises
    ------
    InputError
        The page cannot be read, or the program failed on it.
    """
    try:
        stages = read_page(page, options)
        tracing = stages.tracing
        overlay = draw_overlay(cover(stages), tracing)
    except FAULTS as fault:
        raise program_fault(fault) from None
    files = {
        ".overlay.png": overlay,
        ".thumb.jpg": _thumbnail(overlay),
        **{name.removeprefix("x"): data for name, data in tracing_files(tracing, "x").items()},
    }
    row = row_of(tracing)
    if header is not None:
        text = header_text(stages)
        fields = json.dumps(header_fields(text, header), ensure_ascii=False)
        row = replace(row, header=text, header_fields=fields)
    return row, files


def row_of(tracing: Tracing) -> PageRow:
    """What the catalogue keeps of a tracing: good unless a check failed."""
    failed = [check for check in tracing.checks if check.passed is False]
    read = np.concatenate([np.isfinite(panel.mv) for panel in tracing.panels])
    return PageRow(
        page=tracing.source.page,
        status=LOOK if failed else GOOD,
        reason="; ".join(check.message for check in failed),
        leads=len(tracing.leads),
        layout=str(tracing.layout.value),
        speed_mm_s=float(tracing.speed_mm_s.value),
        speed_source=tracing.speed_mm_s.source,
        gain_mm_mv=float(tracing.gain_mm_mv.value),
        gain_source=tracing.gain_mm_mv.source,
        timing=str(tracing.timing.value),
        read_share=round(float(read.mean()), 4),
        checks_failed=len(failed),
        width_px=tracing.source.width_px,
        height_px=tracing.source.height_px,
        version=program_version(),
    )


def _thumbnail(overlay: bytes) -> bytes:
    """A small picture of an overlay."""
    with Image.open(io.BytesIO(overlay)) as image:
        small = image.convert("RGB")
    small.thumbnail((THUMB_PX, THUMB_PX))
    buffer = io.BytesIO()
    small.save(buffer, "JPEG", quality=70)
    return buffer.getvalue()
