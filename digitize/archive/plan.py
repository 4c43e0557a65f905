"""What a run over an archive has to do, settled before anything is read."""

import hashlib
import json
import os
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, field
from pathlib import Path

from digitize.archive.catalogue import FAILED, Catalogue, Chart
from digitize.archive.charts import Charts
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
    charted: int = 0
    doubts: list[str] = field(default_factory=list)

    def __str__(self) -> str:
        """What will be done, in one line."""
        text = f"{len(self.todo)} files to read, {self.known} done before"
        if self.doubled:
            text += f", {self.doubled} of the same content as another"
        if self.other_options:
            text += f"; {self.other_options} were read with other options and are read anew"
        if self.charted:
            text += f"; a patient or a date is known of {self.charted}"
        if self.unreadable:
            text += f"; {len(self.unreadable)} cannot be opened"
        return text


def make_plan(
    folders: list[Path],
    options: str,
    catalogue: Catalogue,
    charts: Charts | None = None,
    *,
    again_failed: bool = False,
) -> Plan:
    """Settle what is to do; the sources are hashed where they were not seen before.

    Parameters
    ----------
    folders : list of Path
        Where the sources are.
    options : str
        From `options_key`.
    catalogue : Catalogue
        Takes where each content was met, and what `charts` says of it.
    charts : Charts, optional
        Whose the sources are; without them what was said before stays.
    again_failed : bool
        Whether to take up again what failed before.
    """
    plan = Plan(options)
    said: dict[str, list[Mapping[int, Chart]]] = {}
    for path in find_files(folders):
        refused: list[str] = []
        for found in identify(path, catalogue):
            if isinstance(found, InputError):
                plan.unreadable.append(found)
                refused.append(str(found))
                continue
            charted = {} if charts is None else charts.of(found)
            if found.sha256 in said:
                plan.doubled += 1
            else:
                said[found.sha256] = []
                _add(plan, found, catalogue, again_failed=again_failed)
            said[found.sha256] += [charted] if charted else []
        catalogue.set_refused(os.fsencode(path.resolve()), refused)
    if charts is not None:
        plan.doubts += charts.doubts()
        for sha256, all_said in said.items():
            _keep_charts(plan, sha256, all_said, catalogue)
    return plan


def _add(plan: Plan, source: Source, catalogue: Catalogue, *, again_failed: bool) -> None:
    """A content that is to be read, unless that was done."""
    statuses = catalogue.pages_of(source.sha256, plan.options).values()
    if again_failed and FAILED in statuses:
        catalogue.forget_failed(source.sha256, plan.options)
    if catalogue.is_done(source.sha256, plan.options):
        plan.known += 1
        return
    plan.other_options += bool(catalogue.options_of(source.sha256) - {plan.options})
    plan.todo.append(source)


def _keep_charts(
    plan: Plan, sha256: str, said: list[Mapping[int, Chart]], catalogue: Catalogue
) -> None:
    """What is said of a content, where all its names say the same."""
    if any(other != said[0] for other in said):
        plan.doubts.append(
            f"{len(said)} files of the same content ({sha256[:12]}) are said to be of different "
            "patients or days: none of it is taken"
        )
        said = []
    catalogue.set_charts(sha256, said[0] if said else {})
    plan.charted += bool(said)


def options_key(options: Options, header: Sequence[str] | None = None) -> str:
    """A short name for the options that change a result: not the limit, which only refuses.

    `header` are the patterns for the header where that is kept, else None.
    """
    values = {k: v for k, v in asdict(options).items() if k != "max_megapixels"}
    if header is not None:
        values["header"] = list(header)
    text = json.dumps(values, sort_keys=True)
    return hashlib.sha256(text.encode()).hexdigest()[:16]
