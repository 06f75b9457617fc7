"""The sample's broken market: every mistake is told once at its cell, and costs what depends on it and nothing else."""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache

import pytest

from pricer.contracts.book import Trade
from pricer.contracts.option import EuropeanOption
from pricer.core.issues import Severity
from pricer.loader import load_book, load_market
from pricer.run.admission import admit
from tests.end_to_end.desk import BROKEN_MARKET, SAMPLE

#: Sheet, cell and code of everything that is wrong.
ERRORS = {
    ("dividends", "A73", "cash-dividends-exceed-spot"),
    ("repo", "D6", "not-a-decimal"),
    ("volatilities", "C110", "failing-surface"),
    ("volatilities", "C474", "not-a-decimal"),
    ("fixings", "C247", "repeated-fixing"),
    ("credit", "C23", "not-a-decimal"),
    ("credit", "C27", "unusable-spreads"),
    ("agreements", "E4", "unwanted-value"),
    ("agreements", "F4", "unwanted-value"),
    ("agreements", "G4", "unwanted-value"),
    ("agreements", "J4", "unwanted-value"),
}
#: The same of everything that is odd, but used or ignored.
WARNINGS = {
    ("volatilities", "C110", "butterfly-arbitrage"),
    ("volatilities", "C110", "calendar-arbitrage"),
    ("volatilities", "C110", "volatility-miss"),
    ("volatilities", "C373", "butterfly-arbitrage"),
    ("volatilities", "C373", "volatility-miss"),
    ("volatilities", "B142", "expired-quote"),
    ("volatilities", "B145", "expired-quote"),
    ("correlations", "C2", "correlation-repaired"),
    ("curve_points", "B23", "stale-point"),
    ("curve_points", "B24", "stale-point"),
    ("fx", "A2", "inconsistent-fx"),
    ("fixings", "C2156", "fixing-leaps"),
    ("fixings", "C2157", "fixing-leaps"),
}
#: Once EURGBP has no volatility, no chain of pairs leads to this currency.
CUT_OFF = "GBP"
#: Trades that observe KRUNTEL on 25 November, whose fixing is missing, or ORLUMA on 17 November, which has two.
#: SMD-0119 observes ORLUMA too, but its barrier was hit in October.
WITHOUT_FIXING = frozenset(
    {"SMD-0097", "SMD-0103", "SMD-0105", "SMD-0115", "SMD-0135", "SMD-0136", "SMD-0150", "SMD-0153", "SMD-0156"}
)
#: Trades whose last amounts are known: they need no volatility any more.
ENDED = frozenset({"SMD-0125", "SMD-0126", "SMD-0127", "SMD-0145"})
REFUSED_UNDERLYINGS = {
    "PELLOMAR": "rejected-underlying",
    "TESKIR": "failing-surface",
    "HALQUIN": "no-volatility",
    "WEXMOOR": "no-volatility",
    "FENTRICK": "cash-dividends-exceed-spot",
}


@lru_cache
def market():
    return load_market(BROKEN_MARKET / "market.xlsx")


@lru_cache
def good_market():
    return load_market(SAMPLE / "market.xlsx")


@lru_cache
def book():
    return load_book(SAMPLE / "book.xlsx")


def told(severity: Severity) -> list[tuple[str | None, str | None, str]]:
    return [(issue.sheet, issue.cell, issue.code) for issue in market().issues if issue.severity is severity]


def message(sheet: str, cell: str, code: str) -> str:
    (found,) = [str(i) for i in market().issues if (i.sheet, i.cell, i.code) == (sheet, cell, code)]
    return found


