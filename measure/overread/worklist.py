"""The ECGs of one call, read one after the other while the first is already on the page."""

import datetime
import itertools
import queue
import threading
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from digitize.errors import InputError, NoGrid, at
from digitize.options import Options
from digitize.tracing import PageSource
from measure.inputs import DIGITAL_ENDINGS, TABLE_ENDINGS, open_ecgs
from measure.overread.chain import Chain
from measure.overread.pictures import Pictures
from measure.overread.session import JOURNAL_ENDING, Session, scale_kept
from measure.reading import Person


@dataclass(eq=False)
class Entry:
    """One ECG of the worklist.

    `state` is "waiting", "reading", "ready", "no scale" (a page without grid, on which a person
    can show the scale) or "failed"; `message` says why.
    """

    name: str
    file: Path
    state: str = "waiting"
    stage: str = ""  # which stage a page is in while it is read
    message: str = ""
    session: Session | None = None
    pictures: Pictures | None = None
    source: PageSource | None = None  # of a page whose scale is missing
    tab: str = ""  # the browser tab that may write
    lock: threading.Lock = field(default_factory=threading.Lock)


class Worklist:
    """Files become entries, page by page, on a thread of their own."""

    def __init__(
        self, files: Sequence[Path], options: Options, person: Person, folder: Path | None
    ) -> None:
        """`folder` is where the journals go; beside each file where it is None."""
        self.entries = [Entry(file.name, file) for file in files]
        self._options, self._person, self._folder = options, person, folder
        self.wanted: queue.Queue[tuple[Entry, Options]] = queue.Queue()
        for entry in self.entries:
            kept = None if options.px_per_mm else scale_kept(self._journal(entry, entry.file.stem))
            self.wanted.put((entry, replace(options, px_per_mm=kept) if kept else options))

    def start(self) -> None:
        """Begin to read; the thread ends with the program."""
        threading.Thread(target=self._work, daemon=True).start()

    def read_with_scale(self, entry: Entry, px_per_mm: tuple[float, float]) -> None:
        """Read a page without grid once more, with the scale that a person showed on it."""
        entry.state, entry.stage, entry.message = "waiting", "", ""
        self.wanted.put((entry, replace(self._options, px_per_mm=px_per_mm)))

    def _work(self) -> None:
        while True:
            self.read_next(*self.wanted.get())

    def read_next(self, entry: Entry, options: Options) -> None:
        """Read one file; one that cannot be used costs itself alone."""
        entry.state = "reading"
        try:
            self._read(entry, options)
        except InputError as error:
            _fail(entry, at(error, entry.file.name))
        if entry.state == "reading":
            _fail(entry, None)

    def _read(self, entry: Entry, options: Options) -> None:
        """All ECGs of one file: the first takes the file's entry, others follow it."""
        if entry.file.suffix.lower() in (*TABLE_ENDINGS, *DIGITAL_ENDINGS):
            for given in open_ecgs(entry.file, options, on_error=lambda e: _fail(entry, e)):
                chain = Chain(given.tracing, None, self._person)
                self._ready(entry, chain, given.stem, Pictures())
            return
        from digitize.read import read_stages  # image libraries for pages alone
        from digitize.tracing_files import output_stem

        def at_stage(stage: str) -> None:
            entry.stage = stage

        place = entry
        pages = read_stages(
            entry.file, options, on_error=lambda e: _fail(entry, e), on_stage=at_stage
        )
        for stages in pages:
            if place.state == "ready":
                number = stages.page.source.page
                place = Entry(f"{entry.file.name}, page {number}", entry.file)
                self.entries.append(place)
            chain = Chain(stages.tracing, stages, self._person)
            pictures = Pictures(stages.page.pixels, stages.sheet.pixels)
            self._ready(place, chain, output_stem(stages.page.source), pictures)

    def _ready(self, entry: Entry, chain: Chain, stem: str, pictures: Pictures) -> None:
        entry.session = Session(chain, self._journal(entry, stem), _now)
        entry.pictures = pictures
        entry.state = "ready"

    def _journal(self, entry: Entry, stem: str) -> Path:
        folder = entry.file.parent if self._folder is None else self._folder
        return folder / (stem + JOURNAL_ENDING)


def _fail(entry: Entry, error: InputError | None) -> None:
    """Say why an entry is of no use; a later page of a file that is ready changes nothing."""
    if entry.state == "ready":
        return
    entry.state = "failed"
    entry.message = str(error) if error else "there is no ECG in it"
    if isinstance(error, NoGrid):
        _ask_for_scale(entry)


def _ask_for_scale(entry: Entry) -> None:
    """Put a page without grid before the person, who can show its scale; one-page files alone."""
    from digitize.pages import open_pages

    pages = list(itertools.islice(open_pages(entry.file, on_error=lambda e: None), 2))
    if len(pages) == 1:
        entry.source, entry.pictures = pages[0].source, Pictures(pages[0].pixels)
        entry.state = "no scale"


def _now() -> str:
    """This moment with its zone, to the second."""
    return datetime.datetime.now().astimezone().isoformat(timespec="seconds")
