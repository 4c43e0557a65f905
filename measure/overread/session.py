"""One ECG on the over-read page: the list of corrections, its journal, its signatures.

The journal, NAME.overread.json, holds nothing but what a person did. It is replaced as a whole
after every step, so that a killed browser or server loses none that was answered. A signature is
added to it and never replaced; it belongs to the corrections that were in force, and any later
step leaves the record unsigned until someone signs again.
"""

import json
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from digitize import program_version
from digitize.errors import CannotWrite, InputError, UnreadableFile, at
from digitize.safe_write import write_files
from measure.overread.chain import Chain
from measure.overread.corrections import Correction, Refused
from measure.overread.corrections_json import from_plain, to_plain
from measure.plain import json_lines, plain
from measure.reading import Reading
from measure.wording import NOTICE

if TYPE_CHECKING:
    from digitize.read import Stages

FORMAT = "millivellum overread"
FORMAT_VERSION = 1
LONGEST_TEXT = 2000
LONGEST_PERSON = 120
UNSIGNED = "Not signed: no clinician has put a name to this reading."
# What arithmetic under an unforeseen correction can raise: LinAlgError is a ValueError.
_FAULTS = (ArithmeticError, LookupError, TypeError, ValueError)


@dataclass(frozen=True)
class Step:
    """One correction with who made it and when, as ISO 8601 with its zone."""

    correction: Correction
    who: str
    when: str

    @property
    def plain(self) -> dict[str, Any]:
        """The step as JSON holds it."""
        return {**to_plain(self.correction), "who": self.who, "when": self.when}


