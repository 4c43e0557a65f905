"""`measure overread`: the server of this machine, and the browser on its page."""

import socket
import sys
import threading
import webbrowser
from collections.abc import Sequence
from importlib.util import find_spec
from pathlib import Path

from digitize.errors import InputError, UnreadableFile, needs_extra, shown
from digitize.options import Options
from measure.overread.items import Item, file_items
from measure.overread.stored import stored_items
from measure.overread.worklist import Worklist
from measure.reading import Person

_NEEDED = ("starlette", "uvicorn")


class CannotServe(InputError):  # noqa: N818 - it says what happened
    """The page cannot be served on this machine."""


def serve(
    files: Sequence[Path],
    options: Options,
    person: Person,
    *,
    folder: Path | None = None,
    port: int = 0,
    browser: bool = True,
) -> None:
    """Serve the over-read page until it is interrupted.

    Parameters
    ----------
    files : sequence of Path
        The worklist: files, folders, stores.
    options, person
        What is known better than the pages say.
    folder : Path, optional
        Where the journals go; beside each file where it is not given.
    port : int
        0 takes any that is free.
    browser : bool
        Whether the default browser is opened; the address is printed in any case.

    Raises
    ------
    CannotServe
        The port is taken.
    UnreadableFile
        A package is missing, or a folder or store holds no ECG.
    """
    if any(find_spec(name) is None for name in _NEEDED):
        raise needs_extra("the over-read page", "overread")
    items = find_items(files, folder)
    import uvicorn

    from measure.overread.guard import HOST, Guard
    from measure.overread.server import make_app

    listener = _listener(HOST, port)
    guard = Guard(listener.getsockname()[1])
    worklist = Worklist(items, options, person)
    worklist.start()
    print(f"Over-read page: {guard.address}", flush=True)
    print("It answers on this machine alone. End it with Ctrl-C.", file=sys.stderr)
    config = uvicorn.Config(
        make_app(worklist, guard), log_level="error", server_header=False, ws="none"
    )
    if browser:
        threading.Timer(0.3, webbrowser.open, (guard.address,)).start()
    uvicorn.Server(config).run(sockets=[listener])


def find_items(places: Sequence[Path], folder: Path | None) -> list[Item]:
    """Return what a worklist is made of: files, folders and stores, in the order given.

    Raises
    ------
    UnreadableFile
        A folder or store holds no ECG to over-read.
    """
    items: list[Item] = []
    for place in places:
        stored = stored_items(place, folder)
        if stored == []:
            raise UnreadableFile(f"no page of the store {shown(place)} needs a look")
        items += stored or file_items(place, folder)
    return items


def _listener(host: str, port: int) -> socket.socket:
    """A socket that listens on this machine alone."""
    listener = socket.socket()
    listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
    try:
        listener.bind((host, port))
    except (OSError, OverflowError):
        listener.close()
        raise CannotServe(f"port {port} cannot be used: give another with --port") from None
    return listener
