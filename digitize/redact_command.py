"""One call of `digitize redact`: files in, covered pages out, each looked over again."""

import io
from pathlib import Path

from PIL import Image

from digitize.console import Console
from digitize.errors import InputError, StillReadable, at, shown
from digitize.options import Options
from digitize.pages import Page
from digitize.read import read_page, read_stages
from digitize.redact import cover, leftover
from digitize.safe_write import write_files
from digitize.tracing_files import output_stem

ENDING = ".redacted.png"


def redact_files(
    files: list[Path], options: Options, console: Console, *, folder: Path | None, replace: bool
) -> int:
    """Write NAME.redacted.png for each page and return how many could not be.

    The picture is made anew from pixels, so nothing of the file's metadata comes along but the
    resolution. A page on which printing can still be read is refused.
    """
    for file in files:
        try:
            for stages in read_stages(file, options, on_error=console.fail):
                source = stages.page.source
                place = (file.parent if folder is None else folder) / output_stem(source)
                target = place.with_name(place.name + ENDING)
                try:
                    page = cover(stages)
                    _look_again(page, options)
                    write_files({target: _png(page)}, replace=replace)
                except InputError as error:
                    console.fail(at(error, file.name, source.page))
                else:
                    console.result(f"{shown(target)}: look at it before you pass it on")
        except InputError as error:
            console.fail(at(error, file.name))
    return console.failed


def _look_again(page: Page, options: Options) -> None:
    """Read the covered page as any page is read; what still stands on it is not repeated here."""
    left = leftover(read_page(page, options))
    if left:
        raise StillReadable(
            f"{len(left)} lines of printing can still be read after covering, so nothing was "
            "written: cover them by hand"
        )


def _png(page: Page) -> bytes:
    buffer = io.BytesIO()
    dpi = {} if page.source.dpi is None else {"dpi": page.source.dpi}
    Image.fromarray(page.pixels).save(buffer, "PNG", **dpi)
    return buffer.getvalue()
