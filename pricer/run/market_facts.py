"""What the run made of the market snapshot, as plain results for the report."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from datetime import date

from pricer.engines.calibration import Calibration
from pricer.market.checked_surface import CheckedSurface
from pricer.market.curves import DiscountCurve
from pricer.market.dividends import Dividends
from pricer.market.market import Market
from pricer.market.quoted_curves import reprice
from pricer.run.outcome import (
    CreditPoint,
    CurvePoint,
    ForwardPoint,
    FundingPoint,
    MarketFacts,
    QuoteFit,
    SurfaceFacts,
    UnderlyingStanding,
)


def market_facts(
    market: Market,
    used: Iterable[str],
    surfaces: Mapping[str, CheckedSurface],
    calibrations: Mapping[str, Calibration],
    standings: tuple[UnderlyingStanding, ...] = (),
) -> MarketFacts:
    """Facts of the whole market; forwards of the underlyings in ``used`` only, which can be priced.

    ``surfaces`` : those of the market, and flat ones of the used underlyings that have no smile.
    """
    return MarketFacts(
        surfaces=tuple(
            _surface(surface, calibrations.get(name), has_smile=name in market.surfaces)
            for name, surface in sorted(surfaces.items())
        ),
        underlyings=standings,
        curves=tuple(point for _, curve in sorted(market.curves.items()) for point in _curve(curve)),
        forwards=tuple(point for name in sorted(used) for point in _forwards(name, market, calibrations.get(name))),
        credit=tuple(_credit(market)),
        funding=tuple(_funding(market)),
        agreements=tuple(agreement for _, agreement in sorted(market.agreements.items())),
    )


def _surface(checked: CheckedSurface, calibration: Calibration | None, *, has_smile: bool) -> SurfaceFacts:
    simulated = calibration.quotes if calibration is not None else (None,) * len(checked.quotes)
    quotes = tuple(
        QuoteFit(
            underlying=checked.underlying_id,
            expiry_date=quote.expiry_date,
            strike=quote.strike,
            strike_of_forward=quote.relative_strike,
            delta=quote.delta,
            quoted=quote.quoted_volatility,
            fitted=quote.fitted_volatility,
            simulated=None if repriced is None else repriced.value,
            simulated_standard_error=None if repriced is None else repriced.standard_error,
            counts=quote.in_the_middle,
            derived=quote.derived,
        )
        for quote, repriced in zip(checked.quotes, simulated, strict=True)
    )
    worst_first = sorted(checked.violations, key=lambda violation: -violation.size)
    violations = tuple(str(violation) for violation in worst_first)
    return SurfaceFacts(checked.underlying_id, checked.passes, checked.failures, violations, quotes, has_smile)


def _curve(curve: DiscountCurve) -> Iterator[CurvePoint]:
    found = reprice(curve.currency, curve.valuation_date, curve.quotes, curve.discount_factor)
    quotes = {quote.last_date: quote for quote in found}
    for day in curve.dates:
        quote = quotes.get(day)
        yield CurvePoint(
            curve=curve.curve_id,
            currency=curve.currency,
            collateral=curve.collateral,
            date=day,
            zero_rate=curve.zero_rate(day),
            discount_factor=curve.discount_factor(day),
            instrument="" if quote is None else str(quote.quote),
            quoted_rate=None if quote is None else quote.quote.rate,
            repriced_rate=None if quote is None else quote.rate,
        )


def _forwards(name: str, market: Market, calibration: Calibration | None) -> Iterator[ForwardPoint]:
    """On the dates of the volatility quotes and the ex dates up to the last of them."""
    price = market.affine_price(name)
    for day in forward_dates(name, market):
        level = price.at(day)
        mean = None if calibration is None else calibration.means.get(day)
        yield ForwardPoint(
            underlying=name,
            date=day,
            forward=level.forward,
            dividend=_dividend(price.dividends, level.forward, day),
            floor=level.floor,
            simulated=None if mean is None else level.scale * mean.value + level.floor,
            simulated_standard_error=None if mean is None else level.scale * mean.standard_error,
        )


def forward_dates(name: str, market: Market) -> tuple[date, ...]:
    """Dates of the underlying's volatility quotes, and its ex dates up to the last of them."""
    quoted = market.pure_volatility(name).dates
    dividends = market.underlyings[name].dividends
    ex_dates = [*(cash.ex_date for cash in dividends.cash), *(part.ex_date for part in dividends.proportional)]
    return tuple(sorted({*quoted, *(day for day in ex_dates if market.valuation_date < day <= quoted[-1])}))


def _dividend(dividends: Dividends, forward: float, day: date) -> float:
    """What the forward falls by to ``forward`` on ``day`` for cash and proportional dividends; these go first."""
    cash = sum(dividend.amount for dividend in dividends.cash if dividend.ex_date == day)
    kept = 1.0
    for dividend in dividends.proportional:
        if dividend.ex_date == day:
            kept *= 1.0 - dividend.fraction
    return cash + (forward + cash) * (1.0 / kept - 1.0)


def _credit(market: Market) -> Iterator[CreditPoint]:
    for name, curve in sorted(market.credit.items()):
        for day, rate in zip(curve.dates, curve.hazard_rates, strict=True):
            yield CreditPoint(name, day, curve.recovery, rate, curve.survival_probability(day))


def _funding(market: Market) -> Iterator[FundingPoint]:
    if market.funding is None:
        return
    for day in market.funding.borrowing.dates:
        yield FundingPoint(day, market.funding.borrowing.zero_rate(day), market.funding.lending.zero_rate(day))
