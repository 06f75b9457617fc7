"""What local volatility makes of the book that lognormal levels do not: the model difference, trade by trade."""

from __future__ import annotations

from dataclasses import dataclass

from pricer.report.rates import Rates
from pricer.report.sums import ratio
from pricer.report.totals import priced
from pricer.run.outcome import Outcome, Valuation


@dataclass(frozen=True, slots=True)
class ModelDifference:
    """One trade's value under local volatility less that under lognormal levels.

    ``difference`` and ``standard_error`` in the reporting currency, ``difference_bp`` in basis points of notional.
    """

    valuation: Valuation
    difference: float
    standard_error: float
    difference_bp: float


def model_difference_bp(valuation: Valuation) -> float | None:
    """The difference in basis points of the trade's notional; None where only one model was used."""
    difference = valuation.model_difference
    return None if difference is None else 1e4 * ratio(difference, abs(valuation.notional))


def model_differences(outcome: Outcome) -> list[ModelDifference]:
    """Those of the priced trades that were valued under both models, largest first; one that is no number leads."""
    rates = Rates.from_outcome(outcome)
    found = [
        ModelDifference(
            valuation=v,
            difference=rates.reporting(v.model_difference, v.currency),
            standard_error=rates.reporting(v.model_difference_standard_error or 0.0, v.currency),
            difference_bp=1e4 * ratio(v.model_difference, abs(v.notional)),
        )
        for v in priced(outcome)
        if v.model_difference is not None
    ]
    return sorted(found, key=lambda each: (each.difference == each.difference, -abs(each.difference)))
