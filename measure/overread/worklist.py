"""The ECGs of one call, read one after the other while the first is already on the page."""

import datetime
import threading
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

from digitize.errors import InputError, at
from digitize.options import Options
from measure.inputs import DIGITAL_ENDINGS, TABLE_ENDINGS, open_ecgs
from measure.overread.chain import Chain
from measure.overread.pictures import Pictures
from measure.overread.session import JOURNAL_ENDING, Session
from measure.reading import Person


@dataclass(eq=False)
class Entry:
    """One ECG of the worklist: being read, ready, or of no use with the reason in words."""

    name: str
    state: str = "waiting"  # "waiting", "reading", "ready", "failed"
    stage: str = ""  # which stage a page is in while it is read
    message: str = ""
    session: Session | None = None
    pictures: Pictures | None = None
    tab: str = ""  # the browser tab that may write
    lock: threading.Lock = field(default_factory=threading.Lock)


class Worklist:
    """Files become entries, page by page, on a thread of their own."""

    def __init__(
        self, files: Sequence[Path], options: Options, person: Person, folder: Path | None
    ) -> None:
        """`folder` is where the journals go; beside each file where it is None."""
        self.entries = [Entry(file.name) for file in files]
        self._files = tuple(zip(files, self.entries, strict=True))
        self._options, self._person, self._folder = options, person, folder

    def start(self) -> None:
        """Begin to read; the thread ends with the program."""
        threading.Thread(target=self.read_all, daemon=True).start()

    def read_all(self) -> None:
        """Read every file; one that cannot be used costs itself alone."""
        for file, entry in self._files:
            entry.state = "reading"
            try:
                self._read(file, entry)
            except InputError as error:
                _fail(entry, at(error, file.name))
            if entry.state == "reading":
                _fail(entry, None)

    def _read(self, file: Path, entry: Entry) -> None:
        """All ECGs of one file: the first takes the file's entry, others follow it."""
        if file.suffix.lower() in (*TABLE_ENDINGS, *DIGITAL_ENDINGS):
            for given in open_ecgs(file, self._options, on_error=lambda e: _fail(entry, e)):
                chain = Chain(given.tracing, None, self._person)
                self._ready(entry, chain, file, given.stem, Pictures(None))
            return
        from digitize.read import read_stages  # image libraries for pages alone
        from digitize.tracing_files import output_stem

        def at_stage(stage: str) -> None:
            entry.stage = stage

        place = entry
        pages = read_stages(
            file, self._options, on_error=lambda e: _fail(entry, e), on_stage=at_stage
        )
        for stages in pages:
            if place.state == "ready":
                place = Entry(f"{file.name}, page {stages.page.source.page}")
                self.entries.insert(self.entries.index(entry) + stages.page.source.page - 1, place)
            chain = Chain(stages.tracing, stages, self._person)
            stem = output_stem(stages.page.source)
            self._ready(place, chain, file, stem, Pictures(stages))

    def _ready(self, entry: Entry, chain: Chain, file: Path, stem: str, pictures: Pictures) -> None:
        folder = file.parent if self._folder is None else self._folder
        entry.session = Session(chain, folder / (stem + JOURNAL_ENDING), _now)
        entry.pictures = pictures
        entry.state = "ready"


def _fail(entry: Entry, error: InputError | None) -> None:
    """Say why an entry is of no use; a later page of a file that is ready changes nothing."""
    if entry.state != "ready":
        entry.state = "failed"
        entry.message = str(error) if error else "there is no ECG in it"


def _now() -> str:
    """This moment with its zone, to the second."""
    return datetime.datetime.now().astimezone().isoformat(timespec="seconds")