def reasons(trade: Trade) -> set[str]:
    """Why the trade cannot be priced, worked out from the mistakes that the market was given."""
    contract = trade.contract
    if trade.trade_id in ENDED:
        return set()
    writer = None if isinstance(contract, EuropeanOption) else contract.writer
    names = {*contract.underlyings, *([writer.structural.assets] if writer and writer.structural else [])}
    out = {REFUSED_UNDERLYINGS[name] for name in names if name in REFUSED_UNDERLYINGS}
    if trade.trade_id in WITHOUT_FIXING:
        out.add("missing-fixing")
    if writer is not None and writer.structural is None and writer.name not in market().credit:
        out.add("no-writer-credit")
    if "FENTRICK" in names:
        out.add("no-volatility")  # its smile has no forward to be read from
    if trade.collateral == "USD":
        out.add("no-collateral-curve")
    if contract.conversion is not None:
        good = good_market().underlyings
        usable = [name for name in contract.underlyings if name in market().underlyings]
        pairs = {frozenset((good[name].currency, trade.currency)) for name in usable}
        if any(len(pair) == 2 and CUT_OFF in pair for pair in pairs):
            out.add("no-fx-volatility")
    return out


def test_every_mistake_is_told_at_its_cell():
    errors = told(Severity.ERROR)
    assert set(errors) == ERRORS
    assert len(errors) == len(ERRORS), "none is told twice"


def test_everything_odd_is_told_at_its_cell():
    warnings = told(Severity.WARNING)
    assert set(warnings) == WARNINGS
    assert len(warnings) == len(WARNINGS), "none is told twice"


def test_csv_files_and_workbook_have_the_same_mistakes():
    folder = load_market(BROKEN_MARKET / "market")
    assert [(i.code, i.row, i.column, i.found) for i in folder.issues] == [
        (i.code, i.row, i.column, i.found) for i in market().issues
    ]


@pytest.mark.parametrize(
    ("sheet", "cell", "code", "words"),
    [
        (
            *("dividends", "A73", "cash-dividends-exceed-spot"),
            'market.xlsx, sheet dividends, row 73, column "underlying" (cell A73): found the cash dividends of '
            "FENTRICK to 2027-12-09 are worth 14.5147 tonight, and its spot is 2.775: a price cannot lie below the "
            "dividends it is still to pay; expected cash dividends worth less than the spot. Correct the amounts or "
            "the spot, or enter dividends far ahead as proportional ones.",
        ),
        (
            *("repo", "D6", "not-a-decimal"),
            'market.xlsx, sheet repo, row 6, column "long_rate_decimal" (cell D6): found 1.72; expected a decimal '
            "number no larger than 1. Did you mean 0.0172 (1.72 %)?",
        ),
        (
            *("volatilities", "B142", "expired-quote"),
            'market.xlsx, sheet volatilities, row 142, column "expiry_date" (cell B142): found the date 2026-09-18 '
            "(and 2 more rows); expected an expiry after the valuation date 2026-11-30. Ignored. Delete the rows.",
        ),
        (
            *("volatilities", "C373", "butterfly-arbitrage"),
            'market.xlsx, sheet volatilities, row 373, column "volatility_decimal" (cell C373): found butterfly '
            "arbitrage of 0.13 vol points in the quotes of SORBEQ for 2027-01-15, at strike 100.0 % of the forward; "
            "expected option prices that are convex in strike. Lower the volatility at this strike by 0.13 vol points, "
            "or raise its neighbours.",
        ),
        (
            *("correlations", "C2", "correlation-repaired"),
            'market.xlsx, sheet correlations, row 2, column "TESKIR" (cell C2): found correlations that contradict '
            "each other (smallest eigenvalue -0.023); expected a positive semi-definite matrix. The nearest "
            "correlation matrix is used instead, at distance 0.0305; its largest change is ORLUMA / TESKIR from "
            "0.930000 to 0.914817. Review the correlations of this pair.",
        ),
        (
            *("curve_points", "B23", "stale-point"),
            'market.xlsx, sheet curve_points, row 23, column "date" (cell B23): found the date 2026-09-30; expected a '
            "date after the valuation date 2026-11-30. Ignored. Delete the row.",
        ),
        (
            *("fx", "A2", "inconsistent-fx"),
            'market.xlsx, sheet fx, row 2, column "pair" (cell A2): found EURUSD quoted at 1.1032, but 1.14626 through '
            "GBP; expected quotes that agree to 1 %. Check the three pairs; each conversion uses the direct quote "
            "where there is one.",
        ),
        (
            *("credit", "C27", "unusable-spreads"),
            'market.xlsx, sheet credit, row 27, column "cds_spread_decimal" (cell C27): found credit Pennifold '
            "Capital: no hazard rate between 0 and 1 a year satisfies the spread 120 bp of 2Y after the spreads before "
            "it; expected spreads from which hazard rates follow. Correct the spreads, or leave one of the tenors out.",
        ),
        (
            *("agreements", "E4", "unwanted-value"),
            'market.xlsx, sheet agreements, row 4, column "counterparty_threshold" (cell E4): found 5000000; expected '
            "a blank cell, as this is for agreements in which the counterparty posts only. Clear the cell, or correct "
            "collateral.",
        ),
    ],
)
def test_mistakes_are_told_in_full(sheet, cell, code, words):
    assert message(sheet, cell, code) == words


