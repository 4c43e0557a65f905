"""NAME.reading.html and NAME.compare.html: self-contained answers to a reader's questions."""

from measure.report.comparison import comparison_page
from measure.report.page import report

__all__ = ["comparison_page", "report"]
