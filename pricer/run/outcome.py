"""The frozen results of a run. A number never travels without its error, method and ending."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date, datetime
from enum import StrEnum

from pricer.contracts.book import Model as Model
from pricer.contracts.book import Refusal, Trade
from pricer.contracts.life_cycle import AsOf
from pricer.core.issues import Issue
from pricer.core.source import SourceFile
from pricer.engines.cross_check import Verdict as Verdict
from pricer.engines.selector import Interval as Interval
from pricer.market.agreements import Agreement as Agreement


class Status(StrEnum):
    """How the pricing of one trade ended."""

    PRICED = "priced"
    PRECISION_NOT_REACHED = "precision not reached"  # priced, but the value's error is above what was asked
    DISPUTED = "disputed"  # priced, but its cross-check disagrees
    FAILING_SURFACE = "failing surface"  # priced, as asked, from a volatility surface that fails its checks
    NOT_PRICED = "not priced"


@dataclass(frozen=True, slots=True)
class Delta:
    """Sensitivities of one position to one underlying.

    ``delta`` and ``standard_error`` in shares; ``gamma`` in shares per unit of currency of
    the underlying's price (None where the payoff's switching between underlyings makes the
    pathwise second derivative wrong); ``vega`` in the trade's currency per volatility point.
    """

    underlying: str
    delta: float
    standard_error: float
    gamma: float | None
    gamma_standard_error: float | None
    vega: float
    vega_standard_error: float
    spot: float
    method: str


@dataclass(frozen=True, slots=True)
class ChanceRow:
    """The probability, under the pricing measure, that a contract ends on ``day`` in the way that ``what`` says."""

    day: date
    what: str
    probability: float
    standard_error: float


@dataclass(frozen=True, slots=True)
class CrossCheck:
    """One engine value beside one reference, both under ``model``; amounts are of the position, in its currency."""

    trade_id: str
    product: str
    model: Model
    engine_value: float
    engine_standard_error: float
    reference_method: str
    reference_kind: str
    reference_value: float
    reference_error: float
    difference: float
    difference_bp: float  # of notional
    difference_standard_errors: float | None  # None where the engine has no sampling error
    tolerance: float  # in the trade's currency: what the verdict compares with
    verdict: Verdict
    source: str


@dataclass(frozen=True, slots=True)
class Valuation:
    """The value of one position, in the trade's currency (``reporting_*`` in the book's).

    ``model_difference`` is the value under local volatility less that under lognormal levels, whichever
    leads: 0 where no underlying has a smile, None where models were not compared.
    """

    trade_id: str
    product: str
    currency: str
    counterparty: str
    netting_set: str
    strategy: str
    expiry_date: date
    notional: float
    value: float  # headline: exact where an exact method applies, else sampled; with unpaid premium
    standard_error: float  # 0 where exact
    lower: float
    upper: float
    interval: Interval
    method: str
    model: Model
    model_difference: float | None
    model_difference_standard_error: float | None
    unpaid_premium: float  # discounted, already inside value; negative when the desk owes it
    reporting_value: float
    reporting_standard_error: float
    sampled_value: float  # under the leading model
    sampled_standard_error: float
    paths: int
    randomisations: int
    time_steps: int  # of a path; 0 where levels are drawn at expiry alone
    degrees_of_freedom: int  # of the sampled standard error: take Student's t
    seconds: float
    status: Status
    ending: str  # in words: how sampling ended, that of the deltas included
    deltas: tuple[Delta, ...]
    life_status: str = "live"  # or "ended, to be paid", "settled"
    expected_life: float | None = None  # years until it ends; None for European options
    expected_life_standard_error: float | None = None
    call_probability: float | None = None  # that it ends before expiry: called, exercised or knocked out with a rebate
    knock_probability: float | None = None  # that its barrier is hit before it ends, 1 if it has been; None without one
    chances: tuple[ChanceRow, ...] = ()
    overhedge_cost: float | None = None  # 0 or less, not in value; None if no overhedge was asked for


@dataclass(frozen=True, slots=True)
class ContractFacts:
    """A trade that is more than a European option, and where it stands: what its sheet is written from.

    ``prices`` : days looked at so far, each with the underlyings' prices, converted where the contract has them so;
    NaN where one is missing.
    """

    trade: Trade
    as_of: AsOf
    prices: tuple[tuple[date, tuple[float, ...]], ...] = ()


@dataclass(frozen=True, slots=True)
class EventRow:
    """Something that happens, or may happen, to a trade on ``day``; a daily series is one row, until ``last_day``.

    ``amount`` is of the position, in the trade's currency; None where it depends on a level. ``level`` is a trigger's,
    ``current`` what it compares with today, ``distance`` the move that remains as a fraction of ``current``,
    ``deviations`` the same in standard deviations until then; ``met_today`` whether today's levels would meet it. All
    four are None where there is no trigger.
    """

    trade_id: str
    product: str
    day: date
    what: str
    underlyings: tuple[str, ...] = ()
    counterparty: str = ""
    last_day: date | None = None
    amount: float | None = None
    payment_date: date | None = None
    level: float | None = None
    current: float | None = None
    distance: float | None = None
    deviations: float | None = None
    met_today: bool | None = None
    currency: str = ""


@dataclass(frozen=True, slots=True)
class RunFacts:
    """What is needed to repeat the run and to believe it."""

    valuation_date: date
    reporting_currency: str
    book_name: str
    seed: int
    precision_bp: float
    workers: int
    sources: tuple[SourceFile, ...]
    versions: tuple[tuple[str, str], ...]
    settings: tuple[tuple[str, str], ...]
    started: datetime
    seconds: float
    timings: tuple[tuple[str, float], ...]


@dataclass(frozen=True, slots=True)
class UnderlyingFacts:
    """What the report needs to know of an underlying to total its deltas."""

    underlying: str
    currency: str
    spot: float
    lot_size: float
    to_reporting: float  # reporting currency per unit of ``currency``


@dataclass(frozen=True, slots=True)
class QuoteFit:
    """One quoted vanilla, and what the surface and the simulated model make of it; volatilities per year.

    ``simulated`` is implied from the prices of the paths that trades are valued on, with the sampling
    error ``simulated_standard_error``; None where the underlying was not simulated. ``counts``: whether
    the quote lies between 10 and 90 delta, where the target applies. ``derived``: no quote of the market but a
    point that the quoted skew and curvature stand for.
    """

    underlying: str
    expiry_date: date
    strike: float
    strike_of_forward: float
    delta: float  # of the call on the forward, 0 to 1
    quoted: float
    fitted: float
    simulated: float | None
    simulated_standard_error: float | None
    counts: bool
    derived: bool = False


@dataclass(frozen=True, slots=True)
class SurfaceFacts:
    """How one underlying's volatility quotes stand up: ``failures`` and ``violations`` in words, empty if none.

    ``has_smile`` is False where only volatilities at the forward are quoted: there is nothing to fit or to fail.
    """

    underlying: str
    passes: bool
    failures: tuple[str, ...]
    violations: tuple[str, ...]
    quotes: tuple[QuoteFit, ...]
    has_smile: bool = True


@dataclass(frozen=True, slots=True)
class UnderlyingStanding:
    """What the market is to one underlying's trades.

    ``trades`` of the book on it, ``trades_refused`` those of them that have no price because of it, perhaps for other
    reasons too. ``unusable`` : why no option on it can be priced, in words; empty if one can.
    """

    underlying: str
    trades: int
    trades_refused: int
    unusable: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class CurvePoint:
    """One date of a curve. ``instrument`` and both rates are of the quote it was made from, if it was."""

    curve: str
    currency: str
    collateral: str
    date: date
    zero_rate: float
    discount_factor: float
    instrument: str
    quoted_rate: float | None
    repriced_rate: float | None


@dataclass(frozen=True, slots=True)
class ForwardPoint:
    """One underlying's forward on one date, after that day's dividends, in its currency.

    ``dividend`` is the cash or proportional amount of that ex date on the forward, 0 on other dates;
    ``floor`` the value on that date of cash dividends still to come, below which the price cannot fall.
    ``simulated`` is the forward of the paths that trades are valued on, None where it was not simulated.
    """

    underlying: str
    date: date
    forward: float
    dividend: float
    floor: float
    simulated: float | None
    simulated_standard_error: float | None


@dataclass(frozen=True, slots=True)
class CreditPoint:
    """Hazard rate up to one date and survival to it."""

    name: str
    date: date
    recovery: float
    hazard_rate: float
    survival_probability: float


@dataclass(frozen=True, slots=True)
class FundingPoint:
    """Zero spreads of the desk's unsecured cash to one date."""

    date: date
    borrowing_spread: float
    lending_spread: float


