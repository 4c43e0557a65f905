"""A reading on disk: NAME.reading.json, by the schema in `measure/schema/`.

The file holds everything but the samples of the tracing, which stand in NAME.csv and NAME.json.
What could not be measured is `null` with a reason beside it. The same reading gives the same
bytes.
"""

import json
import math
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from digitize import program_version
from digitize.errors import UnreadableFile, at
from measure.plain import json_lines, plain
from measure.quantity import Quantity
from measure.reading import Reading
from measure.wording import NOTICE, ONE_SE

FORMAT = "millivellum reading"
FORMAT_VERSION = 1


def document(reading: Reading) -> dict[str, Any]:
    """The reading as plain dictionaries, lists, numbers, words and None."""
    tracing = reading.tracing
    return plain(
        {
            "format": FORMAT,
            "format_version": FORMAT_VERSION,
            "version": program_version(),
            "notice": f"{NOTICE} {ONE_SE}",
            "source": tracing.source,
            "scale": {
                "speed_mm_s": tracing.speed_mm_s,
                "gain_mm_mv": tracing.gain_mm_mv,
                "layout": tracing.layout,
                "timing": tracing.timing,
            },
            "person": reading.person,
            "rhythm": reading.rhythm,
            "beats": [
                {"time_s": time_s, "kind": kind, "averaged": averaged}
                for time_s, kind, averaged in zip(
                    reading.beats.time_s, reading.beats.kind, reading.beats.dominant, strict=True
                )
            ],
            "intervals": reading.intervals,
            "boundaries": reading.boundaries,
            "waves": reading.waves,
            "beat": _beat(reading),
            "findings": reading.findings,
            "checks": tracing.checks,
            "cautions": reading.cautions,
            "options": tracing.options,
            "corrections": tracing.corrections,
        }
    )


def to_json(reading: Reading) -> bytes:
    """The content of NAME.reading.json."""
    return json_lines(document(reading))


def load_document(path: Path) -> dict[str, Any]:
    """The plain content of a saved reading.

    Raises
    ------
    UnreadableFile
        The file is no reading of this program, or cannot be opened.
    """
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        reason = UnreadableFile(f"it cannot be read as a reading ({error})")
        raise at(reason, path.name) from error
    known = isinstance(content, dict) and content.get("format") == FORMAT
    if not known or content.get("format_version") != FORMAT_VERSION:
        message = (
            "it is no reading that this version knows: give a file of `measure read` that ends in "
            ".reading.json, or read the page again"
        )
        raise at(UnreadableFile(message), path.name)
    return content


def quantity_of(entry: Mapping[str, Any]) -> Quantity:
    """A quantity back from its plain form."""
    value, se = (math.nan if entry[k] is None else float(entry[k]) for k in ("value", "se"))
    leads = tuple(entry["leads"])
    return Quantity(value, se, entry["unit"], leads, entry["beats"], entry.get("reason"))


def _beat(reading: Reading) -> dict[str, Any]:
    """The dominant beat, time counted from its overall QRS onset like every other time here."""
    beat, onset_ms = reading.beat, reading.boundaries.overall.qrs_on_ms.value
    return {
        "fs_hz": beat.fs_hz,
        "start_ms": float(beat.time_ms[0]) - (onset_ms if math.isfinite(onset_ms) else 0.0),
        "beats": dict(zip(beat.leads, beat.beats, strict=True)),
        "mv": dict(zip(beat.leads, beat.mv, strict=True)),
        "se_mv": dict(zip(beat.leads, beat.se_mv, strict=True)),
    }
