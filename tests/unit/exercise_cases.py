"""Contracts with a right to exercise, on a small flat market, that several tests share."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.exercise import Exercise, ExercisedBy, ExerciseStyle
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.engines.contract_exercise import ExerciseSettings, exercise_value
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.early_exercise.certificate import CertificateSettings
from pricer.engines.early_exercise.fitting import FitSettings
from pricer.engines.model_value import Asked, ModelValue
from pricer.market.curves import DiscountCurve
from pricer.market.dividends import Dividends
from pricer.market.standing import standing
from pricer.market.volatility import VolatilityCurve
from tests.unit.markets import TODAY, small_market

#: Standard errors by which an estimate may differ from the truth, in a few dozen checks.
SURE = 4.0

#: Some tenths of a per cent in some tenths of a second.
SMALL = ExerciseSettings(
    gap=1e-2,
    rounds=1,
    american_days=17,
    fit=FitSettings(8, 256, 64),
    certificate=CertificateSettings(16, 128, 64),
    american_fit=FitSettings(8, 256, 16, 2),
    american_certificate=CertificateSettings(16, 128, 64),
    deltas=CertificateSettings(8, 128, 32),
    american_deltas=CertificateSettings(8, 128, 32),
)

RATE, YIELD, VOLATILITY = 0.05, 0.02, 0.25
END = date(2028, 11, 30)
HALF_YEARS = (date(2027, 5, 31), date(2027, 11, 30), date(2028, 5, 31), END)


def flat_market(dividends=None, **changes):
    """Continuous rate, yield and volatility alike for all, but for the ``dividends`` given."""
    market = small_market()
    days = [date(2027, 11, 30), date(2031, 11, 28)]
    curve = DiscountCurve.from_zero_rates("EUR", "EUR", "", TODAY, days, [RATE, RATE])
    volatility = VolatilityCurve.from_quotes(TODAY, days, [VOLATILITY, VOLATILITY])
    paid = Dividends(YIELD) if dividends is None else dividends
    ids = ("ARVENNE", "BELCOR")
    flat = {name: replace(market.underlyings[name], dividends=paid, volatility=volatility) for name in ids}
    curves = {**market.curves, ("EUR", ""): curve}
    return replace(market, underlyings={**market.underlyings, **flat}, curves=curves, **changes)


def same_day(*days: date) -> tuple[Observation, ...]:
    return tuple(Observation(day, day) for day in days)


def trade(
    aggregate: Aggregate,
    payout,
    *,
    rights=HALF_YEARS,
    by=ExercisedBy.HOLDER,
    amounts=None,
    before=(),
    after=(),
    style=ExerciseStyle.BERMUDAN,
    levels=None,
    exercised=None,
) -> Trade:
    """The holder takes ``payout``, the issuer ``amounts``; features ``before`` and ``after`` the right."""
    n = len(aggregate.weights)
    levels = levels or Levels(("ARVENNE", "BELCOR")[:n], (100.0, 50.0)[:n])
    own = payout if amounts is None else None
    right = Exercise(by, same_day(*rights), aggregate, own, amounts, style, exercised)
    features = (*before, right, *after)
    return Trade("X1", Contract(levels, ExpiryLevel(END, aggregate), payout, *same_day(END), features), 1.0, "EUR")


def terms_of(deal: Trade, market) -> ContractTerms:
    return ContractTerms.of(deal, standing(deal, market), market)


def value_of(deal: Trade, market=None, settings: ExerciseSettings = SMALL) -> ModelValue:
    market = flat_market() if market is None else market
    terms = terms_of(deal, market)
    tolerance = 1e-4 * terms.unit_notional
    return exercise_value(deal, terms, market, Asked("X1", 3, tolerance, tolerance, 1e-4), settings)
