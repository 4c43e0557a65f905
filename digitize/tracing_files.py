"""A tracing on disk: NAME.csv with the leads, NAME.json with everything else.

The CSV is for spreadsheets and other programs: one row per 2 ms, one column per lead, each lead at
its printed time, blank where nothing was printed or nothing could be read. The JSON holds every
panel with its own samples and standard errors and says where each value comes from; its form is
described in `schema/tracing.schema.json`. The same tracing gives the same bytes.
"""

import dataclasses
import json
import math
from pathlib import Path
from typing import Any

import numpy as np

from digitize import CAUTION, program_version
from digitize.errors import UnreadableFile, at
from digitize.tracing import FS_HZ, LEADS, Check, Known, PageSource, Panel, Tracing

FORMAT = "millivellum tracing"
FORMAT_VERSION = 1
DECIMALS = 4  # of millivolts: 0.1 microvolt, finer than any pen or recorder
SCHEMA = Path(__file__).parent / "schema" / "tracing.schema.json"

_KNOWN = ("speed_mm_s", "gain_mm_mv", "layout", "timing")


def output_stem(source: PageSource) -> str:
    """Name of a page's results without their endings: `NAME`, and `NAME.p2` for the second page."""
    stem = Path(source.file_name).stem
    return stem if source.page == 1 else f"{stem}.p{source.page}"


def tracing_files(tracing: Tracing, stem: str) -> dict[str, bytes]:
    """File names and contents of a tracing; the JSON last, so that it stands for the pair."""
    return {
        f"{stem}.csv": to_csv(tracing).encode("ascii", "backslashreplace"),
        f"{stem}.json": to_json(tracing).encode("ascii"),
    }


def to_csv(tracing: Tracing) -> str:
    """The leads of a tracing as CSV text.

    The twelve usual leads are always there, further ones follow. A lead that was printed both as a
    short panel and as a rhythm strip takes the strip, unless nothing of the strip could be read.
    """
    names = LEADS + tuple(lead for lead in tracing.leads if lead not in LEADS)
    starts = [round(panel.start_s * FS_HZ) for panel in tracing.panels]
    ends = [start + len(p.mv) for start, p in zip(starts, tracing.panels, strict=True)]
    first = min([0, *starts])
    table = np.full((max([0, *ends]) - first, len(names)), np.nan)
    for column, name in enumerate(names):
        for panel in _panels_for(tracing, name):
            start = round(panel.start_s * FS_HZ) - first
            part = table[start : start + len(panel.mv), column]
            part[:] = np.where(np.isnan(part), panel.mv, part)
    lines = [",".join(("time_s", *names))]
    for k, row in enumerate(table.tolist(), start=first):
        cells = ("" if math.isnan(v) else _number(v) for v in row)
        lines.append(f"{k / FS_HZ:.3f},{','.join(cells)}")
    return "\n".join(lines) + "\n"


def to_json(tracing: Tracing) -> str:
    """A tracing as JSON text, one panel to a line."""
    document = {
        "format": FORMAT,
        "format_version": FORMAT_VERSION,
        "version": program_version(),
        "caution": CAUTION,
        "source": dataclasses.asdict(tracing.source),
        "geometry": tracing.geometry,
        **{name: dataclasses.asdict(getattr(tracing, name)) for name in _KNOWN},
        "panels": [_panel_to_dict(panel) for panel in tracing.panels],
        "checks": [dataclasses.asdict(check) for check in tracing.checks],
        "corrections": tracing.corrections,
        "options": tracing.options,
    }
    entries = []
    for name, value in document.items():
        if isinstance(value, list) and value:
            text = "[\n" + ",\n".join(_dump(item) for item in value) + "\n]"
        else:
            text = _dump(value)
        entries.append(f"{_dump(name)}: {text}")
    return "{\n" + ",\n".join(entries) + "\n}\n"


def read_tracing(path: str | Path) -> Tracing:
    """Return the tracing that was written to a CSV and JSON of one name; either may be given.

    Raises
    ------
    UnreadableFile
        The JSON is missing, damaged or of a later form, or the CSV given no longer agrees with it.
    """
    path = Path(path)
    try:
        tracing = _from_json(_text(path.with_suffix(".json")))
        if path.suffix.lower() == ".csv" and to_csv(tracing) != _text(path):
            raise UnreadableFile(
                "it was changed after it was written and no longer agrees with the JSON beside "
                "it: bring the original back, or give the JSON"
            )
    except UnreadableFile as error:
        raise at(error, path.name) from None
    return tracing


