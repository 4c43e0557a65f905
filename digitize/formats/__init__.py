"""A tracing in the open formats that other systems take: one module for each."""

from collections.abc import Callable
from importlib import import_module
from typing import TYPE_CHECKING, cast

if TYPE_CHECKING:
    from digitize.tracing import Tracing

FORMATS = ("csv", "wfdb", "edf", "dicom", "fhir", "aecg")


def export(tracing: "Tracing", stem: str, form: str) -> dict[str, bytes]:
    """Return names and contents of the files that hold a tracing in one format.

    Parameters
    ----------
    tracing : Tracing
        What was read from one page.
    stem : str
        Name of the files without their endings.
    form : str
        One of `FORMATS`.

    Raises
    ------
    CannotExport
        The format has no way to hold this tracing; the text says why.
    """
    if form not in FORMATS:
        raise ValueError(f"'{form}' is no format known here: give one of {', '.join(FORMATS)}")
    module = import_module(f"digitize.formats.{form}")
    write = cast("Callable[[Tracing, str], dict[str, bytes]]", module.files)
    return write(tracing, stem)
