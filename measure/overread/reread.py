"""The stages before the panels once more: page turn, arrangement, what is unseen.

A turn leads through every stage; a crop or another arrangement through layout and trace; a region
that is ignored through the trace beside it alone. Each comes to its stage as an input of it.
"""

from collections.abc import Sequence
from dataclasses import asdict, replace

from digitize.ink import Ink
from digitize.options import Options
from digitize.read import Stages, read_ink, read_part, read_turned
from digitize.sheet import Box
from digitize.unseen import hide, hide_around
from measure.overread.corrections import ARRANGING, Arrangement, Correction, Crop, Ignore, Turn


def corrected_stages(stages: Stages, corrections: Sequence[Correction]) -> Stages:
    """Return the stages of a page with the corrections of page, ink and arrangement applied.

    The layout is found in the ink as it was when the panels were last arranged; a region that is
    ignored later hides ink from the trace alone, so that the panels stay what they are.

    Raises
    ------
    InputError
        Nothing can be read that way.
    """
    last = max((k for k, c in enumerate(corrections) if isinstance(c, ARRANGING)), default=-1)
    arranged, later = corrections[: last + 1], corrections[last + 1 :]
    for correction in arranged:
        if isinstance(correction, Turn):
            stages = _turned(stages, correction.turn_deg)
    if any(not isinstance(correction, Turn) for correction in arranged):
        stages = _arranged(stages, arranged)
    for correction in later:
        if isinstance(correction, Ignore):
            stages = read_part(stages, _masked(stages.ink, correction), _box(correction))
    return stages


def _turned(stages: Stages, turn_deg: int) -> Stages:
    """The page read once more, upright after this turn of the page as it was given."""
    found = stages.tracing
    further_deg = (turn_deg - found.geometry["turn_deg"]) % 360
    if not further_deg:
        return stages
    options = _options(stages)
    return _placed(read_turned(stages.page, further_deg, options), stages, turn_deg)


def _arranged(stages: Stages, corrections: Sequence[Correction]) -> Stages:
    """Layout and trace once more, in the ink that is left."""
    ink, options = stages.ink, _options(stages)
    for correction in corrections:
        if isinstance(correction, (Crop, Ignore)):
            ink = _masked(ink, correction)
        elif isinstance(correction, Arrangement):
            names = correction.lead_order
            options = replace(options, layout=correction.layout, lead_order=names)
    return _placed(read_ink(stages, ink, options), stages, stages.tracing.geometry["turn_deg"])


def _masked(ink: Ink, correction: Crop | Ignore) -> Ink:
    box = _box(correction)
    return hide_around(ink, box) if isinstance(correction, Crop) else hide(ink, box)


def _box(correction: Crop | Ignore) -> Box:
    return Box(*asdict(correction).values())


def _options(stages: Stages) -> Options:
    """What was given with the file; its turn is in the page already."""
    return replace(Options(**stages.tracing.options), turn_deg=None)


def _placed(again: Stages, before: Stages, turn_deg: int) -> Stages:
    """The stages under the source and the options of the file, which a person did not change."""
    found = before.tracing
    tracing = replace(
        again.tracing,
        source=found.source,
        options=found.options,
        geometry={**again.tracing.geometry, "turn_deg": turn_deg},
    )
    return replace(again, tracing=tracing)
