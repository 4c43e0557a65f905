"""What a run over an archive has to do, settled before anything is read."""

import hashlib
import json
from dataclasses import asdict, dataclass, field
from pathlib import Path

from digitize.archive.catalogue import FAILED, Catalogue
from digitize.archive.sources import Source, find_files, identify
from digitize.errors import InputError
from digitize.options import Options


@dataclass
class Plan:
    """The contents to read, and how many files need nothing."""

    options: str
    todo: list[Source] = field(default_factory=list)
    unreadable: list[InputError] = field(default_factory=list)
    known: int = 0
    doubled: int = 0
    other_options: int = 0

    def __str__(self) -> str:
        """What will be done, in one line."""
        text = f"{len(self.todo)} files to read, {self.known} done before"
        if self.doubled:
            text += f", {self.doubled} of the same content as another"
        if self.other_options:
            text += f"; {self.other_options} were read with other options and are read anew"
        if self.unreadable:
            text += f"; {len(self.unreadable)} cannot be opened"
        return text


def make_plan(
    folders: list[Path], options: Options, catalogue: Catalogue, *, again_failed: bool = False
) -> Plan:
    """Settle what is to do; the sources are hashed where they were not seen before."""
    plan = Plan(options_key(options))
    met: set[str] = set()
    for path in find_files(folders):
        for found in identify(path, catalogue):
            if isinstance(found, InputError):
                plan.unreadable.append(found)
                continue
            if found.sha256 in met:
                plan.doubled += 1
                continue
            met.add(found.sha256)
            statuses = catalogue.pages_of(found.sha256, plan.options).values()
            if again_failed and FAILED in statuses:
                catalogue.forget_failed(found.sha256, plan.options)
            if catalogue.is_done(found.sha256, plan.options):
                plan.known += 1
                continue
            plan.other_options += bool(catalogue.options_of(found.sha256) - {plan.options})
            plan.todo.append(found)
    return plan


def options_key(options: Options) -> str:
    """A short name for the options that change a result: not the limit, which only refuses."""
    values = {k: v for k, v in asdict(options).items() if k != "max_megapixels"}
    text = json.dumps(values, sort_keys=True)
    return hashlib.sha256(text.encode()).hexdigest()[:16]
