"""Plain CSV (RFC 4180): a time column in seconds, one column per lead in millivolts."""

from digitize.tracing import Tracing
from digitize.tracing_files import to_csv


def files(tracing: Tracing, stem: str) -> dict[str, bytes]:
    """The same table as NAME.csv: blank where nothing is known."""
    return {f"{stem}.csv": to_csv(tracing).encode("ascii", "backslashreplace")}
