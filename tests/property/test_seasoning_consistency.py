"""A contract aged along simulated paths is worth on average, tomorrow and with what it has paid, what it is today."""

from __future__ import annotations

import math
from dataclasses import replace
from datetime import date

import numpy as np
import pytest
from scipy.stats import norm, qmc

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average, AverageOf
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.fixings import Fixing, Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.appraisal import AppraisalSettings, appraise
from pricer.engines.contract_value import ContractSettings
from pricer.market.correlation import checked
from pricer.market.curves import DiscountCurve
from pricer.market.dividends import Dividends
from pricer.market.fx import FxRates
from pricer.market.market import Market
from pricer.market.underlying import Underlying
from pricer.market.volatility import VolatilityCurve

TODAY = date(2026, 11, 30)
SETTINGS = AppraisalSettings(
    seed=5, precision_bp=2.0, delta_precision_bp=50.0, contract=ContractSettings(with_checks=False)
)
NAMES = ("ARVENNE", "BELCOR")
SPOTS = {"ARVENNE": 100.0, "BELCOR": 50.0}
RATE, YIELDS, VOLATILITIES, CORRELATION = 0.03, (0.02, 0.0), (0.25, 0.35), 0.5
OBSERVED = tuple(date(2027, month, 15) for month in (1, 4, 7, 10))
EXPIRY = date(2028, 1, 17)


def market_on(day: date, spots: dict[str, float], fixings: Fixings) -> Market:
    """The same flat market, as it stands on ``day``."""
    far = [date(2027, 12, 1), date(2031, 11, 28)]
    underlyings = {
        name: Underlying(
            name, "EUR", spots[name], "TARGET", 1.0, Dividends(carry), VolatilityCurve.from_quotes(day, far, [vol, vol])
        )
        for name, carry, vol in zip(NAMES, YIELDS, VOLATILITIES, strict=True)
    }
    curve = DiscountCurve.from_zero_rates("EUR-STD", "EUR", "", day, far, [RATE, RATE])
    correlation = checked(NAMES, np.array([[1.0, CORRELATION], [CORRELATION, 1.0]]))[0]
    return Market(
        "flat", day, "EUR", underlyings, {("EUR", ""): curve}, correlation, FxRates.from_pairs({}), fixings=fixings
    )


def paid(day: date) -> Observation:
    return Observation(day, date.fromordinal(day.toordinal() + 2))


WORST = Aggregate.worst_of(2)
BASKET = Aggregate.weighted_sum((0.5, 0.5))
FIXED = Levels(NAMES, (105.0, 50.0))
AT_EXPIRY = ExpiryLevel(EXPIRY, WORST)

NOTE = Contract(
    FIXED,
    AT_EXPIRY,
    Redemption(put_strike=1.0),
    paid(EXPIRY),
    (
        Coupons(
            tuple(Coupon(day, paid(day).payment_date, 0.03, 0.7) for day in OBSERVED),
            Trigger(Direction.UP, WORST),
            True,
        ),
        Autocall(tuple(map(paid, OBSERVED)), Trigger(Direction.UP, WORST), (1.0, 1.0, 0.95, 0.95), (1.0,) * 4),
        Barrier(BarrierKind.IN, Trigger(Direction.DOWN, WORST), (paid(EXPIRY),), (0.65,), Redemption()),
    ),
)
CALL = Profile(ProfileKind.CALL, 1.0)
CONTRACTS = {
    "worst-of autocallable with coupons in memory": NOTE,
    "average of a basket": Contract(
        FIXED, Average((*OBSERVED, EXPIRY), BASKET, AverageOf.UNDERLYINGS), CALL, paid(EXPIRY)
    ),
    "averaged strike": Contract(Levels(NAMES, None, OBSERVED[:2]), ExpiryLevel(EXPIRY, BASKET), CALL, paid(EXPIRY)),
    "down-and-out on the worst": Contract(
        FIXED,
        ExpiryLevel(EXPIRY, BASKET),
        CALL,
        paid(EXPIRY),
        (
            Barrier(
                BarrierKind.OUT,
                Trigger(Direction.DOWN, WORST),
                tuple(map(paid, OBSERVED)),
                (0.8,) * 4,
                rebate_at_hit=0.02,
            ),
        ),
    ),
    "cliquet": Contract(
        FIXED,
        PerformanceSum((*OBSERVED, EXPIRY), BASKET, Profile(ProfileKind.FORWARD, 1.0, floor=-0.03, cap=0.04)),
        Profile(ProfileKind.CALL, 0.0),
        paid(EXPIRY),
    ),
}  # fmt: skip


def worth(trade: Trade, market: Market) -> tuple[float, float, np.ndarray]:
    """Value of one unit, its standard error, deltas in shares."""
    found = appraise(trade, market, SETTINGS).leading
    return found.headline.value, found.headline.standard_error, found.ratios.deltas


@pytest.mark.parametrize(
    "name", [pytest.param(n, marks=[] if "note" in n or "auto" in n else pytest.mark.long) for n in CONTRACTS]
)
def test_tomorrows_value_is_on_average_todays(name):
    contract = CONTRACTS[name]
    trade = Trade("SEASONED", contract, 1.0, "EUR")
    today = market_on(TODAY, SPOTS, Fixings())
    value, error, deltas = worth(trade, today)
    day = OBSERVED[0]  # the first observation is fixed on the way
    law = today.joint_lognormal(NAMES, day)
    points = norm.ppf(qmc.Sobol(2, rng=np.random.default_rng(11)).random(64))
    root = np.linalg.cholesky(law.covariance)
    levels = law.forwards * np.exp(points @ root.T - 0.5 * np.diag(law.covariance))
    discount = today.discount_factor("EUR", "", day)
    slopes = np.where(np.isfinite(deltas), deltas, 0.0) * np.array(list(SPOTS.values())) / law.forwards
    gains = []
    for row in levels:
        fixings = Fixings.from_rows(Fixing(n, day, float(level)) for n, level in zip(NAMES, row, strict=True))
        later = market_on(day, dict(zip(NAMES, row.tolist(), strict=True)), fixings)
        worth_then, _, _ = worth(trade, later)
        gains.append(discount * worth_then - float(slopes @ (row - law.forwards)))
    # Sixty-four outcomes on a net, less their delta: four standard errors of what is left, which a net undercuts.
    spread = float(np.std(gains, ddof=1)) / math.sqrt(len(gains))
    assert abs(float(np.mean(gains)) - value) <= 4.0 * math.hypot(spread, error)
    assert spread < 0.01  # of a unit of notional: the test has teeth


def test_a_market_moved_forward_keeps_its_forwards():
    today, later = (market_on(day, SPOTS, Fixings()) for day in (TODAY, OBSERVED[0]))
    step = today.discount_factor("EUR", "", OBSERVED[0])
    assert today.discount_factor("EUR", "", EXPIRY) == pytest.approx(
        step * later.discount_factor("EUR", "", EXPIRY), rel=1e-12
    )
    fixed = replace(later, valuation_date=OBSERVED[0])
    assert fixed.joint_lognormal(NAMES, EXPIRY).covariance[0, 0] == pytest.approx(
        today.joint_lognormal(NAMES, EXPIRY).covariance[0, 0]
        - today.joint_lognormal(NAMES, OBSERVED[0]).covariance[0, 0]
    )
