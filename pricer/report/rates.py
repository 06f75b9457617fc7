"""Reporting currency per unit of each currency of the book, as the outcome itself implies it."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from pricer.run.outcome import Outcome, Status


@dataclass(frozen=True, slots=True)
class Rates:
    """Reporting currency per unit of currency; the reporting currency itself is always among them."""

    per_unit: Mapping[str, float]

    @classmethod
    def from_outcome(cls, outcome: Outcome) -> Rates:
        """The rates behind the outcome.

        Taken from the underlyings; a currency in which no underlying is quoted (the trade's
        currency of a quanto) from the ratio of a trade's two values, of the largest one for
        the least rounding. A currency that neither source knows is left out.
        """
        per_unit: dict[str, float] = {}
        usable = (v for v in outcome.valuations if v.status is not Status.NOT_PRICED)
        for valuation in sorted(usable, key=lambda v: (-abs(v.value), v.trade_id)):
            if valuation.value != 0.0 and math.isfinite(valuation.reporting_value):
                per_unit.setdefault(valuation.currency, valuation.reporting_value / valuation.value)
        per_unit.update({u.currency: u.to_reporting for u in outcome.underlyings})
        per_unit[outcome.facts.reporting_currency] = 1.0
        return cls(per_unit)

    def reporting(self, amount: float, currency: str) -> float:
        """``amount`` in the reporting currency; NaN where the rate is unknown, except that nothing stays nothing."""
        return 0.0 if amount == 0.0 else self.per_unit.get(currency, math.nan) * amount
