"""The ECGs of one call: read when they are wanted, the next one ahead, a few kept at hand.

What a person did lies in the journals, so an ECG can be put away at any moment and read again.
"""

import datetime
import queue
import threading
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

from digitize.errors import InputError, NoGrid, UnreadableFile, at
from digitize.options import Options
from digitize.pages import Page, open_pages
from digitize.tracing import PageSource
from measure.inputs import holds_samples, open_ecgs
from measure.overread.chain import Chain
from measure.overread.corrections import Turn
from measure.overread.items import Item, page_item
from measure.overread.pictures import Pictures, coarsest
from measure.overread.session import Session, scale_kept
from measure.overread.stored import with_page
from measure.reading import Person
from measure.reading_files import document, load_document
from measure.run import READING_ENDING

if TYPE_CHECKING:
    from digitize.read import Stages

AT_HAND = 4  # ECGs with their pages in memory


@dataclass(eq=False)
class Entry:
    """One ECG of the worklist.

    `state` is "waiting", "reading", "ready", "to compare" (a saved reading), "no scale" (a page
    without grid, on which a person can show the scale) or "failed"; `message` says why.
    """

    item: Item
    state: str = "waiting"
    stage: str = ""  # which stage a page is in while it is read
    message: str = ""
    session: Session | None = None
    source: PageSource | None = None  # of the page, once it is open
    tab: str = ""  # the browser tab that may write
    lock: threading.Lock = field(default_factory=threading.Lock)
    px_per_mm: tuple[float, float] | None = None  # that a person showed on a page without grid
    _pictures: Pictures | None = None
    _document: dict[str, Any] | None = None

    @property
    def pictures(self) -> Pictures | None:
        """The page as scanned, and flattened where it is read; as it is turned now."""
        session = self.session
        if session is None:
            return self._pictures
        stages = self._as_turned(session)
        if stages is not None and (
            self._pictures is None or self._pictures.scan is not stages.page.pixels
        ):
            self._pictures = Pictures(stages.page.pixels, stages.sheet.pixels)
        return self._pictures

    def _as_turned(self, session: Session) -> "Stages | None":
        """The stages whose page is shown; no other correction than a turn alters the picture.

        So a tile need not wait while the record is computed.
        """
        if not any(isinstance(step.correction, Turn) for step in session.steps):
            return session.chain.stages()
        with self.lock:
            return session.stages()

    def document(self) -> dict[str, Any] | None:
        """The reading as it is now, or as it was saved, in the form of its file."""
        with self.lock:
            return document(self.session.reading()) if self.session else self._document

    def opened(self, page: Page) -> None:
        """The page is there to be looked at, though not read yet."""
        pictures = Pictures(page.pixels)
        pictures.tile("scan", coarsest(page.pixels), 0, 0)
        self.source, self._pictures = page.source, pictures

    def read(self, chain: Chain, now: str = "ready") -> None:
        """What a person does begins here, or where it was left off."""
        self.session = Session(chain, self.item.journal, _now)
        self._pictures = None
        self.state = now

    def saved(self, content: dict[str, Any]) -> None:
        """A reading that can be held beside others, and no more."""
        self._document, self.state = content, "to compare"

    def put_away(self) -> None:
        """Let go of what can be read again."""
        with self.lock:
            self.session = self._pictures = None
            self.state, self.stage = "waiting", ""


