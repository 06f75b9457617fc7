"""Hazard rates and survival probabilities of a name, from its credit default swaps."""

from __future__ import annotations

import math
from bisect import bisect_left
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date
from itertools import pairwise

import QuantLib as ql  # noqa: N813 - the short name of QuantLib's own examples

from pricer.market.calendars import from_quantlib, to_period, to_quantlib, year_fraction
from pricer.market.curves import DiscountCurve
from pricer.market.evaluation_date import evaluation_date

#: A bootstrap that misses a quoted spread by more than this is refused.
SPREAD_TOLERANCE = 1e-10


@dataclass(frozen=True, slots=True)
class HazardCurve:
    """Piecewise constant hazard rates of ``name``, and its ``recovery`` as a fraction of the claim.

    ``hazard_rates`` hold from one date to the next, per ACT/365F year, the first from the
    valuation date and the last also beyond its date. ``times`` begin with 0.
    """

    name: str
    valuation_date: date
    recovery: float
    dates: tuple[date, ...]
    times: tuple[float, ...]
    hazard_rates: tuple[float, ...]

    @classmethod
    def from_hazard_rates(
        cls, name: str, valuation_date: date, recovery: float, dates: Sequence[date], hazard_rates: Sequence[float]
    ) -> HazardCurve:
        """From the hazard rate up to each date, per ACT/365F year.

        Raises ValueError unless recovery is from 0 to below 1, dates increase strictly after the
        valuation date, and rates are finite and not negative, one per date.
        """
        if not 0.0 <= recovery < 1.0:
            raise ValueError(f"credit {name}: the recovery must be a fraction from 0 to below 1; got {recovery}")
        if not dates or len(dates) != len(hazard_rates):
            raise ValueError(f"credit {name}: {len(dates)} dates for {len(hazard_rates)} hazard rates")
        for earlier, later in pairwise((valuation_date, *dates)):
            if later <= earlier:
                raise ValueError(
                    f"credit {name}: dates must increase and lie after the valuation date; {later} follows {earlier}"
                )
        for day, rate in zip(dates, hazard_rates, strict=True):
            if not (math.isfinite(rate) and rate >= 0.0):
                raise ValueError(f"credit {name}: the hazard rate to {day} must be a number from 0 up; got {rate:g}")
        times = (0.0, *(year_fraction(valuation_date, day) for day in dates))
        return cls(name, valuation_date, recovery, tuple(dates), times, tuple(hazard_rates))

    @classmethod
    def from_cds_spreads(
        cls, name: str, discount: DiscountCurve, recovery: float, tenors: Sequence[str], spreads: Sequence[float]
    ) -> HazardCurve:
        """From running spreads at which the name's swaps are worth nothing, e.g. 0.012 for 120 bp.

        Standard conventions (common practice): premiums each quarter on the 20th, ACT/360, rolled
        to weekdays, maturities of the 2015 rule (June and December), protection from the
        valuation date, accrued premium paid at default; valued as the ISDA standard model does. ``discount``
        is taken at its quoted dates, log-linear in ACT/365F between them.

        Raises ValueError for recoveries, tenors and spreads out of range, two tenors that end on
        one date, and spreads that no hazard rates between 0 and 1 satisfy, naming the first.
        """
        if not tenors or len(tenors) != len(spreads):
            raise ValueError(f"credit {name}: {len(tenors)} tenors for {len(spreads)} spreads")
        if not 0.0 <= recovery < 1.0:
            raise ValueError(f"credit {name}: the recovery must be a fraction from 0 to below 1; got {recovery}")
        for tenor, spread in zip(tenors, spreads, strict=True):
            if not (math.isfinite(spread) and spread > 0.0):
                raise ValueError(f"credit {name}: the spread of {tenor} must be above 0; got {spread}")
            period = to_period(tenor)
            if period.units() not in (ql.Months, ql.Years) or (period.units() == ql.Months and period.length() % 3):
                raise ValueError(f"credit {name}: premiums are paid each quarter, which {tenor} does not hold")
        dates, survival = _bootstrap(name, discount, recovery, tenors, spreads)
        times = [year_fraction(discount.valuation_date, day) for day in dates]
        logs = [math.log(probability) for probability in survival]
        spans = zip(pairwise((0.0, *times)), pairwise((0.0, *logs)), strict=True)
        return cls.from_hazard_rates(
            name, discount.valuation_date, recovery, dates, [(x - y) / (t - s) for (s, t), (x, y) in spans]
        )

    @property
    def last_date(self) -> date:
        """The last quoted date."""
        return self.dates[-1]

    def is_extrapolated(self, day: date) -> bool:
        """Whether ``day`` lies beyond the last quoted date."""
        return day > self.last_date

    def survival_probability(self, day: date) -> float:
        """Probability of no default up to and including ``day``; raises ValueError before the valuation date."""
        if day < self.valuation_date:
            raise ValueError(f"credit {self.name}: {day} lies before the valuation date {self.valuation_date}")
        end = year_fraction(self.valuation_date, day)
        hazard = 0.0
        for (start, stop), rate in zip(pairwise(self.times), self.hazard_rates, strict=True):
            hazard += rate * (min(stop, end) - start)
            if end <= stop:
                return math.exp(-hazard)
        return math.exp(-hazard - self.hazard_rates[-1] * (end - self.times[-1]))

    def hazard_rate(self, day: date) -> float:
        """The hazard rate in force on ``day``, per ACT/365F year; on a quoted date, the one that ends there."""
        index = bisect_left(self.dates, day)
        return self.hazard_rates[min(index, len(self.hazard_rates) - 1)]


