"""Results as plain content for JSON: dictionaries, lists, numbers, words and None.

NaN, which JSON does not know, becomes None; a quantity without a value keeps its reason. The same
content gives the same bytes.
"""

import dataclasses
import json
import math
from collections.abc import Mapping
from typing import Any

import numpy as np

from measure.quantity import Quantity

_DECIMALS = 5  # 0.01 microvolt, far below any error here


def json_lines(content: Mapping[str, Any]) -> bytes:
    """JSON with one entry, one lead, one finding to a line."""
    lines = [f"{_compact(k)}: {_in_lines(v)}" for k, v in content.items()]
    return ("{\n" + ",\n".join(lines) + "\n}\n").encode()


def plain(thing: Any) -> Any:
    """Dataclasses, arrays and tuples as dictionaries and lists; NaN as None."""
    if isinstance(thing, Quantity):
        entry = {f.name: plain(getattr(thing, f.name)) for f in dataclasses.fields(thing)}
        return entry if thing.reason else {k: v for k, v in entry.items() if k != "reason"}
    if dataclasses.is_dataclass(thing):
        return {f.name: plain(getattr(thing, f.name)) for f in dataclasses.fields(thing)}
    if isinstance(thing, Mapping):
        return {str(key): plain(value) for key, value in thing.items()}
    if isinstance(thing, np.ndarray):
        return plain(thing.tolist())
    if isinstance(thing, (list, tuple)):
        return [plain(item) for item in thing]
    if isinstance(thing, (float, np.floating)):
        return round(float(thing), _DECIMALS) if math.isfinite(thing) else None
    if isinstance(thing, np.generic):
        return thing.item()
    return thing


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
