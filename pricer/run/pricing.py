"""One run: admit the trades, price them side by side, judge the cross-checks, freeze the results."""

from __future__ import annotations

import platform
import time
from datetime import UTC, datetime
from functools import partial
from importlib.metadata import version

from pricer.contracts.book import Book, Refusal, Trade
from pricer.core.issues import Issue, Severity
from pricer.core.progress import Progress, Silent
from pricer.engines.cross_check import ALARMS, APPROXIMATION_BP, FALSE_ALARM, IMMATERIAL, is_test
from pricer.engines.european import Appraisal, appraise
from pricer.market.market import Market
from pricer.run.admission import admit, refusal
from pricer.run.local import map_groups
from pricer.run.outcome import Outcome, RunFacts, UnderlyingFacts
from pricer.run.position import cross_checks, valuation
from pricer.run.settings import Settings

_LIBRARIES = ("pricer", "numpy", "scipy", "numba", "QuantLib", "pandas", "openpyxl")


def price(book: Book, market: Market, settings: Settings | None = None, progress: Progress | None = None) -> Outcome:
    """Value every trade of ``book`` on ``market``; what cannot be priced is listed with its reasons.

    The numbers depend on the book, the market and the settings' seed and precisions only:
    not on the number of workers, nor on the order or company of the trades (verdicts of the
    cross-check share one error probability among all tests of the book).
    """
    settings = settings or Settings()
    started, clock = datetime.now(UTC), time.perf_counter()
    admitted = admit(book, market)

    results = map_groups(
        partial(_try_appraise, market=market, settings=settings),
        admitted.trades,
        workers=settings.workers,
        progress=progress or Silent(),
        label=lambda trade: trade.trade_id,
    )
    appraisals = [result for result in results if isinstance(result, Appraisal)]
    failures = [result for result in results if isinstance(result, Refusal)]
    tests = sum(is_test(reference) for appraisal in appraisals for reference in appraisal.references)
    checks = tuple(row for appraisal in appraisals for row in cross_checks(appraisal, tests))
    disputed = {check.trade_id for check in checks if check.verdict in ALARMS}

    return Outcome(
        facts=_facts(book, market, settings, started, time.perf_counter() - clock, appraisals),
        valuations=tuple(
            valuation(appraisal, market, disputed=appraisal.trade.trade_id in disputed) for appraisal in appraisals
        ),
        cross_checks=checks,
        refusals=(*admitted.refusals, *failures),
        issues=(*admitted.issues, *(issue for failure in failures for issue in failure.issues)),
        underlyings=_underlying_facts(appraisals, market),
    )


def _try_appraise(trade: Trade, market: Market, settings: Settings) -> Appraisal | Refusal:
    """An appraisal, or the refusal of a trade on which the engine failed: one bad trade stops no run."""
    try:
        return appraise(
            trade,
            market,
            seed=settings.seed,
            precision_bp=settings.precision_bp,
            delta_precision_bp=settings.delta_precision_bp,
            settings=settings.sampling,
        )
    except (ArithmeticError, ValueError, LookupError) as error:
        issue = Issue(
            code="engine-failed",
            found=f"the engine stopped with {type(error).__name__}: {error}",
            expected="a trade that the engine can value",
            mend="Check the trade's terms and the levels of its underlyings; if they are right, report the case.",
            severity=Severity.ERROR,
            trade_id=trade.trade_id,
        )
        return refusal(trade, (issue,))


def _underlying_facts(appraisals: list[Appraisal], market: Market) -> tuple[UnderlyingFacts, ...]:
    used = {u for appraisal in appraisals for u in appraisal.trade.contract.underlyings}
    facts = (market.underlyings[u] for u in sorted(used))
    return tuple(
        UnderlyingFacts(u.underlying_id, u.currency, u.spot, u.lot_size, market.to_reporting(u.currency)) for u in facts
    )


def _facts(
    book: Book, market: Market, settings: Settings, started: datetime, seconds: float, appraisals: list[Appraisal]
) -> RunFacts:
    sampling = settings.sampling
    return RunFacts(
        valuation_date=market.valuation_date,
        reporting_currency=market.reporting_currency,
        book_name=book.name,
        seed=settings.seed,
        precision_bp=settings.precision_bp,
        workers=settings.workers,
        sources=(*book.sources, *market.sources),
        versions=(
            ("Python", platform.python_version()),
            *((library, version(library)) for library in _LIBRARIES),
        ),
        settings=(
            ("model", "correlated lognormal, volatility flat in strike"),
            ("target standard error of a value (bp of notional)", f"{settings.precision_bp:g}"),
            (
                "target standard error of a cash delta (bp of notional or of gross cash delta)",
                f"{settings.delta_precision_bp:g}",
            ),
            ("independent randomisations", str(sampling.randomisations)),
            ("points a randomisation: first, at most", f"{sampling.initial_points}, {sampling.maximum_points}"),
            ("order of random factors", sampling.ordering),
            ("cross-check: chance of one false alarm in the book", f"{FALSE_ALARM:g}"),
            ("cross-check: never an alarm below (part of the standard error asked for)", f"{IMMATERIAL:g}"),
            ("cross-check: approximation called close within (bp of notional)", f"{APPROXIMATION_BP:g}"),
        ),
        started=started,
        seconds=seconds,
        timings=(
            ("pricing, all trades together", seconds),
            ("pricing, summed over workers", sum(appraisal.seconds for appraisal in appraisals)),
        ),
    )
