"""A price with cash dividends: a known floor and a random part above it.

With cash dividends to come the price cannot fall below their value, so it is no lognormal
variable on every date. It is written as (Buehler 2010)

    S(t) = (F(t) - D(t)) X(t) + D(t),

with F the forward, D the value at t of the cash dividends that go ex after t, and X > 0 a
martingale of mean 1 without dividends or rates. With R(t) the growth of the spot by the
repo or standard curve, yield and proportional dividends, and a_i the cash amounts,

    F(t) - D(t) = R(t) (S(0) - D(0)),    D(t) = R(t) sum over ex dates t_i > t of a_i / R(t_i),

so on an ex date S falls by the cash amount exactly, on every path.

Horizon: every cash dividend of the table counts, up to the last, whatever the expiry of the
trade, so that all trades on an underlying see one process. Dividends far ahead are better
entered as proportional ones or as a yield; as cash they make a large part of the spot riskless.

Volatilities: a call on S at strike K is F - D calls on X at strike (K - D) / (F - D). An
implied volatility quoted for S is thus a price, and that price at the pure strike gives the
volatility of X. The two agree on dates after the last cash dividend, and X's is higher before.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import date

from scipy.special import erf, erfinv

from pricer.market.curves import DiscountCurve
from pricer.market.dividends import Dividends
from pricer.market.volatility import VolatilityCurve


@dataclass(frozen=True, slots=True)
class AffineLevel:
    """A price on one date as ``scale * X + floor``, X positive with mean 1; both in the price's currency."""

    scale: float
    floor: float

    @property
    def forward(self) -> float:
        return self.scale + self.floor

    def pure_strike(self, strike: float) -> float:
        """The strike on X that belongs to ``strike`` on the price; 0 or less where the option is certain."""
        return (strike - self.floor) / self.scale

    def pure_deviation(self, deviation: float) -> float:
        """Standard deviation of log X from that of the log-price, both over the whole time to the date.

        The two give the call at the forward one price: with strike F on S and 1 on X,
        ``F (2 N(s/2) - 1) = (F - D) (2 N(x/2) - 1)`` (Black 1976 on both sides). Raises ValueError
        where that call would be worth more than the random part of the price.
        """
        if self.floor == 0.0:
            return deviation
        root = 2.0 * math.sqrt(2.0)
        share = float(erf(deviation / root)) * self.forward / self.scale
        if share >= 1.0:
            raise ValueError(
                f"a call at the forward {self.forward:.6g} would be worth more than the {self.scale:.6g} by which the "
                f"forward exceeds the cash dividends still to come"
            )
        return root * float(erfinv(share))

    def vega_slope(self, pure_deviation: float) -> float:
        """Derivative of :meth:`pure_deviation`, at the deviation of log X that it gives."""
        if self.floor == 0.0:
            return 1.0
        root = 2.0 * math.sqrt(2.0)
        own = root * float(erfinv(float(erf(pure_deviation / root)) * self.scale / self.forward))
        return self.forward / self.scale * math.exp((pure_deviation**2 - own**2) / 8.0)


@dataclass(frozen=True, slots=True)
class AffinePrice:
    """One underlying's price on all dates. ``cash_values`` are tonight's, of the cash dividends after tonight.

    Made by :meth:`of`, once for many dates.
    """

    spot: float
    dividends: Dividends
    growth_curve: DiscountCurve
    cash_dates: tuple[date, ...]
    cash_values: tuple[float, ...]

    @classmethod
    def of(cls, name: str, spot: float, dividends: Dividends, growth_curve: DiscountCurve) -> AffinePrice:
        """The price of ``name`` from its spot, dividends and the curve at which it grows.

        Raises ValueError if the cash dividends to come are worth the spot or more.
        """
        today = growth_curve.valuation_date
        coming = sorted((d.ex_date, d.amount) for d in dividends.cash if d.ex_date > today and d.amount > 0.0)
        values = tuple(
            amount * growth_curve.discount_factor(day) / dividends.growth(today, day) for day, amount in coming
        )
        if coming and sum(values) >= spot:
            raise ValueError(
                f"the cash dividends of {name} to {coming[-1][0]} are worth {sum(values):.6g} tonight, and its spot is "
                f"{spot:.6g}: a price cannot lie below the dividends it is still to pay"
            )
        return cls(spot, dividends, growth_curve, tuple(day for day, _ in coming), values)

    @property
    def random_spot(self) -> float:
        """The spot less tonight's value of the cash dividends to come: what the random part begins with."""
        return self.spot - sum(self.cash_values)

    @property
    def has_floor(self) -> bool:
        """Whether any cash dividend is still to come."""
        return bool(self.cash_dates)

    def at(self, day: date) -> AffineLevel:
        """Scale and floor on ``day``, after that day's dividends; raises ValueError before the valuation date."""
        growth = self.dividends.growth(self.growth_curve.valuation_date, day)
        discount = self.growth_curve.discount_factor(day)
        later = sum(value for ex, value in zip(self.cash_dates, self.cash_values, strict=True) if ex > day)
        return AffineLevel(self.random_spot * growth / discount, later * growth / discount)

    def pure_volatility(self, volatility: VolatilityCurve) -> VolatilityCurve:
        """Volatilities of X from those of S, matched at the forward on each quoted date.

        The interpolation between quoted dates is X's, because the volatility of S jumps on ex
        dates and X's does not. Raises :class:`~pricer.market.volatility.CalendarArbitrageError` where
        the total variance of X would fall, and ValueError as :meth:`AffineLevel.pure_deviation`.
        """
        if not self.has_floor:
            return volatility
        converted = []
        for day, time in zip(volatility.dates, volatility.times[1:], strict=True):
            root = math.sqrt(time)
            converted.append(self.at(day).pure_deviation(volatility.volatility(day) * root) / root)
        return VolatilityCurve.from_quotes(volatility.valuation_date, volatility.dates, converted)