class Worklist:
    """Items become entries, and entries are read on a thread of their own."""

    def __init__(self, items: Sequence[Item], options: Options, person: Person) -> None:
        self.entries = [Entry(item) for item in items]
        self.wanted: queue.Queue[Entry] = queue.Queue()
        self._options, self._person = options, person
        self._used: list[Entry] = []  # those at hand, the one looked at last at the end

    def start(self) -> None:
        """Begin to read; the thread ends with the program."""
        self.wanted.put(self.entries[0])
        threading.Thread(target=self._work, daemon=True).start()

    def want(self, entry: Entry) -> None:
        """Note that someone looks at this entry: it is read if it is not, and kept at hand."""
        if entry.state == "waiting":
            self.wanted.put(entry)
        if entry.session is not None:
            self._use(entry)

    def read_with_scale(self, entry: Entry, px_per_mm: tuple[float, float]) -> None:
        """Read a page without grid once more, with the scale that a person showed on it."""
        entry.px_per_mm, entry.state, entry.stage, entry.message = px_per_mm, "waiting", "", ""
        self.wanted.put(entry)

    def in_order(self) -> Iterable[tuple[int, Entry]]:
        """The entries with their numbers, later pages of a file after its first."""
        first: dict[Any, int] = {}
        for k, entry in enumerate(self.entries):
            first.setdefault(entry.item.file, k)
        numbered = list(enumerate(self.entries))
        return sorted(numbered, key=lambda e: (first[e[1].item.file], e[1].item.page, e[0]))

    def _work(self) -> None:
        while True:
            self.read_next(self.wanted.get())
            if self.wanted.empty() and (ahead := self._ahead()) is not None:
                self.read_next(ahead)

    def _ahead(self) -> Entry | None:
        """The entry after the one looked at last, where it waits."""
        if not self._used:
            return None
        order = [entry for _, entry in self.in_order()]
        after = order[order.index(self._used[-1]) + 1 :]
        return after[0] if after and after[0].state == "waiting" else None

    def read_next(self, entry: Entry) -> None:
        """Read one entry; one that cannot be used costs itself alone."""
        if entry.state != "waiting":
            return
        entry.state = "reading"
        try:
            self._read(entry)
        except InputError as error:
            _fail(entry, at(error, entry.item.file.name))
        if entry.state == "reading":
            _fail(entry, None)
        if entry.session is not None:
            self._use(entry, looked_at=False)

    def _use(self, entry: Entry, looked_at: bool = True) -> None:
        """Keep this entry at hand, and put the one away that was not looked at for longest."""
        if entry in self._used:
            self._used.remove(entry)
        self._used.insert(len(self._used) if looked_at or not self._used else -1, entry)
        while len(self._used) > AT_HAND:
            self._used.pop(0).put_away()

    def _read(self, entry: Entry) -> None:
        entry.item = with_page(entry.item)
        file = entry.item.file
        if file.name.endswith(READING_ENDING):
            entry.saved(load_document(file))
        elif holds_samples(file):
            for given in open_ecgs(file, self._options, on_error=lambda e: _fail(entry, e)):
                entry.read(Chain(given.tracing, None, self._person))
                return
        else:
            self._read_page(entry)

    def _read_page(self, entry: Entry) -> None:
        """The page of an item; a file that holds another after it gets one more entry."""
        item, options = entry.item, self._options_for(entry)
        entry.stage = "page"

        def at_stage(stage: str) -> None:
            entry.stage = stage

        def fail(error: InputError) -> None:
            _fail(entry, error)

        for page in open_pages(item.file, max_megapixels=options.max_megapixels, on_error=fail):
            number = page.source.page
            if number == item.page:
                if item.sha256 not in (None, page.source.sha256):
                    raise UnreadableFile(
                        "its content is no longer what the store read: run digitize archive again"
                    )
                entry.state, entry.message = "reading", ""  # a page before it may have failed
                entry.opened(page)
                from digitize.read import read_or_tell  # it takes a while: the page is shown before

                stages = read_or_tell(page, options, on_error=fail, on_stage=at_stage)
                if stages is not None:
                    entry.read(Chain(stages.tracing, stages, self._person))
                if item.sha256 is not None:
                    return
            elif number > item.page:
                self._follow(page_item(item, number))
                return

    def _follow(self, item: Item) -> None:
        known = {(entry.item.file, entry.item.page) for entry in self.entries}
        if (item.file, item.page) not in known:
            self.entries.append(Entry(item))

    def _options_for(self, entry: Entry) -> Options:
        """What is known of a page: given with the call, in the store, or shown by a person."""
        options, item = self._options, entry.item
        if item.tracing is not None:
            from digitize.tracing_files import read_tracing

            given = read_tracing(item.tracing).options
            order = given.get("lead_order")
            options = Options(
                **{**given, "lead_order": order and tuple(order)}  # JSON has lists alone
            )
        kept = entry.px_per_mm or options.px_per_mm or scale_kept(item.journal)
        return replace(options, px_per_mm=kept and (kept[0], kept[1]))


def _fail(entry: Entry, error: InputError | None) -> None:
    """Say why an entry is of no use; a later page of a file that is ready changes nothing."""
    if entry.state == "ready":
        return
    scale_missing = isinstance(error, NoGrid) and entry.source is not None
    entry.state = "no scale" if scale_missing else "failed"
    entry.message = str(error) if error else "there is no ECG in it"


def _now() -> str:
    """This moment with its zone, to the second."""
    return datetime.datetime.now().astimezone().isoformat(timespec="seconds")
