"""Everything that can be wrong with an input, in words for the person who gave it.

    InputError                  one file or page cannot be used; the others go on
    ├── UnreadableFile          not an image, truncated, empty, encrypted, too large
    ├── NoGrid                  the scale of the paper cannot be found
    ├── NoTrace                 no ECG on this page
    ├── PoorResolution          too few pixels per millimetre to measure
    ├── OutputExists            a result is there already and --replace was not given
    ├── CannotWrite             a result cannot be written where it was asked for
    ├── CannotExport            a format has no way to hold this tracing
    ├── StillReadable           printing can be read on a page after it was covered
    └── ProgramFault            the program itself failed on this page

A stage says what happened and what to do; which file and page it was is added afterwards, by
`at`, so that no stage has to know.
"""

# ruff: noqa: N818 - each name says what happened

from pathlib import Path
from typing import TypeVar


class InputError(Exception):
    """One file or page cannot be used. The text says where, what happened and what to do."""

    place: str = ""  # file and page in words, once they are known

    def __str__(self) -> str:
        """Place and message on one line."""
        message = super().__str__()
        return f"{self.place}: {message}" if self.place else message


class UnreadableFile(InputError):
    """The file cannot be opened as an image or a document."""


class NoGrid(InputError):
    """The scale of the paper cannot be found."""


class NoTrace(InputError):
    """There is no ECG trace on this page."""


class PoorResolution(InputError):
    """There are too few pixels per millimetre to measure."""


class OutputExists(InputError):
    """A result of that name exists and may not be replaced."""


class CannotWrite(InputError):
    """A result cannot be written where it was asked for."""


class CannotExport(InputError):
    """The format asked for cannot hold this tracing."""


class StillReadable(InputError):
    """Printing can still be read on a page after it was covered."""


class ProgramFault(InputError):
    """The program itself failed on this page: a mistake of ours, not of the person's."""


Error = TypeVar("Error", bound=InputError)


def at(error: Error, file_name: str, page: int | None = None) -> Error:
    """The error, told where it happened; a place that it knows already is kept."""
    if not error.place:
        error.place = shown(file_name) if page is None else f"{shown(file_name)}, page {page}"
    return error


def needs_extra(what: str, extra: str, instead: str = "") -> UnreadableFile:
    """The error where a package is not installed: "writing EDF", the extra, another way."""
    way = f", or {instead}" if instead else ""
    return UnreadableFile(f"{what} needs one more package: install millivellum[{extra}]{way}")


def shown(path: str | Path) -> str:
    """A path that is safe to print on one line: control and undecodable characters escaped."""
    text = str(path).encode("utf-8", "backslashreplace").decode("utf-8")
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in text)
