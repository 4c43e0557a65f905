"""The report as a PDF: for archives that take documents alone.

It answers the same questions as the HTML report, with the overlay and the same drawing of the
beats, in true millimetres. It names the page by its hash, never by its file, whose name may name a
patient. The same reading gives the same bytes.
"""

import datetime
import io
from collections.abc import Iterable
from typing import TYPE_CHECKING

from digitize import program_version
from digitize.errors import needs_extra
from measure.questions import Answers, Measured, answer, evidence_by_clause, refusal, shown_in_full
from measure.reading import Reading
from measure.report.beats import beats_caption, draw_beats
from measure.report.svg import without_rims
from measure.wording import NOTICE, ONE_SE, nice, number, origin

if TYPE_CHECKING:
    from fpdf import FPDF

_TEXT_PT, _SMALL_PT, _TITLE_PT = 9.5, 8.0, 13.0
_LINE_MM, _SMALL_LINE_MM = 4.3, 3.5
_MARGIN_MM, _FOOT_MM = 14.0, 10.0
# The letters of the standard PDF fonts are those of Latin-1: others are written out.
_WRITTEN_OUT = str.maketrans(
    {
        **{"\u2265": ">=", "\u2264": "<=", "\u2212": "-", "\u2013": "-", "\u2014": "-"},
        **{"\u201c": '"', "\u201d": '"', "\u2018": "'", "\u2019": "'", "\u2032": "'"},
        **{"\u25bc": "triangle:", "\u25c7": "diamond:"},
        **{"\u25a0": "[x]", "\u25ea": "[?]", "\u25a1": "[ ]", "\u2026": "...", "\u03bc": "\u00b5"},
    }
)


def report_pdf(reading: Reading, *, overlay_png: bytes | None = None) -> bytes:
    """Return the report of one reading as a PDF.

    Parameters
    ----------
    reading : Reading
        What was measured.
    overlay_png : bytes, optional
        The page with the found trace drawn over it; it is embedded.

    Raises
    ------
    UnreadableFile
        The package that writes PDF is not installed.
    """
    try:
        from fpdf import FPDF
    except ImportError:
        raise needs_extra("writing PDF", "pdf") from None
    pdf = FPDF(format="A4")
    pdf.set_creation_date(datetime.datetime(2000, 1, 1, tzinfo=datetime.UTC))  # same bytes always
    pdf.set_title("ECG reading, no diagnosis")
    pdf.set_creator(f"millivellum {program_version()}")
    pdf.set_lang("en")
    pdf.set_margin(_MARGIN_MM)
    pdf.set_auto_page_break(True, _FOOT_MM)
    pdf.add_page()
    answers = answer(reading)
    _title(pdf, "ECG reading")
    _lines(pdf, [NOTICE], bold=True)
    _lines(pdf, answers.headline)
    if overlay_png is not None:
        _picture(pdf, overlay_png)
    _sections(pdf, reading, answers)
    source = reading.tracing.source
    page = f"Page {source.page} of the file with SHA-256 {source.sha256 or 'unknown'}."
    _lines(pdf, [page, f"Program: millivellum {program_version()}. {ONE_SE} {NOTICE}"], small=True)
    return bytes(pdf.output())


def _sections(pdf: "FPDF", reading: Reading, answers: Answers) -> None:
    """The questions of the HTML report, in its order."""
    _section(pdf, "1 Can the tracing be trusted?", answers.trust)
    rhythm = (*answers.rhythm, *_measured(answers.rhythm_rows))
    _section(pdf, "2 What is the rhythm?", rhythm)
    _section(pdf, "3 How wide is the QRS, what follows it?", _measured(answers.width_rows))
    findings = [finding for _, group in answers.families for finding in group]
    patterns = [
        f"{finding.result}: {nice(finding.definition)}"
        for result in ("met", "undecided")
        for finding in findings
        if finding.result == result
    ]
    _section(pdf, "4 Which pattern?", patterns)
    refused = [refusal(finding) for finding in findings if finding.result == "not met"]
    _lines(pdf, [f"not met: {'; '.join(refused)}."] if refused else [], small=True)
    _section(pdf, "5 On what evidence?", ())
    above: dict[str, str] = {}
    for finding in shown_in_full(answers.families):
        title = f"{finding.result}: {nice(finding.definition)} ({finding.source})"
        _lines(pdf, [title], bold=True, small=True)
        clauses = evidence_by_clause(finding, above)
        lines = [f"   {c.result}: {nice(c.text)} {words}" for c, words in clauses]
        _lines(pdf, lines, small=True)
    pdf.ln(1.5)
    pdf.image(io.BytesIO(without_rims(draw_beats(reading)).encode()), w=pdf.epw)
    _lines(pdf, [beats_caption(reading)], small=True)
    _section(pdf, "6 What to check by eye", answers.by_eye, small=True)


def _measured(rows: Iterable[Measured]) -> list[str]:
    """Each interval with its error, where it comes from and what is usual."""
    lines = []
    for row in rows:
        usual = row.usual.text and f"usual {row.usual.text}"
        more = "; ".join(part for part in (origin(row.quantity), usual) if part)
        aside = f" ({more})" if more else ""
        lines.append(f"{row.usual.label}: {number(row.quantity)}{aside}")
    return lines


def _section(pdf: "FPDF", title: str, lines: Iterable[str], *, small: bool = False) -> None:
    pdf.ln(1.5)
    pdf.set_font("Helvetica", "B", _TEXT_PT + 1)
    _write(pdf, title)
    _lines(pdf, lines, small=small)


def _title(pdf: "FPDF", text: str) -> None:
    pdf.set_font("Helvetica", "B", _TITLE_PT)
    _write(pdf, text, 7.0)


def _lines(pdf: "FPDF", lines: Iterable[str], *, bold: bool = False, small: bool = False) -> None:
    pdf.set_font("Helvetica", "B" if bold else "", _SMALL_PT if small else _TEXT_PT)
    for line in lines:
        _write(pdf, line, _SMALL_LINE_MM if small else _LINE_MM)


def _write(pdf: "FPDF", text: str, line_mm: float = _LINE_MM) -> None:
    """One paragraph over the whole width; letters that the font lacks show as their number."""
    plain = text.translate(_WRITTEN_OUT).encode("latin-1", "backslashreplace").decode("latin-1")
    pdf.multi_cell(0, line_mm, plain, align="L", new_x="LMARGIN", new_y="NEXT")


def _picture(pdf: "FPDF", overlay_png: bytes) -> None:
    """The overlay over the whole width, as JPEG: a tenth of the size of its own file."""
    from PIL import Image

    stream = io.BytesIO()
    with Image.open(io.BytesIO(overlay_png)) as picture:
        picture.convert("RGB").save(stream, "JPEG", quality=85)
    pdf.ln(1)
    pdf.image(stream, w=pdf.epw, alt_text="The page with the found trace drawn over it")
    pdf.ln(1)