class Session:
    """The over-reading of one ECG.

    Every change is checked by computing the reading under it; one that cannot be computed is
    refused and changes nothing.
    """

    def __init__(self, chain: Chain, journal: Path, now: Callable[[], str]) -> None:
        """Take up an earlier over-reading where its journal stands.

        Raises
        ------
        UnreadableFile
            The journal is damaged or belongs to another page.
        """
        self.chain = chain
        self.automatic = chain.reading()
        self.steps: tuple[Step, ...] = ()
        self.undone: tuple[Step, ...] = ()
        self.signatures: tuple[dict[str, Any], ...] = ()
        self.revision = 0  # what a page shows is current while this is the same
        self._journal = journal
        self._now = now
        if journal.is_file():
            self._resume()

    @property
    def signed(self) -> dict[str, Any] | None:
        """The last signature, where nothing was changed after it."""
        last = self.signatures[-1] if self.signatures else None
        return last if last and last["corrections"] == [s.plain for s in self.steps] else None

    def reading(self) -> Reading:
        """The reading under all corrections; it says who signed it, or that nobody has."""
        return self._stamped(self._computed(self.steps))

    def stages(self) -> "Stages | None":
        """The stages of the page under all corrections, None where there is no page."""
        return self.chain.stages([step.correction for step in self.steps])

    def correct(self, correction: Correction, who: str) -> None:
        """Add a correction.

        Raises
        ------
        Refused
            It cannot be applied.
        CannotWrite
            The journal cannot be written; nothing is changed then.
        """
        step = Step(correction, _text(who, LONGEST_PERSON), self._now())
        self._become((*self.steps, step), ())

    def undo(self) -> None:
        """Take back the last correction that is in force."""
        if not self.steps:
            raise Refused("there is nothing to undo")
        self._become(self.steps[:-1], (*self.undone, self.steps[-1]))

    def redo(self) -> None:
        """Put the correction last undone in force again."""
        if not self.undone:
            raise Refused("there is nothing to redo")
        self._become((*self.steps, self.undone[-1]), self.undone[:-1])

    def sign(self, name: str, comment: str) -> None:
        """Add a signature under the reading as it is now, beside the automatic one."""
        name = _text(name, LONGEST_PERSON).strip()
        if not name:
            raise Refused("type your name to sign")
        reading, source = self._computed(self.steps), self.automatic.tracing.source
        signature = {
            "name": name,
            "comment": _text(comment, LONGEST_TEXT),
            "when": self._now(),
            "page_sha256": source.sha256,
            "page": source.page,
            "version": program_version(),
            "corrections": [step.plain for step in self.steps],
            "automatic": _result(self.automatic),
            "signed": _result(reading),
        }
        self._become(self.steps, self.undone, (*self.signatures, signature))

    def _become(
        self,
        steps: tuple[Step, ...],
        undone: tuple[Step, ...],
        signatures: tuple[dict[str, Any], ...] | None = None,
    ) -> None:
        """Compute, write, and only then be what was asked for."""
        self._computed(steps)
        signatures = self.signatures if signatures is None else signatures
        try:
            content = self._content(steps, undone, signatures)
            write_files({self._journal: json_lines(content)}, replace=True)
        except CannotWrite as error:
            raise at(error, self._journal.name) from None
        self.steps, self.undone, self.signatures = steps, undone, signatures
        self.revision += 1

    def _computed(self, steps: tuple[Step, ...]) -> Reading:
        try:
            return self.chain.reading([step.correction for step in steps])
        except (Refused, InputError):
            raise
        except _FAULTS as fault:
            raise Refused(
                f"the program failed under this correction ({type(fault).__name__}): it was not "
                "taken; please report it"
            ) from fault

    def _stamped(self, reading: Reading) -> Reading:
        """The reading with its corrections and its signature, for every output."""
        signed = self.signed
        word = f"Signed by {signed['name']}, {signed['when']}." if signed else UNSIGNED
        steps = tuple(step.plain for step in self.steps)
        tracing = replace(reading.tracing, corrections=plain(steps))
        return replace(reading, tracing=tracing, cautions=(word, *reading.cautions))

    def _content(
        self,
        steps: tuple[Step, ...],
        undone: tuple[Step, ...],
        signatures: tuple[dict[str, Any], ...],
    ) -> dict[str, Any]:
        return {
            "format": FORMAT,
            "format_version": FORMAT_VERSION,
            "version": program_version(),
            "notice": NOTICE,
            "source": plain(self.automatic.tracing.source),
            "px_per_mm": plain(self.automatic.tracing.options.get("px_per_mm")),
            "corrections": [plain(step.plain) for step in steps],
            "undone": [plain(step.plain) for step in undone],
            "signatures": list(signatures),
        }

    def _resume(self) -> None:
        """Take over what the journal holds."""
        try:
            content = json.loads(self._journal.read_text(encoding="utf-8"))
            if content["format"] != FORMAT or content["format_version"] > FORMAT_VERSION:
                raise ValueError
            source = self.automatic.tracing.source
            if (content["source"]["sha256"], content["source"]["page"]) != (
                source.sha256,
                source.page,
            ):
                message = "it belongs to another page: move it away, or give the page it belongs to"
                raise at(UnreadableFile(message), self._journal.name)
            self.steps = tuple(_step(entry) for entry in content["corrections"])
            self.undone = tuple(_step(entry) for entry in content["undone"])
            self.signatures = tuple(content["signatures"])
            self._computed(self.steps)
        except (OSError, ValueError, KeyError, TypeError):
            message = "it cannot be read as an over-reading: move it away to begin anew"
            raise at(UnreadableFile(message), self._journal.name) from None


def scale_kept(journal: Path) -> tuple[float, float] | None:
    """The scale that a person gave to a page without grid when its journal was begun."""
    try:
        across, down = json.loads(journal.read_text(encoding="utf-8"))["px_per_mm"]
        return float(across), float(down)
    except (OSError, ValueError, KeyError, TypeError):
        return None  # none was given; what is wrong with a journal is said when it is taken up


def _step(entry: Mapping[str, Any]) -> Step:
    values = {k: v for k, v in entry.items() if k not in ("who", "when")}
    return Step(from_plain(values), str(entry["who"]), str(entry["when"]))


def _result(reading: Reading) -> dict[str, Any]:
    """What a signature stands under: intervals and the result of every definition."""
    return {
        "intervals": plain(reading.intervals),
        "findings": {finding.key: finding.result for finding in reading.findings},
    }


def _text(text: str, longest: int) -> str:
    """What a person typed, on one line for a name, without control characters."""
    if len(text) > longest:
        raise Refused(f"this text is too long: {len(text)} characters, {longest} at most")
    return "".join(c for c in text if c.isprintable() or c == "\n")
