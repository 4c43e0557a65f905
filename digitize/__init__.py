"""A scan, fax or photo of a paper ECG becomes calibrated leads.

>>> import digitize
>>> for tracing in digitize.read_pages("chart.png"):  # doctest: +SKIP
...     print(tracing.leads, tracing.lead("II").mv)

Importing this package is light: image libraries are loaded when the first page is read.
"""

from collections.abc import Callable, Iterator
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import TYPE_CHECKING

from digitize.errors import InputError
from digitize.options import Options

if TYPE_CHECKING:
    from digitize.tracing import Tracing

__all__ = ["CAUTION", "InputError", "Options", "program_version", "read_pages"]

CAUTION = (
    "This is no diagnosis. It was read from a picture of paper and can be wrong: "
    "a qualified clinician reads the original tracing."
)


def program_version() -> str:
    """Version of the installed program, "unknown" where it runs without being installed."""
    try:
        return version("millivellum")
    except PackageNotFoundError:
        return "unknown"


def read_pages(
    path: str | Path,
    options: Options | None = None,
    *,
    on_error: Callable[[InputError], None] | None = None,
) -> "Iterator[Tracing]":
    """Tracings of the pages of a file, one at a time.

    Parameters
    ----------
    path : str or Path
        Scan, fax or photo: PNG, JPEG, TIFF, PDF, HEIC or DICOM, of one or more pages.
    options : Options
        What a person knows better than the page.
    on_error : callable, optional
        Called with the error of a page that cannot be used; the pages after it still come.
        Without it the error is raised and ends the reading.

    Raises
    ------
    InputError
        The file cannot be opened, or a page cannot be used and `on_error` is not given.
    """
    from digitize.read import read_stages

    for stages in read_stages(path, options or Options(), on_error=on_error):
        yield stages.tracing