@dataclass(frozen=True, slots=True)
class MarketFacts:
    """What the run made of the snapshot, for the report's market sheets."""

    surfaces: tuple[SurfaceFacts, ...] = ()
    underlyings: tuple[UnderlyingStanding, ...] = ()
    curves: tuple[CurvePoint, ...] = ()
    forwards: tuple[ForwardPoint, ...] = ()
    credit: tuple[CreditPoint, ...] = ()
    funding: tuple[FundingPoint, ...] = ()
    agreements: tuple[Agreement, ...] = ()


@dataclass(frozen=True, slots=True)
class Outcome:
    """Everything a report may show."""

    facts: RunFacts
    valuations: tuple[Valuation, ...]  # in book order
    cross_checks: tuple[CrossCheck, ...]
    refusals: tuple[Refusal, ...]
    issues: tuple[Issue, ...]
    underlyings: tuple[UnderlyingFacts, ...]
    market: MarketFacts = MarketFacts()
    contracts: tuple[ContractFacts, ...] = ()  # in book order
    events: tuple[EventRow, ...] = ()  # of the days ahead, by day

    @property
    def exit_status(self) -> int:
        """0 all priced, 1 some not priced, 2 nothing could be done."""
        if not self.valuations:
            return 2
        return 1 if self.refusals else 0
