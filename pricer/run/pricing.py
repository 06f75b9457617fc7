"""One run: admit the trades, price them side by side, judge the cross-checks, freeze the results."""

from __future__ import annotations

import platform
import time
from collections.abc import Mapping
from dataclasses import replace
from datetime import UTC, datetime
from functools import partial
from importlib.metadata import version

from pricer.contracts.book import Book, Model, Refusal, Trade
from pricer.contracts.contract import Contract
from pricer.core.issues import Issue, Severity
from pricer.core.progress import Progress, Silent
from pricer.engines.appraisal import Appraisal, AppraisalSettings, appraise
from pricer.engines.calibration import Calibration, calibrate
from pricer.engines.cross_check import ALARMS, APPROXIMATION_BP, FALSE_ALARM, IMMATERIAL, is_test
from pricer.engines.not_covered import NotCovered
from pricer.market.checked_surface import CheckedSurface
from pricer.market.correlation_stress import stressed
from pricer.market.market import Market
from pricer.run.admission import admit, not_covered, refusal
from pricer.run.contract_facts import contract_facts
from pricer.run.events import events
from pricer.run.flat_quotes import flat_surface, is_random
from pricer.run.local import map_groups
from pricer.run.market_facts import forward_dates, market_facts
from pricer.run.outcome import Outcome, RunFacts, UnderlyingFacts
from pricer.run.position import cross_checks, valuation
from pricer.run.settings import Settings
from pricer.run.underlying_standing import underlying_standings

_LIBRARIES = ("pricer", "numpy", "scipy", "numba", "QuantLib", "pandas", "openpyxl")


def price(book: Book, market: Market, settings: Settings | None = None, progress: Progress | None = None) -> Outcome:
    """Value every trade of ``book`` on ``market``; what cannot be priced is listed with its reasons.

    The numbers depend on the book, the market and the settings' seed and precisions only:
    not on the number of workers, nor on the order or company of the trades (verdicts of the
    cross-check share one error probability among all tests of the book).
    """
    settings = settings or Settings()
    started, clock = datetime.now(UTC), time.perf_counter()
    market = _stressed(market, settings)
    admitted = admit(book, market, accept_failing_surfaces=settings.accept_failing_surfaces)

    results = map_groups(
        partial(_try_appraise, market=market, settings=settings.appraisal),
        admitted.trades,
        workers=settings.workers,
        progress=progress or Silent(),
        label=lambda trade: trade.trade_id,
    )
    appraisals = [result for result in results if isinstance(result, Appraisal)]
    failures = [result for result in results if isinstance(result, Refusal)]
    tests = sum(
        is_test(reference)
        for appraisal in appraisals
        for _, value in appraisal.values
        for reference in value.references
    )
    checks = tuple(row for appraisal in appraisals for row in cross_checks(appraisal, tests))
    disputed = {check.trade_id for check in checks if check.verdict in ALARMS}
    priced = time.perf_counter() - clock
    live = [appraisal.trade.contract for appraisal in appraisals if appraisal.is_live]
    used = sorted({name for contract in live for name in contract.underlyings})
    surfaces = {**market.surfaces, **{name: flat_surface(name, market) for name in used if name not in market.surfaces}}
    simulated = {name for appraisal in appraisals if appraisal.local_volatility is not None
                 for name in appraisal.trade.contract.underlyings if is_random(surfaces[name])}  # fmt: skip
    calibrations, uncalibrated = _calibrations({name: surfaces[name] for name in sorted(simulated)}, market, settings)
    refused = {refusal.trade_id for refusal in (*admitted.refusals, *failures)}

    return Outcome(
        facts=_facts(book, market, settings, started, priced, time.perf_counter() - clock, appraisals),
        valuations=tuple(
            valuation(
                appraisal,
                market,
                disputed=appraisal.trade.trade_id in disputed,
                compared=settings.compare_models,
            )
            for appraisal in appraisals
        ),
        cross_checks=checks,
        refusals=(*admitted.refusals, *failures),
        issues=(*admitted.issues, *(issue for failure in failures for issue in failure.issues), *uncalibrated),
        underlyings=tuple(_underlying_facts(name, market) for name in used),
        market=market_facts(
            market,
            used,
            surfaces,
            calibrations,
            underlying_standings(
                book.trades, refused, market, accept_failing_surfaces=settings.accept_failing_surfaces
            ),
        ),
        events=events(book, market),
        contracts=tuple(
            contract_facts(appraisal.trade, appraisal.as_of, market)
            for appraisal in appraisals
            if isinstance(appraisal.trade.contract, Contract)
        ),
    )


def _stressed(market: Market, settings: Settings) -> Market:
    """The market with correlations among underlyings moved as asked; those of exchange rates only give way."""
    one, zero = settings.correlation_towards_one, settings.correlation_towards_zero
    if market.correlation is None or max(one, zero) == 0.0:
        return market
    ids = [name for name in market.correlation.ids if name in market.underlyings]
    return replace(market, correlation=stressed(market.correlation, towards_one=one, towards_zero=zero, ids=ids))


