"""Whole contracts through the registry of closed forms, against published values; the rows name their sources.

Barriers on dates: Broadie, Glasserman & Kou (1997, Table 2.1) and constructed rows. A one-asset reverse
convertible with a knock-in on dates: constructed by a grid and by simulation. Options whose writer may default: the
sampling, against Klein (1996) and Johnson & Stulz (1987). A forward start, and an average of few dates:
QuantLib's engines.
"""

from __future__ import annotations

import math
from datetime import date, timedelta

import numpy as np
import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.average import Average
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.fixings import Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.life_cycle import as_of
from pricer.contracts.notes import knock_in, reverse_convertible
from pricer.contracts.observation import Observation
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.closed_form.contract_references import contract_references
from pricer.engines.closed_form.writer_default import WriterAssets, fixed_boundary
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.problem import EuropeanProblem, ReferenceKind
from pricer.engines.vulnerable_sample import Drawn, by_shares, estimate, out_of_all
from pricer.market.joint_lognormal import JointLognormal
from tests.reference.checker import call_or_put, check, read

TODAY = date(2026, 1, 5)
ONE = Aggregate.weighted_sum((1.0,))
BARRIERS = [row for row in read("barriers.csv") if "dates" in row["monitoring"]]
NOTES = {row["case_id"]: row for row in read("worst_of_and_autocallable.csv")}
WRITERS = [r for r in read("vulnerable_options.csv") if r["case_id"].startswith(("VO-KL", "VO-JS"))]


def day(k):
    return TODAY + timedelta(days=k)


def terms_of(contract, times, spot, rate, growth, volatility):
    """The contract's k-th day is at ``times[k]`` years, whatever its date."""
    times = np.asarray(times, dtype=float)
    at = dict(zip(contract.dates, times, strict=True))
    return ContractTerms(
        as_of=as_of(contract, TODAY, Fixings.from_rows(()), {"ARVENNE": spot}),
        contract=contract,
        dates=contract.dates,
        times=times,
        forwards=spot * np.exp(growth * times)[:, np.newaxis],
        floors=np.zeros((len(times), 1)),
        covariances=(volatility**2 * np.diff(times, prepend=0.0))[:, np.newaxis, np.newaxis],
        discount=lambda paid: math.exp(-rate * at[paid]),
        known_value=0.0,
        unit_notional=spot,
        random_spots=np.array([spot]),
        rates=np.ones(1),
    )


def exact(terms):
    return next(r for r in contract_references(terms) if r.kind is ReferenceKind.EXACT).value


def barrier_on_dates(row):
    count, years = int(row["monitoring"].split()[0]), float(row["t"])
    days = tuple(Observation(day(k), day(k)) for k in range(1, count + 1))
    direction = Direction.UP if "up_and" in row["product"] else Direction.DOWN
    barrier = Barrier(BarrierKind.OUT, Trigger(direction, ONE), days, (float(row["barrier"]),) * count)
    contract = Contract(
        Levels.of_prices(("ARVENNE",)), ExpiryLevel(days[-1].day, ONE), call_or_put(row), days[-1], (barrier,)
    )
    rate = float(row["r"])
    growth = rate - float(row["q1"])
    return exact(
        terms_of(contract, years * np.arange(1, count + 1) / count, float(row["s1"]), rate, growth, float(row["v1"]))
    )


def test_dated_barriers_as_contracts_meet_the_published_values():
    check(BARRIERS, barrier_on_dates)


def test_a_reverse_convertible_with_a_dated_knock_in_meets_its_constructed_value():
    row = NOTES["AC-B1-1"]
    days = [Observation(day(k), day(k)) for k in range(1, 13)]
    coupons = Coupons(tuple(Coupon(o.day, o.payment_date, 0.008) for o in days))
    contract = reverse_convertible(
        Levels(("ARVENNE",), (100.0,)), ONE, days[-1], Redemption(put_strike=1.0), coupons, knock_in(ONE, days, 0.7)
    )
    rate = float(row["r"])
    terms = terms_of(contract, np.arange(1, 13) / 12, 100.0, rate, rate - float(row["div_yields"]), float(row["vols"]))
    assert 100.0 * exact(terms) == pytest.approx(float(row["value"]), abs=float(row["tolerance"]))