def _panels_for(tracing: Tracing, name: str) -> list[Panel]:
    """The panels that fill a lead's column: its strips where they hold anything, else the rest."""
    panels = [panel for panel in tracing.panels if panel.lead == name]
    strips = [panel for panel in panels if panel.strip and not np.isnan(panel.mv).all()]
    return strips or panels


def _number(value: float) -> str:
    """A value with fixed decimals, without a minus before zero."""
    text = f"{value:.{DECIMALS}f}"
    return text[1:] if text.startswith("-") and float(text) == 0 else text


def _panel_to_dict(panel: Panel) -> dict[str, Any]:
    """A panel with its samples as lists, missing ones as null."""
    return {
        "lead": panel.lead,
        "lead_source": panel.lead_source,
        "strip": panel.strip,
        "row": panel.row,
        "start_s": panel.start_s,
        "fs_hz": panel.fs_hz,
        "box_mm": panel.box_mm,
        "speed": panel.speed_mm_s,
        "gain": panel.gain_mm_mv,
        "notes": panel.notes,
        "mv": _rounded(panel.mv),
        "sigma_mv": _rounded(panel.sigma_mv),
    }


def _rounded(values: np.ndarray) -> list[float | None]:
    """Samples as plain numbers, null where there is none."""
    rounded = np.round(values, DECIMALS) + 0.0  # adding zero turns -0.0 round
    return [value if math.isfinite(value) else None for value in rounded.tolist()]


def _dump(value: Any) -> str:
    return json.dumps(_plain(value), allow_nan=False, separators=(",", ":"))


def _plain(value: Any) -> Any:
    """The value as JSON can hold it: numpy numbers as Python's, what is not finite as null."""
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [_plain(item) for item in value]
    if isinstance(value, (np.ndarray, np.generic)):
        return _plain(value.tolist())
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value


def _text(path: Path) -> str:
    """The file's text."""
    try:
        return path.read_text("ascii")
    except FileNotFoundError:
        raise UnreadableFile(
            f"{path.name} is missing: a tracing is a CSV and a JSON of one name, keep them together"
        ) from None
    except (OSError, UnicodeDecodeError):
        raise UnreadableFile(f"{path.name} cannot be read as a tracing's text") from None


def _from_json(text: str) -> Tracing:
    """The tracing in a JSON text."""
    try:
        document = json.loads(text)
        if document["format"] != FORMAT or document["format_version"] > FORMAT_VERSION:
            raise UnreadableFile(
                "the JSON is not a tracing of this program, or of a later version of it"
            )
        return Tracing(
            source=_source(document["source"]),
            panels=tuple(_panel_from_dict(panel) for panel in document["panels"]),
            **{name: Known(**document[name]) for name in _KNOWN},
            geometry=document["geometry"],
            checks=tuple(
                Check(**{**check, "leads": tuple(check["leads"])}) for check in document["checks"]
            ),
            corrections=tuple(document["corrections"]),
            options=document["options"],
        )
    except (KeyError, TypeError, ValueError, RecursionError):
        raise UnreadableFile("the JSON is damaged, or is not a tracing of this program") from None


def _source(entries: dict[str, Any]) -> PageSource:
    dpi = entries["dpi"]
    return PageSource(**{**entries, "dpi": None if dpi is None else (dpi[0], dpi[1])})


def _panel_from_dict(entries: dict[str, Any]) -> Panel:
    left, top, right, bottom = entries["box_mm"]
    return Panel(
        lead=entries["lead"],
        strip=entries["strip"],
        row=entries["row"],
        start_s=entries["start_s"],
        fs_hz=entries["fs_hz"],
        mv=np.array(entries["mv"], float),  # null becomes NaN
        sigma_mv=np.array(entries["sigma_mv"], float),
        box_mm=(left, top, right, bottom),
        speed_mm_s=entries["speed"],
        gain_mm_mv=entries["gain"],
        lead_source=entries["lead_source"],
        notes=tuple(entries["notes"]),
    )