def _bootstrap(
    name: str, discount: DiscountCurve, recovery: float, tenors: Sequence[str], spreads: Sequence[float]
) -> tuple[list[date], list[float]]:
    """Survival probabilities at the swaps' last dates."""
    today = discount.valuation_date
    with evaluation_date(today):
        nodes = [to_quantlib(day) for day in (today, *discount.dates)]
        factors = [math.exp(log) for log in discount.log_discount_factors]
        rates = ql.DiscountCurve(nodes, factors, ql.Actual365Fixed())
        rates.enableExtrapolation()
        handle = ql.YieldTermStructureHandle(rates)
        helpers = [
            ql.SpreadCdsHelper(
                spread, to_period(tenor), 0, ql.WeekendsOnly(), ql.Quarterly, ql.Following,
                ql.DateGeneration.CDS2015, ql.Actual360(), recovery, handle, True, True, ql.Date(), ql.Actual360(True),
                True, ql.CreditDefaultSwap.ISDA,
            )
            for tenor, spread in zip(tenors, spreads, strict=True)
        ]  # fmt: skip
        made = sorted(zip(helpers, tenors, spreads, strict=True), key=lambda item: item[0].pillarDate())
        for (before, one, _), (after, other, _) in pairwise(made):
            if before.pillarDate() == after.pillarDate():
                raise ValueError(
                    f"credit {name}: {one} and {other} both end on {from_quantlib(after.pillarDate())}: keep one"
                )
        for count in range(1, len(made) + 1):
            curve = ql.PiecewiseFlatHazardRate(
                to_quantlib(today), [item[0] for item in made[:count]], ql.Actual365Fixed()
            )
            helper, tenor, spread = made[count - 1]
            try:
                days = curve.dates()
                missed = abs(helper.impliedQuote() - spread)
            except RuntimeError as error:
                raise ValueError(_unsatisfied(name, tenor, spread)) from error
            if missed > SPREAD_TOLERANCE:
                raise ValueError(_unsatisfied(name, tenor, spread))
        return [from_quantlib(day) for day in days][1:], [float(curve.survivalProbability(day)) for day in days][1:]


def _unsatisfied(name: str, tenor: str, spread: float) -> str:
    return (
        f"credit {name}: no hazard rate between 0 and 1 a year satisfies the spread {1e4 * spread:.4g} bp of {tenor} "
        "after the spreads before it"
    )
