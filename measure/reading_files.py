"""A reading on disk: NAME.reading.json, by the schema in `measure/schema/`.

The file holds everything but the samples of the tracing, which stand in NAME.csv and NAME.json.
What could not be measured is `null` with a reason beside it. The same reading gives the same
bytes.
"""

import dataclasses
import json
import math
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from digitize import program_version
from digitize.errors import UnreadableFile
from measure.quantity import Quantity
from measure.reading import Reading
from measure.wording import NOTICE, ONE_SE

FORMAT = "millivellum reading"
FORMAT_VERSION = 1
_DECIMALS = 5  # 0.01 microvolt, far below any error here


def document(reading: Reading) -> dict[str, Any]:
    """The reading as plain dictionaries, lists, numbers, words and None."""
    tracing = reading.tracing
    return _plain(
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
    """The content of NAME.reading.json: one entry, one lead, one finding to a line."""
    lines = [f"{json.dumps(k)}: {_in_lines(v)}" for k, v in document(reading).items()]
    return ("{\n" + ",\n".join(lines) + "\n}\n").encode()


def load_document(path: Path) -> dict[str, Any]:
    """The plain content of a saved reading.

    Raises
    ------
    UnreadableFile
        The file is no reading of this program, or cannot be opened.
    """
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError, json.JSONDecodeError) as error:
        raise UnreadableFile(f"{path}: cannot be read as a reading ({error}).") from error
    known = isinstance(content, dict) and content.get("format") == FORMAT
    if not known or content.get("format_version") != FORMAT_VERSION:
        raise UnreadableFile(
            f"{path}: is no reading that this version knows; give the file of `measure read` that "
            "ends in .reading.json, or read the page again."
        )
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


def _in_lines(value: Any) -> str:
    """The members of a list or dictionary, each on a line of its own."""
    if isinstance(value, dict) and value:
        members = [f"{_compact(k)}: {_compact(v)}" for k, v in value.items()]
        return "{\n " + ",\n ".join(members) + "\n}"
    if isinstance(value, list) and value:
        return "[\n " + ",\n ".join(_compact(item) for item in value) + "\n]"
    return _compact(value)


def _compact(value: Any) -> str:
    return json.dumps(value, ensure_ascii=False, allow_nan=False)


def _plain(thing: Any) -> Any:
    """Dataclasses, arrays and tuples as dictionaries and lists; NaN as None."""
    if isinstance(thing, Quantity):
        entry = {f.name: _plain(getattr(thing, f.name)) for f in dataclasses.fields(thing)}
        return entry if thing.reason else {k: v for k, v in entry.items() if k != "reason"}
    if dataclasses.is_dataclass(thing):
        return {f.name: _plain(getattr(thing, f.name)) for f in dataclasses.fields(thing)}
    if isinstance(thing, Mapping):
        return {str(key): _plain(value) for key, value in thing.items()}
    if isinstance(thing, np.ndarray):
        return _plain(thing.tolist())
    if isinstance(thing, (list, tuple)):
        return [_plain(item) for item in thing]
    if isinstance(thing, (float, np.floating)):
        return round(float(thing), _DECIMALS) if math.isfinite(thing) else None
    if isinstance(thing, np.generic):
        return thing.item()
    return thing
