"""The frozen results of a run. A number never travels without its error, method and ending."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date, datetime
from enum import StrEnum

from pricer.contracts.book import Refusal
from pricer.core.issues import Issue
from pricer.core.source import SourceFile
from pricer.engines.cross_check import Verdict as Verdict
from pricer.engines.selector import Interval as Interval


class Status(StrEnum):
    """How the pricing of one trade ended."""

    PRICED = "priced"
    PRECISION_NOT_REACHED = "precision not reached"  # priced, but the value's error is above what was asked
    DISPUTED = "disputed"  # priced, but its cross-check disagrees
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
class CrossCheck:
    """One engine value beside one reference; amounts are of the position, in its currency."""

    trade_id: str
    product: str
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
    """The value of one position, in the trade's currency (``reporting_*`` in the book's)."""

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
    unpaid_premium: float  # discounted, already inside value; negative when the desk owes it
    reporting_value: float
    reporting_standard_error: float
    sampled_value: float
    sampled_standard_error: float
    paths: int
    randomisations: int
    degrees_of_freedom: int  # of the sampled standard error: take Student's t
    seconds: float
    status: Status
    ending: str  # in words: how sampling ended, that of the deltas included
    deltas: tuple[Delta, ...]


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
class Outcome:
    """Everything a report may show."""

    facts: RunFacts
    valuations: tuple[Valuation, ...]  # in book order
    cross_checks: tuple[CrossCheck, ...]
    refusals: tuple[Refusal, ...]
    issues: tuple[Issue, ...]
    underlyings: tuple[UnderlyingFacts, ...]

    @property
    def exit_status(self) -> int:
        """0 all priced, 1 some not priced, 2 nothing could be done."""
        if not self.valuations:
            return 2
        return 1 if self.refusals else 0
