"""One underlying as tonight's market knows it."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

from pricer.market.calendars import is_calendar
from pricer.market.dividends import Dividends
from pricer.market.volatility import VolatilityCurve


@dataclass(frozen=True, slots=True)
class Underlying:
    """A share or index: ``spot`` in ``currency``, traded in multiples of ``lot_size`` on ``calendar``'s days.

    ``volatility`` is None where the market has none; such an underlying has a forward but
    no option can be priced on it.
    """

    underlying_id: str
    currency: str
    spot: float
    calendar: str
    lot_size: float = 1.0
    dividends: Dividends = field(default_factory=Dividends)
    volatility: VolatilityCurve | None = None

    def __post_init__(self) -> None:
        for name, value in (("spot", self.spot), ("lot size", self.lot_size)):
            if not (math.isfinite(value) and value > 0.0):
                raise ValueError(f"the {name} of {self.underlying_id} must be above 0; got {value}")
        if not is_calendar(self.calendar):
            raise ValueError(f'"{self.calendar}" is not a calendar')
