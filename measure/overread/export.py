"""What can be taken away from the page: the same files that the command line writes."""

import io
import zipfile
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

from digitize.formats import FORMATS
from digitize.formats import export as formatted
from digitize.tracing_files import output_stem, to_csv
from digitize.tracing_files import to_json as tracing_to_json
from measure.compare import compare, comparison_json, side
from measure.export import FORMS, REPORTS, exported
from measure.inputs import Given
from measure.overread.session import Session
from measure.reading import Reading
from measure.reading_files import to_json
from measure.report import comparison_page, report

_MEDIA_TYPES = {
    ".html": "text/html",
    ".json": "application/json",
    ".csv": "text/csv",
    ".png": "image/png",
    ".zip": "application/zip",
    ".pdf": "application/pdf",
}
UNSIGNED = ".unsigned"  # in the name of a file
ANY_TYPE = "application/octet-stream"
_LONG_AGO = (1980, 1, 1, 0, 0, 0)  # the first date that a zip file knows: the same bytes every time

Make = Callable[[Session, Reading], bytes]


@dataclass(frozen=True)
class Taken:
    """A file to take away."""

    name: str
    content: bytes

    @property
    def media_type(self) -> str:
        """What kind of file it is, by its ending."""
        return _MEDIA_TYPES.get(self.name[self.name.rfind(".") :], ANY_TYPE)


def _overlay(session: Session, reading: Reading) -> bytes:
    stages = session.stages()
    if stages is None:
        raise KeyError("overlay")
    from digitize.overlay import draw_overlay  # image libraries for pages alone

    return draw_overlay(stages.page, reading.tracing)


def _overlay_if_any(session: Session, reading: Reading) -> bytes | None:
    return None if session.stages() is None else _overlay(session, reading)


def _report(session: Session, reading: Reading) -> bytes:
    """The report with the overlay of the page, where there is one."""
    return report(reading, overlay_png=_overlay_if_any(session, reading)).encode()


_OWN: Mapping[str, tuple[str, Make]] = {
    "report": (".reading.html", _report),
    "reading": (".reading.json", lambda s, r: to_json(r)),
    "tracing": (".json", lambda s, r: tracing_to_json(r.tracing).encode()),
    "samples": (".csv", lambda s, r: to_csv(r.tracing).encode()),
    "overlay": (".overlay.png", _overlay),
}
SCAN = "dicom-scan"
_LEADS_ALONE = tuple(form for form in FORMATS if form not in (*FORMS, "csv"))
KINDS = (*_OWN, *_LEADS_ALONE, *FORMS, SCAN)


def export(session: Session, kind: str) -> Taken:
    """Return a file of this kind, as the record is now; several files come as one zip file.

    As long as nobody has signed the record, the name of the file says so too.

    Raises
    ------
    KeyError
        There is no such kind, or not of this ECG.
    CannotExport
        The format has no way to hold it.
    """
    reading = session.reading()
    stem = _safe(output_stem(reading.tracing.source)) + ("" if session.signed else UNSIGNED)
    if kind in _OWN:
        ending, make = _OWN[kind]
        return Taken(stem + ending, make(session, reading))
    if kind not in KINDS:
        raise KeyError(kind)
    files = _in_form(session, reading, kind, stem)
    if len(files) == 1:
        return Taken(*files.popitem())
    return Taken(f"{stem}.{kind}.zip", _zipped(files))


def _in_form(session: Session, reading: Reading, form: str, stem: str) -> dict[str, bytes]:
    """The files of an open format, with measurements where it has a place for them."""
    if form in _LEADS_ALONE:
        return formatted(reading.tracing, stem, form)
    if form == SCAN:
        stages = session.stages()
        if stages is None:
            raise KeyError(form)
        from digitize.formats import dicom_scan

        return dicom_scan.files(stages.page, stem)
    overlay = _overlay_if_any(session, reading) if form in REPORTS else None
    return exported(Given(reading.tracing, stem, {}, overlay), reading, form)


def export_comparison(
    old: Mapping[str, Any], old_name: str, new: Mapping[str, Any], new_name: str
) -> Taken:
    """Return page and numbers of a comparison as one zip file; see `beside`."""
    comparison = compare([side(old, old_name), side(new, new_name)])
    stem = _safe(new_name)
    files = {
        f"{stem}.compare.html": comparison_page(comparison).encode(),
        f"{stem}.compare.json": comparison_json(comparison),
    }
    return Taken(f"{stem}.compare.zip", _zipped(files))


def _safe(stem: str) -> str:
    """A name that every system can have."""
    return "".join(c if c.isascii() and (c.isalnum() or c in "-_.") else "_" for c in stem)


def _zipped(files: Mapping[str, bytes]) -> bytes:
    stream = io.BytesIO()
    with zipfile.ZipFile(stream, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in files.items():
            archive.writestr(zipfile.ZipInfo(name, _LONG_AGO), content)
    return stream.getvalue()
