"""Corrections as JSON holds them, and back; nothing that is not a correction comes in."""

from collections.abc import Mapping
from dataclasses import asdict, fields
from typing import Any

from measure.overread.corrections import (
    Arrangement,
    BeatUse,
    Boundary,
    ColumnTiming,
    Correction,
    Crop,
    Flip,
    Gain,
    Ignore,
    LeadName,
    Measured,
    PanelEdges,
    Patient,
    Redraw,
    Refused,
    Speed,
    StrikeOut,
    Swap,
    Turn,
)

_KINDS: dict[str, type] = {
    "turn": Turn,
    "arrangement": Arrangement,
    "crop": Crop,
    "ignore": Ignore,
    "lead name": LeadName,
    "swap": Swap,
    "flip": Flip,
    "speed": Speed,
    "gain": Gain,
    "timing": ColumnTiming,
    "panel edges": PanelEdges,
    "strike out": StrikeOut,
    "redraw": Redraw,
    "boundary": Boundary,
    "beat": BeatUse,
    "patient": Patient,
    "measured": Measured,
}
_NAMES = {kind: name for name, kind in _KINDS.items()}


def to_plain(correction: Correction) -> dict[str, Any]:
    """The correction as JSON can hold it, its kind first."""
    return {"kind": _NAMES[type(correction)], **asdict(correction)}


def from_plain(entry: Mapping[str, Any]) -> Correction:
    """The correction that a dictionary describes.

    Raises
    ------
    Refused
        There is no such correction, or it holds what no page can have; the text is fit to show.
    """
    kind = _KINDS.get(str(entry.get("kind")))
    if kind is None:
        raise Refused("there is no such correction")
    values = {key: value for key, value in entry.items() if key != "kind"}
    try:
        given = {
            f.name: _typed(f.type, values.pop(f.name)) for f in fields(kind) if f.name in values
        }
        if values:
            raise TypeError
        return kind(**given)
    except (TypeError, KeyError, OverflowError):
        raise Refused("the correction is not complete") from None


def _typed(kind: Any, value: Any) -> Any:
    """A value of the field's own kind; TypeError where it is another."""
    if kind is float or (kind == float | None and value is not None):
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise TypeError
        return float(value)
    if kind is int or (kind == int | None and value is not None):
        if isinstance(value, bool) or not isinstance(value, int):
            raise TypeError
        return value
    if kind is bool:
        if not isinstance(value, bool):
            raise TypeError
        return value
    if kind == tuple[tuple[float, float], ...]:
        return tuple((_typed(float, x), _typed(float, y)) for x, y in value)
    if kind == tuple[str, ...] | None and value is not None:
        return tuple(_typed(str, name) for name in value)
    if value is not None and not isinstance(value, str):
        raise TypeError
    return value
