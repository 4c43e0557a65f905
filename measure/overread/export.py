"""What can be taken away from the page: the same files that the command line writes."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass

from digitize.tracing_files import output_stem, to_csv
from digitize.tracing_files import to_json as tracing_to_json
from measure.overread.session import Session
from measure.reading import Reading
from measure.reading_files import to_json
from measure.report import report


@dataclass(frozen=True)
class Kind:
    """One kind of file: its ending, its media type, and how it is made."""

    ending: str
    media_type: str
    make: Callable[[Session, Reading], bytes]


def _report(session: Session, reading: Reading) -> bytes:
    """The report with the overlay of the page, where there is one."""
    stages = session.chain.stages
    if stages is None:
        return report(reading).encode()
    from digitize.overlay import draw_overlay  # image libraries for pages alone

    return report(reading, overlay_png=draw_overlay(stages.page, reading.tracing)).encode()


EXPORTS: Mapping[str, Kind] = {
    "report": Kind(".reading.html", "text/html", _report),
    "reading": Kind(".reading.json", "application/json", lambda s, r: to_json(r)),
    "tracing": Kind(".json", "application/json", lambda s, r: tracing_to_json(r.tracing).encode()),
    "samples": Kind(".csv", "text/csv", lambda s, r: to_csv(r.tracing).encode()),
}


def export(session: Session, kind: str) -> tuple[str, bytes]:
    """Return the name and the content of a file of this kind, as the record is now."""
    reading = session.reading()
    stem = output_stem(reading.tracing.source)
    safe = "".join(c if c.isascii() and (c.isalnum() or c in "-_.") else "_" for c in stem)
    wanted = EXPORTS[kind]
    return safe + wanted.ending, wanted.make(session, reading)