def test_a_failing_surface_names_its_contradictions_and_the_way_to_insist():
    told = message("volatilities", "C110", "failing-surface")
    assert "a volatility surface of TESKIR that fails its checks: quotes contradict each other: calendar" in told
    assert "or run with --accept-failing-surfaces: trades on it are then priced and marked." in told


def test_each_mistake_costs_only_what_depends_on_it():
    broken, good = market(), good_market()
    assert set(good.underlyings) - set(broken.underlyings) == {"PELLOMAR"}
    usable = {name for name in broken.underlyings if broken.has_volatility(name)}
    assert usable == set(good.underlyings) - {"PELLOMAR", "HALQUIN", "WEXMOOR", "FENTRICK"}
    assert {name for name, surface in broken.surfaces.items() if not surface.passes} == {"TESKIR"}
    assert set(good.credit) - set(broken.credit) == {"Pennifold Capital", "Thrayle Insurance"}
    assert set(good.agreements) - set(broken.agreements) == {"THR-1"}
    assert set(good.curves) - set(broken.curves) == {("EUR", "USD")}
    assert broken.curves["GBP", ""] == good.curves["GBP", ""]  # stale points are ignored
    assert set(good.repo) - set(broken.repo) == {"PELLOMAR"}
    assert broken.funding == good.funding
    assert broken.correlation is not None


def test_exactly_the_trades_that_depend_on_a_mistake_are_refused():
    admitted = admit(book(), market())
    expected = {trade.trade_id: found for trade in book() if (found := reasons(trade))}
    refused = {
        refusal.trade_id: {issue.code for issue in refusal.issues if issue.severity is Severity.ERROR}
        for refusal in admitted.refusals
    }
    assert refused == expected
    assert len(refused) == 119
    assert {trade.trade_id for trade in admitted} == {trade.trade_id for trade in book()} - set(refused)
    assert len(admitted) == 37
    # A composite of which one leg is missing is not said to convert nothing.
    assert "idle-conversion" not in {issue.code for issue in admitted.issues}


def test_accepting_failing_surfaces_brings_back_the_trades_that_need_no_more_than_that():
    admitted = admit(book(), market(), accept_failing_surfaces=True)
    only_surface = {trade.trade_id for trade in book() if reasons(trade) == {"failing-surface"}}
    assert only_surface
    assert {trade.trade_id for trade in admitted} == only_surface | {t.trade_id for t in admit(book(), market())}
    marked = {issue.trade_id for issue in admitted.issues if issue.code == "failing-surface" and issue.trade_id}
    assert marked >= only_surface


def test_the_trades_that_are_left_are_priced():
    """All European ones, and of those on a path the ones that are soon priced."""
    import pricer

    soon = {*ENDED, "SMD-0088", "SMD-0094", "SMD-0128", "SMD-0151", *WITHOUT_FIXING}
    trades = tuple(t for t in book() if isinstance(t.contract, EuropeanOption) or t.trade_id in soon)
    rough = pricer.Settings(precision_bp=20.0, path_delta_precision_bp=300.0, compare_models=False)
    outcome = pricer.price(replace(book(), trades=trades), market(), rough)
    valuations = pricer.tables(outcome)["valuations"].set_index("trade_id")
    left = {trade.trade_id for trade in trades if not reasons(trade)}
    assert len(left) == 33
    assert set(valuations.index[valuations["value"].notna()]) == left
    assert set(valuations.index[valuations["status"] == "not priced"]) == set(valuations.index) - left
    assert (valuations.loc[sorted(left), "standard_error"] >= 0.0).all()
