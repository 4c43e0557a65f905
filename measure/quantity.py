"""A measured number: never without its uncertainty, its leads and its beats."""

import math
from dataclasses import dataclass


@dataclass(frozen=True)
class Quantity:
    """A value with its standard error, or the reason why there is none.

    `value` is NaN exactly where `reason` is given. `se` is one standard error in the same unit.
    """

    value: float
    se: float
    unit: str  # "ms", "mV", "deg", "1/min", "mV ms"
    leads: tuple[str, ...] = ()
    beats: int = 0
    reason: str | None = None

    @property
    def known(self) -> bool:
        """True where there is a value."""
        return not math.isnan(self.value)


def missing(unit: str, reason: str) -> Quantity:
    """A quantity that could not be measured, with the reason in words."""
    return Quantity(math.nan, math.nan, unit, reason=reason)
