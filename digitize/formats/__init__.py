"""A tracing in the open formats that other systems take: one module for each."""

from collections.abc import Callable
from importlib import import_module
from typing import TYPE_CHECKING, cast

if TYPE_CHECKING:
    from digitize.formats.measurements import Measurements
    from digitize.tracing import Tracing

FORMATS = ("csv", "wfdb", "edf", "dicom", "fhir", "aecg")
WITH_MEASUREMENTS = ("dicom", "fhir", "aecg")  # formats that have a place for them


def export(
    tracing: "Tracing", stem: str, form: str, measurements: "Measurements | None" = None
) -> dict[str, bytes]:
    """Return names and contents of the files that hold a tracing in one format.

    Parameters
    ----------
    tracing : Tracing
        What was read from one page.
    stem : str
        Name of the files without their endings.
    form : str
        One of `FORMATS`.
    measurements : Measurements, optional
        What was measured on it, for a format of `WITH_MEASUREMENTS`.

    Raises
    ------
    CannotExport
        The format has no way to hold this tracing; the text says why.
    """
    if form not in FORMATS:
        raise ValueError(f"'{form}' is no format known here: give one of {', '.join(FORMATS)}")
    module = import_module(f"digitize.formats.{form}")
    write = cast("Callable[..., dict[str, bytes]]", module.files)
    if measurements is None:
        return write(tracing, stem)
    if form not in WITH_MEASUREMENTS:
        raise ValueError(f"{form} has no place for measurements")
    return write(tracing, stem, measurements)
