"""The market's sheets: what was wrong with the snapshot, how well it is repriced, and what was read from it."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import TYPE_CHECKING

from pricer.core.issues import Severity
from pricer.report import market_columns as columns
from pricer.report.columns import Column
from pricer.report.fitting import Table
from pricer.report.refusal_causes import Side
from pricer.report.stacked_sheet import Stacked, add_stacked_sheet
from pricer.report.styles import Mark
from pricer.report.surface_fits import TARGET, Reach, Standing, all_points, all_quotes, mean_pull, reach, smiles
from pricer.run.outcome import MarketFacts, Outcome

if TYPE_CHECKING:
    import pandas
    from openpyxl import Workbook

    Frames = Mapping[str, pandas.DataFrame]

MARKET, CALIBRATION, CURVES, FORWARDS = "Market", "Calibration", "Curves", "Forwards"
CREDIT = "Credit, funding, agreements"
#: A forward that the paths miss by more standard errors is marked, unless by less than this many basis points of it.
FORWARD_STANDARD_ERRORS, FORWARD_BP = 5.0, 0.01
#: A quoted rate that its curve misses by this many basis points is marked.
CURVE_BP = 0.01
_FORWARDS_NOTE = (
    "After the day's dividends. Marked: a simulated forward that is off by more than "
    f"{FORWARD_STANDARD_ERRORS:g} standard errors and {FORWARD_BP:g} bp."
)
_VIOLATIONS_SHOWN = 60
_NO_SURFACE = "The market quotes no smile: volatilities are flat in strike."


def add_market_sheet(workbook: Workbook, outcome: Outcome, frames: Frames) -> None:
    """Add the sheet on the quality of the snapshot and of its repricing."""
    problems, surfaces, violations = frames["market_problems"], frames["surfaces"], frames["violations"]
    causes = frames["refusal_causes"]
    lacking = causes[causes["side"] == Side.MARKET].reset_index(drop=True)
    shown, rest = violations.head(_VIOLATIONS_SHOWN), len(violations) - _VIOLATIONS_SHOWN
    more = f", the first {len(shown)} of {len(violations):,}: the rest is in violations.csv" if rest > 0 else ""
    stack = [
        Stacked(
            _table(
                "What was wrong with the snapshot",
                columns.MARKET_PROBLEMS,
                problems,
                [Mark.NONE if severity == Severity.WARNING else Mark.LOOK for severity in problems["severity"]],
                "Nothing was found wrong with the market snapshot.",
            ),
            spans=(1, 1, 1, 1, 5, 5, 1),
        ),
        Stacked(
            _table(
                "What the market lacks for trades of the book",
                columns.LACKING,
                lacking,
                [Mark.LOOK] * len(lacking),
                "No trade lacks anything of the market.",
            ),
            spans=(1, 1, 2, 6, 5),
        ),
        Stacked(
            _table(
                "The underlyings, and how well their quotes are repriced",
                columns.SURFACES,
                surfaces,
                [_mark(verdict not in (Standing.PASSES, Standing.NO_SMILE)) for verdict in surfaces["verdict"]],
                "No underlying is quoted or used.",
            )
        ),
    ]
    if len(violations):
        marks = [Mark.NONE] * len(shown)
        table = _table(f"Violations of arbitrage{more}", columns.VIOLATIONS, shown, marks, "")
        stack.append(Stacked(table, spans=(1, 14)))
    add_stacked_sheet(workbook, MARKET, market_note(outcome.market), stack, outcome.facts)


def add_terms_sheet(workbook: Workbook, outcome: Outcome, frames: Frames) -> None:
    """Add the sheet of credit, funding and agreements."""
    parts = (
        ("Credit", columns.CREDIT, "credit", "The market has no credit curves."),
        ("The desk's funding", columns.FUNDING, "funding", "The market has no funding curve."),
        ("Agreements", columns.AGREEMENTS, "agreements", "The market has no agreements."),
    )
    stack = [
        Stacked(_table(heading, shown, frames[name], [Mark.NONE] * len(frames[name]), empty))
        for heading, shown, name, empty in parts
    ]
    add_stacked_sheet(workbook, CREDIT, "As read from the market snapshot.", stack, outcome.facts)


def market_table_sheets(outcome: Outcome, frames: Frames) -> list[Table]:
    """The market's tables that have a sheet each."""
    calibration, curves, forwards = frames["calibration"], frames["curves"], frames["forwards"]
    return [
        Table(
            CALIBRATION,
            CALIBRATION,
            _calibration_note(outcome.market),
            columns.CALIBRATION,
            calibration,
            [Mark.LOOK if target == Reach.BEYOND else Mark.NONE for target in calibration["target"]],
            empty=_NO_SURFACE,
            frozen=3,
        ),
        Table(
            CURVES,
            CURVES,
            "" if curves.empty else f"Marked: a quote that its curve misses by {CURVE_BP:g} bp or more.",
            columns.CURVES,
            curves,
            [_mark(abs(bp) >= CURVE_BP) for bp in curves["repricing_difference_bp"]],
            empty="No curve points were recorded.",
        ),
        Table(
            FORWARDS,
            FORWARDS,
            "" if forwards.empty else _FORWARDS_NOTE,
            columns.FORWARDS,
            forwards,
            [
                _mark(abs(bp) >= FORWARD_BP and not abs(bp) <= FORWARD_STANDARD_ERRORS * error)
                for bp, error in zip(
                    forwards["simulated_error_bp"], forwards["simulated_standard_error_bp"], strict=True
                )
            ],
            empty="No forwards were recorded.",
            frozen=2,
        ),
    ]


def surfaces_note(market: MarketFacts) -> str:
    """How many surfaces there are and fail."""
    surfaces = smiles(market.surfaces)
    if not surfaces:
        return _NO_SURFACE
    failing = sum(not surface.passes for surface in surfaces)
    return f"{len(surfaces):,} volatility surfaces, {failing:,} failing."


def market_note(market: MarketFacts) -> str:
    """How the surfaces stand, in one line."""
    calibration = f"{_quotes_note(market)}." if smiles(market.surfaces) else ""
    return f"{surfaces_note(market)} {calibration}".strip()


def _calibration_note(market: MarketFacts) -> str:
    """As :func:`market_note`, with how far the simulated model lies from the fitted surface on the whole."""
    note, pull = _quotes_note(market), mean_pull(all_points(market.surfaces))
    if not note:
        return ""
    return f"{note}. Mean of simulated less fitted: {pull:+.1f} standard errors." if math.isfinite(pull) else f"{note}."


def _quotes_note(market: MarketFacts) -> str:
    quotes = all_quotes(market.surfaces)
    if not quotes:
        return ""
    counted = [reach(quote) for quote in quotes if quote.counts]
    beyond, apart = counted.count(Reach.BEYOND), counted.count(Reach.NOT_SIMULATED)
    note = (
        f"{len(quotes):,} quotes, {len(counted):,} of them between 10 and 90 delta: simulated error beyond {TARGET:g}"
    )
    note = f"{note} vol points for {beyond:,}"
    points = [point for point in all_points(market.surfaces) if point.derived]
    if points:
        missed = sum(reach(point) is Reach.BEYOND for point in points)
        note = f"{note}, and for {missed:,} of {len(points):,} derived points"
    return f"{note}; {apart:,} were not simulated" if apart else note


def _table(heading: str, shown: tuple[Column, ...], frame: pandas.DataFrame, marks: list[Mark], empty: str) -> Table:
    return Table("", heading, "", shown, frame, marks, empty)


def _mark(stands_out: bool) -> Mark:
    return Mark.LOOK if stands_out else Mark.NONE
