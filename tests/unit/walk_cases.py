"""A market in one currency, contracts on it and their terms, for tests of the walk."""

from dataclasses import replace
from datetime import date, timedelta

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.fixings import Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.life_cycle import as_of
from pricer.contracts.observation import Observation
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.model_value import Asked
from tests.unit.markets import TODAY, small_market

SPOTS = {"ARVENNE": 100.0, "BELCOR": 50.0, "CADMUS": 80.0}
ASKED = Asked("T1", 7, 2e-4, 1e-3, 1e-3)
CALL = Profile(ProfileKind.CALL, 1.0)


def euro_market():
    """Lognormal, without cash dividends, all in EUR."""
    market = small_market()
    cadmus = replace(market.underlyings["CADMUS"], currency="EUR")
    return replace(market, underlyings={**market.underlyings, "CADMUS": cadmus})


def quarter(k):
    """The day k quarters from tonight."""
    month = 10 + 3 * k
    return date(2026 + month // 12, month % 12 + 1, 28)


def weekdays(last):
    """Every weekday after tonight up to ``last``."""
    days = (TODAY + timedelta(days=i) for i in range(1, (last - TODAY).days + 1))
    return tuple(day for day in days if day.weekday() < 5)


def paid_at_once(day):
    return Observation(day, day)


def performances(*names, **changes):
    return replace(Levels(names, tuple(SPOTS[name] for name in names)), **changes)


YEAR = quarter(4)


def contract(*features, names=("ARVENNE",), last=YEAR, payout=CALL, statistic=None, levels=None, aggregate=None):
    """On the worst of performances from today's spots unless told."""
    aggregate = aggregate or Aggregate.worst_of(len(names))
    statistic = statistic or ExpiryLevel(last, aggregate)
    return Contract(levels or performances(*names), statistic, payout, paid_at_once(last), tuple(features))


def terms_of(found, market=None, fixings=(), currency="EUR"):
    """The trade, its terms tonight and the market."""
    market = market or euro_market()
    trade = Trade("T1", found, 1.0, currency)
    spots = {name: market.underlyings[name].spot for name in found.underlyings}
    standing = as_of(found, market.valuation_date, Fixings.from_rows(fixings), spots)
    return trade, ContractTerms.of(trade, standing, market), market
