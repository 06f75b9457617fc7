"""Gates over the market as a whole: implausible or inconsistent data, used but reported."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from datetime import date

from pricer.core.issues import Issue, Severity
from pricer.market.agreements import Agreement
from pricer.market.correlation import Repair
from pricer.market.credit import HazardCurve
from pricer.market.curve_quality import curve_gates, repo_gates
from pricer.market.curves import DiscountCurve
from pricer.market.dividend_quality import dividend_gates, weekend_ex_dates
from pricer.market.findings import Locate, nowhere, percent, warning
from pricer.market.fixing_quality import fixing_gates
from pricer.market.fx_quality import rate_gates, volatility_triangles
from pricer.market.level_quality import level_gates
from pricer.market.local_vol_check import local_vol_gates
from pricer.market.market import Market
from pricer.market.surface_quality import surface_gates
from pricer.market.underlying import Underlying
from pricer.market.volatility_quality import fx_volatility_gates, volatility_gates, weekend_expiries

#: Continuous dividend yields, which may hold a repo margin, outside this range are reported.
PLAUSIBLE_YIELDS = (-0.05, 0.25)
#: Hazard rates above this are reported.
PLAUSIBLE_HAZARD_RATE = 0.50


@dataclass(frozen=True, slots=True)
class Review:
    """What the gates say about a market.

    ``refused`` : issues of exchange rates that must not be used, by pair; ``doubts`` : warnings about what is used
    though it is implausible. Both as in :class:`~pricer.market.market.Market`.
    """

    issues: tuple[Issue, ...]
    refused: Mapping[str, tuple[Issue, ...]]
    doubts: Mapping[str, tuple[Issue, ...]]


def gates(market: Market, repair: Repair | None = None, place: Locate = nowhere) -> tuple[Issue, ...]:
    """The issues of :func:`review`."""
    return review(market, repair, place).issues


def review(market: Market, repair: Repair | None = None, place: Locate = nowhere) -> Review:
    """Warnings about ``market``, and about the ``repair`` its correlation matrix took; errors of what cannot be used.

    ``place`` gives the cell of "valuation_date", "spot:UNDERLYING", "dividend_yield:UNDERLYING", "credit:NAME",
    "agreements:NETTING_SET", "correlation:A:B", and of what the modules of the gates name; or None.
    """
    found = _Found()
    found.add(_weekend(market.valuation_date, place))
    if repair is not None:
        found.add([_repair(repair, place)])
    sound: dict[str, DiscountCurve] = {}
    for (currency, collateral), curve in market.curves.items():
        told = list(curve_gates(curve, place))
        found.add(told)
        if not told and not collateral:
            sound[currency] = curve
    for name, repo in market.repo.items():
        found.add(repo_gates(name, repo, sound.get(repo.mid.currency), place), f"repo:{name}")
    for name, underlying in market.underlyings.items():
        found.add(_dividend_yield(underlying, place), name)
        found.add(dividend_gates(underlying, market, place), name)
        found.add(weekend_ex_dates(underlying, market, place))
        found.add(volatility_gates(name, market, place), name)
        found.add(weekend_expiries(name, market, place))
    for surface in market.surfaces.values():
        found.add(surface_gates(surface, place))
        found.add(local_vol_gates(surface, place))
    for credit in market.credit.values():
        found.add(_hazard_rates(credit, place))
    for agreement in market.agreements.values():
        found.add(_agreement_currency(agreement, market, place))
    for pairs, issue in rate_gates(market.fx, place):
        names = ["".join(pair) for pair in pairs]
        if issue.severity is Severity.WARNING:
            found.add([issue], *(f"fx:{name}" for name in names))
        else:
            found.refuse(issue, names)
    for pair in market.fx.volatilities:
        found.add(fx_volatility_gates(pair, market, place), f"fx_volatilities:{pair[0]}{pair[1]}")
    found.add(volatility_triangles(market, place))
    for item, issue in level_gates(market, found.refused, place):
        found.add([issue], item)
    for issue, fixing in fixing_gates(market, place):
        found.add([issue], *filter(None, (fixing,)))
    return found.review()


class _Found:
    """Issues in order, and by the items that they put in doubt or keep from being used."""

    def __init__(self) -> None:
        self._issues: list[Issue] = []
        self.refused: dict[str, tuple[Issue, ...]] = {}
        self._doubts: dict[str, tuple[Issue, ...]] = {}

    def add(self, issues: Iterable[Issue], *items: str) -> None:
        """Remember issues; the warnings among them put ``items`` in doubt."""
        for issue in issues:
            self._issues.append(issue)
            if issue.severity is Severity.WARNING:
                for item in items:
                    self._doubts[item] = (*self._doubts.get(item, ()), issue)

    def refuse(self, issue: Issue, pairs: Iterable[str]) -> None:
        """Remember an issue that keeps exchange rates from being used."""
        self._issues.append(issue)
        for pair in pairs:
            self.refused[pair] = (*self.refused.get(pair, ()), issue)

    def review(self) -> Review:
        return Review(tuple(self._issues), self.refused, self._doubts)


def _weekend(day: date, place: Locate) -> Iterator[Issue]:
    if day.weekday() >= 5:
        yield warning(
            place("valuation_date"),
            "weekend-valuation",
            f"the valuation date {day}, a {'Saturday' if day.weekday() == 5 else 'Sunday'}",
            "a day on which markets close",
            "Check the date; the book is valued to it as given.",
        )


def _repair(repair: Repair, place: Locate) -> Issue:
    a, b = repair.pair
    return warning(
        place(f"correlation:{a}:{b}") or place(f"correlation:{b}:{a}"),
        "correlation-repaired",
        f"correlations that contradict each other (smallest eigenvalue {repair.smallest_eigenvalue:.3g})",
        "a positive semi-definite matrix",
        f"The nearest correlation matrix is used instead, at distance {repair.distance:.3g}; its largest change is "
        f"{a} / {b} from {repair.before:.6f} to {repair.after:.6f}. Review the correlations of this pair.",
    )


def _dividend_yield(underlying: Underlying, place: Locate) -> Iterator[Issue]:
    (low, high), rate = PLAUSIBLE_YIELDS, underlying.dividends.yield_rate
    if not low <= rate <= high:
        yield warning(
            place(f"dividend_yield:{underlying.underlying_id}"),
            "implausible-dividend-yield",
            f"a dividend yield of {percent(rate, 1)} for {underlying.underlying_id}",
            f"dividend yields between {percent(low)} and {percent(high)}",
            "Check the unit: 2.1 % is entered as 0.021. The yield is used as given.",
        )


def _hazard_rates(credit: HazardCurve, place: Locate) -> Iterator[Issue]:
    rate, day = max(zip(credit.hazard_rates, credit.dates, strict=True))
    if rate > PLAUSIBLE_HAZARD_RATE:
        yield warning(
            place(f"credit:{credit.name}"),
            "implausible-hazard-rate",
            f"a hazard rate of {percent(rate, 1)} a year to {day} for {credit.name}",
            f"hazard rates up to {percent(PLAUSIBLE_HAZARD_RATE)}",
            "Check the unit: a spread of 120 basis points is entered as 0.012. The rates are used as given.",
        )


def _agreement_currency(agreement: Agreement, market: Market, place: Locate) -> Iterator[Issue]:
    # A curve that was given but refused may be the one: its own issue says enough.
    refused = any((i.sheet or "").casefold().startswith("curve") for own in market.rejected.values() for i in own)
    if (agreement.currency, "") not in market.curves and not refused:
        yield warning(
            place(f"agreements:{agreement.netting_set}"),
            "agreement-without-curve",
            f"currency {agreement.currency} of the agreement of netting set {agreement.netting_set}, which has no "
            "standard discount curve",
            f"a curve of {agreement.currency} with empty collateral, over which collateral earns its spread",
            "Correct the currency, or add its curve to the curves table. No value in this report depends on it; "
            "valuation adjustments will.",
        )
