"""Files into pages of pixels."""

import hashlib
import itertools
import stat
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from io import BufferedReader
from pathlib import Path

import numpy as np

from digitize.dicom import open_dicom
from digitize.drawing import Drawing
from digitize.errors import InputError, UnreadableFile, at
from digitize.options import Options
from digitize.pdf import open_pdf
from digitize.pictures import Loader, Picture, open_heic, open_pictures
from digitize.tracing import PageSource

MOST_PAGES = 10_000  # of one file; more is a damaged or hostile one
_HEAD_BYTES = 1024  # a PDF header may stand anywhere in these (ISO 32000-1, annex H.3.4.1)
_HEIC_BRANDS = (b"heic", b"heix", b"heim", b"heis", b"hevc", b"mif1", b"msf1")  # ISO/IEC 23008-12


@dataclass(frozen=True, eq=False)
class Page:
    """One page as pixels, turned as its EXIF tag says.

    `pixels` is uint8, (rows, cols) for grey and 1-bit pages (0 black, 255 white) or
    (rows, cols, 3) RGB. `source.dpi` is (across, down), None where the file does not say.
    `drawing` is what a page of a document draws as lines and text, in the same pixels.
    """

    pixels: np.ndarray
    source: PageSource
    bilevel: bool = False
    drawing: Drawing | None = None


def open_pages(
    path: str | Path,
    *,
    max_megapixels: float = Options.max_megapixels,
    only: int | None = None,
    on_error: Callable[[InputError], None] | None = None,
) -> Iterator[Page]:
    """Pages of a scan, fax, photo or document, one at a time.

    The content decides what kind of file it is, whatever its name says.

    Parameters
    ----------
    path : str or Path
        PNG, JPEG, TIFF (each of its pages), BMP, GIF, WebP, PDF, HEIC or DICOM.
    max_megapixels : float
        Larger pages are refused before they are decoded.
    only : int, optional
        The one page to decode, from 1; nothing comes where there is no such page.
    on_error : callable, optional
        Called with the error of a page that cannot be read; the pages after it still come.
        Without it the error is raised and ends the reading.

    Raises
    ------
    UnreadableFile
        The file cannot be opened at all, or a page cannot be read and `on_error` is not given.
    """
    path = Path(path)
    with _told(path), _open_file(path) as file:
        sha256 = hashlib.file_digest(file, "sha256").hexdigest()
        loaders = enumerate(_reader(file)(file, max_megapixels=max_megapixels), start=1)
        wanted = loaders if only is None else itertools.islice(loaders, only - 1, only)
        for number, load in wanted:
            try:
                page = _page(load(), path.name, sha256, number)
            except UnreadableFile as error:
                at(error, path.name, number)
                if on_error is None:
                    raise
                on_error(error)
            else:
                yield page


def count_pages(path: str | Path) -> int:
    """How many pages a file has; none of them is decoded.

    Raises
    ------
    UnreadableFile
        The file cannot be opened at all, or says that it has more than `MOST_PAGES`.
    """
    path = Path(path)
    with _told(path), _open_file(path) as file:
        loaders = _reader(file)(file, max_megapixels=Options.max_megapixels)
        count = sum(1 for _ in itertools.islice(loaders, MOST_PAGES + 1))
        if count > MOST_PAGES:
            raise UnreadableFile(f"it says that it has more than {MOST_PAGES} pages: split it")
        return count


@contextmanager
def _told(path: Path) -> Iterator[None]:
    """Errors of a file with its name."""
    try:
        yield
    except UnreadableFile as error:
        raise at(error, path.name) from None
    except OSError as error:
        reason = error.strerror or "input error"
        raise at(UnreadableFile(f"reading broke off ({reason})"), path.name) from None


def _open_file(path: Path) -> BufferedReader:
    """The file, open for reading; anything but a regular file with content is refused."""
    try:
        status = path.stat()
        if stat.S_ISDIR(status.st_mode):
            raise UnreadableFile("this is a folder: give the files in it")
        if not stat.S_ISREG(status.st_mode):
            raise UnreadableFile("this is not a regular file: give a scan or photo")
        if status.st_size == 0:
            raise UnreadableFile("the file is empty: copy or scan it again")
        return path.open("rb")
    except FileNotFoundError:
        raise UnreadableFile("there is no such file: check the name") from None
    except PermissionError:
        raise UnreadableFile("you may not read this file: change its permissions") from None
    except OSError as error:
        raise UnreadableFile(f"the file cannot be opened ({error.strerror})") from None
    except ValueError as error:
        raise UnreadableFile(f"this cannot be the name of a file ({error})") from None


def _reader(file: BufferedReader) -> Callable[..., Iterator[Loader]]:
    """The reader for this content; `file` is left at its beginning."""
    file.seek(0)
    head = file.read(_HEAD_BYTES)
    file.seek(0)
    if b"%PDF-" in head:
        return open_pdf
    if head[128:132] == b"DICM":  # PS3.10 7.1
        return open_dicom
    if head[4:8] == b"ftyp" and head[8:12] in _HEIC_BRANDS:
        return open_heic
    return open_pictures


def _page(picture: Picture, file_name: str, sha256: str, number: int) -> Page:
    """A picture with where it came from."""
    height_px, width_px = picture.pixels.shape[:2]
    source = PageSource(file_name, sha256, number, width_px, height_px, picture.dpi)
    return Page(
        picture.pixels, source, bilevel=_is_bilevel(picture.pixels), drawing=picture.drawing
    )


def _is_bilevel(pixels: np.ndarray) -> bool:
    """Whether a page is pure black and white: faxes, however they were stored."""
    if pixels.ndim == 3:
        return False
    counts = np.bincount(pixels.ravel(), minlength=256)
    return bool(counts[1:255].sum() == 0)