def _calibrations(
    surfaces: Mapping[str, CheckedSurface], market: Market, settings: Settings
) -> tuple[dict[str, Calibration], tuple[Issue, ...]]:
    """Every quoted vanilla of these underlyings through the paths that trades are valued on; what failed is told."""
    found = map_groups(
        partial(_try_calibrate, market=market, settings=settings),
        list(surfaces.values()),
        workers=settings.workers,
        progress=Silent(),
        label=lambda surface: surface.underlying_id,
    )
    pairs = list(zip(surfaces, found, strict=True))
    return (
        {name: result for name, result in pairs if isinstance(result, Calibration)},
        tuple(result for _, result in pairs if isinstance(result, Issue)),
    )


def _try_calibrate(surface: CheckedSurface, market: Market, settings: Settings) -> Calibration | Issue:
    name = surface.underlying_id
    try:
        dates = forward_dates(name, market)
        return calibrate(surface, market.affine_price(name), dates, seed=settings.seed)
    except (ArithmeticError, ValueError, LookupError) as error:
        return Issue(
            code="calibration-failed",
            found=f'the quotes of underlying "{name}" could not be repriced: {type(error).__name__}: {error}',
            expected="paths on which every quoted option can be priced",
            mend="Check the underlying's volatilities and dividends; its trades are valued, their calibration is not "
            "known.",
            severity=Severity.WARNING,
        )


def _try_appraise(trade: Trade, market: Market, settings: AppraisalSettings) -> Appraisal | Refusal:
    """An appraisal, or the refusal of a trade on which the engine failed: one bad trade stops no run."""
    try:
        return appraise(trade, market, settings)
    except NotCovered as reason:
        return refusal(trade, market, (not_covered(trade, str(reason)),))
    except (ArithmeticError, ValueError, LookupError) as error:
        issue = Issue(
            code="engine-failed",
            found=f"the engine stopped with {type(error).__name__}: {error}",
            expected="a trade that the engine can value",
            mend="Check the trade's terms and the levels of its underlyings; if they are right, report the case.",
            severity=Severity.ERROR,
            trade_id=trade.trade_id,
        )
        return refusal(trade, market, (issue,))


def _underlying_facts(name: str, market: Market) -> UnderlyingFacts:
    u = market.underlyings[name]
    return UnderlyingFacts(u.underlying_id, u.currency, u.spot, u.lot_size, market.to_reporting(u.currency))


def _facts(
    book: Book,
    market: Market,
    settings: Settings,
    started: datetime,
    priced: float,
    seconds: float,
    appraisals: list[Appraisal],
) -> RunFacts:
    sampling, steps = settings.sampling, settings.local_vol
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
            ("model, unless the trade asks for one", _model_in_words(settings)),
            ("both models compared", "yes" if settings.compare_models else "no"),
            ("volatility surfaces that fail their checks", _failing_in_words(settings)),
            ("correlations among underlyings", _stress_in_words(settings)),
            ("overhedge of jumps and barriers, its cost shown beside the value", _overhedge_in_words(settings)),
            ("target standard error of a value (bp of notional)", f"{settings.precision_bp:g}"),
            (
                "target standard error of a cash delta (bp of notional or of gross cash delta)",
                f"{settings.delta_precision_bp:g}",
            ),
            (
                "the same under local volatility (bp of gross cash delta)",
                f"{settings.path_delta_precision_bp:g}",
            ),
            (
                "the same for contracts with a path (bp of gross cash delta)",
                f"{settings.contract_delta_precision_bp:g}",
            ),
            ("independent randomisations", str(sampling.randomisations)),
            ("points a randomisation: first, at most", f"{sampling.initial_points}, {sampling.maximum_points}"),
            ("order of random factors", sampling.ordering),
            ("time steps under local volatility: first, at most", f"{steps.initial_steps}, {steps.maximum_steps}"),
            ("cross-check: chance of one false alarm in the book", f"{FALSE_ALARM:g}"),
            ("cross-check: never an alarm below (part of the standard error asked for)", f"{IMMATERIAL:g}"),
            ("cross-check: approximation called close within (bp of notional)", f"{APPROXIMATION_BP:g}"),
        ),
        started=started,
        seconds=seconds,
        timings=(
            ("pricing, all trades together", priced),
            ("repricing the quoted vanillas", seconds - priced),
            ("pricing, summed over workers", sum(appraisal.seconds for appraisal in appraisals)),
        ),
    )


def _model_in_words(settings: Settings) -> str:
    if settings.model is None:
        return f"{Model.LOCAL_VOLATILITY} where an underlying has a smile, else {Model.LOGNORMAL}"
    return str(settings.model)


def _failing_in_words(settings: Settings) -> str:
    return "accepted, trades marked" if settings.accept_failing_surfaces else "not priced from"


def _overhedge_in_words(settings: Settings) -> str:
    asked = settings.overhedge
    if asked is None:
        return "not asked for"
    return f"spreads of {100.0 * asked.digital_spread:g} %, barriers moved by {100.0 * asked.barrier_shift:g} %"


def _stress_in_words(settings: Settings) -> str:
    for share, end in ((settings.correlation_towards_one, "one"), (settings.correlation_towards_zero, "zero")):
        if share > 0.0:
            return f"moved {100.0 * share:g} % of the way towards {end}"
    return "as in the market"
