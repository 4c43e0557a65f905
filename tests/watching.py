"""Looking at something again and again while something else runs."""

import contextlib
import threading
from collections.abc import Callable, Iterator


@contextlib.contextmanager
def looking(look: Callable[[], None], every_s: float) -> Iterator[None]:
    """Call `look` every so many seconds, from a thread of its own, until the block is left."""
    ended = threading.Event()

    def watch() -> None:
        while not ended.wait(every_s):
            look()

    thread = threading.Thread(target=watch)
    thread.start()
    try:
        yield
    finally:
        ended.set()
        thread.join()
