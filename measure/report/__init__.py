"""NAME.reading.html: one self-contained page that answers a reader's questions in order."""

from measure.report.page import report

__all__ = ["report"]
