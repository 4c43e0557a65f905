"""What is usual in adults: the ranges that stand beside the measured intervals."""

from collections.abc import Mapping
from dataclasses import dataclass

from measure.criteria.decide import Limit
from measure.quantity import Quantity

COMMON = "common practice"
PART_III = "AHA/ACCF/HRS 2009 part III"
PART_IV = "AHA/ACCF/HRS 2009 part IV"


@dataclass(frozen=True)
class Usual:
    """One interval: its name, its usual range in adults and where that comes from."""

    key: str
    label: str
    low: float | None
    high: float | None
    unit: str
    source: str
    high_open: bool = False  # True where the upper bound itself is outside the range

    @property
    def text(self) -> str:
        """The range in words; empty where there is none."""
        if self.low is None and self.high is None:
            return ""
        unit = {"deg": "°", "1/min": "/min"}.get(self.unit, f" {self.unit}")
        if self.low is None:
            return f"{'below' if self.high_open else 'up to'} {self.high:g}{unit}"
        low, high = (f"{bound:g}".replace("-", "\N{MINUS SIGN}") for bound in (self.low, self.high))
        return f"{low} to {high}{unit}"

    def place(self, quantity: Quantity) -> str:
        """Where a value lies: "within", "above", "below", "at the limit", or "" without one."""
        if not quantity.known or (self.low is None and self.high is None):
            return ""
        sign = ">=" if self.high_open else ">"
        sides = {}
        if self.high is not None:
            over = Limit(sign, self.high, self.unit)  # type: ignore[arg-type]
            sides["above"] = over.judge(quantity.value, quantity.se)
        if self.low is not None:
            sides["below"] = Limit("<", self.low, self.unit).judge(quantity.value, quantity.se)
        for name, result in sides.items():
            if result == "met":
                return name
        return "at the limit" if "undecided" in sides.values() else "within"


def usual(sex: str | None) -> Mapping[str, Usual]:
    """Ranges by key of the interval; those of QTc follow the sex, the narrower where unknown."""
    qtc_ms = 460.0 if sex == "female" else 450.0
    who = {"female": "women", "male": "men"}.get(sex or "", "men; women 460")
    qtc = {
        f"qtc_{name}_ms": (f"QTc {title}", None, qtc_ms, "ms", f"{PART_IV}, {who}", True)
        for name, title in (
            ("bazett", "Bazett"),
            ("fridericia", "Fridericia"),
            ("framingham", "Framingham"),
            ("hodges", "Hodges"),
        )
    }
    rows: dict[str, tuple[str, float | None, float | None, str, str, bool]] = {
        "rate_bpm": ("Rate", 60, 100, "1/min", COMMON, False),
        "rr_ms": ("RR", 600, 1000, "ms", COMMON, False),
        "p_ms": ("P", None, 120, "ms", COMMON, True),
        "pr_ms": ("PR", 120, 200, "ms", COMMON, False),
        "qrs_ms": ("QRS", None, 110, "ms", PART_III, False),
        "qt_ms": ("QT", None, None, "ms", "", False),
        "jt_ms": ("JT (QT less QRS)", None, None, "ms", "", False),
        **qtc,
        "p_axis_deg": ("P axis", 0, 75, "deg", COMMON, False),
        "qrs_axis_deg": ("QRS axis", -30, 90, "deg", PART_III, False),
        "t_axis_deg": ("T axis", None, None, "deg", "", False),
    }
    return {key: Usual(key, *row) for key, row in rows.items()}