def test_the_sampled_writer_meets_the_published_values_within_its_error():
    for row in WRITERS:
        rate, years = float(row["r"]), float(row["t"])
        deviation, own = float(row["vol_s"]) * years**0.5, float(row["vol_v"]) * years**0.5
        forward = float(row["s0"]) * np.exp((rate - float(row["div_yield"])) * years)
        law = JointLognormal(np.array([forward]), np.array([[deviation**2]]))
        claim = EuropeanProblem(law, ONE, call_or_put(row).payoff(), float(np.exp(-rate * years)))
        covariance = np.array([float(row["rho"]) * deviation * own])
        assets = WriterAssets(float(row["v0_counterparty_assets"]) * np.exp(rate * years), own, covariance)
        if row["case_id"].startswith("VO-KL"):
            limit, owed, lost = (float(row[k]) for k in ("default_boundary", "liabilities", "deadweight_alpha"))
            paid = by_shares(fixed_boundary(assets, limit, owed, lost))
        else:
            paid = out_of_all(assets)
        value, error = estimate(Drawn.of(1, 1024, row["case_id"], 3).means(claim, assets, paid))
        assert abs(value - float(row["value"])) < 4.0 * error + float(row["tolerance"]), row["case_id"]
        assert error < 2e-3 * float(row["s0"]) * 0.1


def quantlib_process(spot, rate, dividend, volatility):
    today, count = ql.Date(5, 1, 2026), ql.Actual365Fixed()
    ql.Settings.instance().evaluationDate = today
    curves = [ql.YieldTermStructureHandle(ql.FlatForward(today, r, count)) for r in (dividend, rate)]
    smile = ql.BlackVolTermStructureHandle(ql.BlackConstantVol(today, ql.NullCalendar(), volatility, count))
    return ql.BlackScholesMertonProcess(ql.QuoteHandle(ql.SimpleQuote(spot)), *curves, smile)


def test_a_forward_start_meets_quantlibs_performance_option():
    start, end, rate, dividend, volatility = 120, 480, 0.03, 0.01, 0.22
    contract = Contract(
        Levels(("ARVENNE",), None, (day(start),)),
        ExpiryLevel(day(end), ONE),
        Profile(ProfileKind.CALL, 1.05),
        Observation(day(end), day(end)),
    )
    found = exact(terms_of(contract, [start / 365, end / 365], 100.0, rate, rate - dividend, volatility))
    dates = [ql.Date(5, 1, 2026) + k for k in (start, end)]
    option = ql.ForwardVanillaOption(
        1.05, dates[0], ql.PlainVanillaPayoff(ql.Option.Call, 0.0), ql.EuropeanExercise(dates[1])
    )
    option.setPricingEngine(ql.ForwardEuropeanEngine(quantlib_process(100.0, rate, dividend, volatility)))
    # QuantLib pays the difference of prices at expiry, the performance's times the price at the start. That price is
    # independent of the performance, so that one value is the other times the start's forward.
    assert found * 100.0 * math.exp((rate - dividend) * start / 365) == pytest.approx(option.NPV(), rel=1e-10)


def test_an_average_of_few_dates_meets_quantlibs_control_variate_sampling():
    days, rate, dividend, volatility = (90, 180, 270, 360), 0.03, 0.01, 0.3
    schedule = tuple(day(k) for k in days)
    contract = Contract(
        Levels.of_prices(("ARVENNE",)),
        Average(schedule, ONE),
        Profile(ProfileKind.CALL, 100.0),
        Observation(schedule[-1], schedule[-1]),
    )
    found = exact(terms_of(contract, np.array(days) / 365, 100.0, rate, rate - dividend, volatility))
    dates = [ql.Date(5, 1, 2026) + k for k in days]
    option = ql.DiscreteAveragingAsianOption(
        ql.Average.Arithmetic,
        0.0,
        0,
        dates,
        ql.PlainVanillaPayoff(ql.Option.Call, 100.0),
        ql.EuropeanExercise(dates[-1]),
    )
    process = quantlib_process(100.0, rate, dividend, volatility)
    engine = ql.MCDiscreteArithmeticAPEngine(
        process, "pseudorandom", controlVariate=True, requiredSamples=60000, seed=5
    )
    option.setPricingEngine(engine)
    assert abs(found - option.NPV()) < 4.0 * option.errorEstimate()
