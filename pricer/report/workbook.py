"""The workbook that is handed round in the meeting."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from pricer.core.issues import Severity
from pricer.engines.cross_check import ALARMS
from pricer.report import columns
from pricer.report.bulk import Bulk, save_with_bulk
from pricer.report.contract_columns import valuations_columns
from pricer.report.contract_sheets import contract_table_sheets, events_table
from pricer.report.fitting import Table
from pricer.report.frames import short_reason, without_value
from pricer.report.known_sums import underlying_columns
from pricer.report.market_sheet import add_market_sheet, add_terms_sheet, market_table_sheets
from pricer.report.run_sheet import add_run_sheet
from pricer.report.smile_sheet import add_smile_sheet
from pricer.report.styles import Mark, define_styles
from pricer.report.summary_sheet import add_summary_sheet
from pricer.report.sums import total
from pricer.report.table_sheet import add_table_sheet
from pricer.report.totals import Total, book_total
from pricer.report.verdicts import by_model, by_verdict
from pricer.run.outcome import Model, Outcome, Status, Verdict

if TYPE_CHECKING:
    import pandas


def write_workbook(outcome: Outcome, frames: Mapping[str, pandas.DataFrame], target: Path) -> None:
    """Write the workbook at ``target``; ``frames`` are :func:`pricer.report.tables` of the same outcome."""
    from openpyxl import Workbook

    workbook = Workbook()
    workbook.remove(workbook.worksheets[0])
    define_styles(workbook)
    facts = outcome.facts
    workbook.properties.creator = "pricer"
    workbook.properties.title = f"Book valuation {facts.valuation_date.isoformat()}"
    bulks: dict[str, Bulk] = {}
    frames = {**frames, "cross_check": _with_clouds(frames["cross_check"])}

    def add_tables(tables: Sequence[Table]) -> None:
        for table in tables:
            bulk = add_table_sheet(workbook, table, facts)
            if bulk is not None:
                bulks[table.title] = bulk

    add_tables(_tables(outcome, frames))
    add_tables(contract_table_sheets(outcome, frames))
    add_market_sheet(workbook, outcome, frames)
    calibration, *others = market_table_sheets(outcome, frames)
    add_tables([calibration])
    add_smile_sheet(workbook, outcome, frames["calibration"])
    add_tables(others)
    add_terms_sheet(workbook, outcome, frames)
    add_run_sheet(workbook, outcome)
    add_summary_sheet(workbook, outcome, frames)
    workbook.active = 0
    save_with_bulk(workbook, bulks, target)


def _tables(outcome: Outcome, frames: Mapping[str, pandas.DataFrame]) -> list[Table]:
    whole = book_total(outcome).total
    valuations = frames["valuations"].copy()
    # Times are kept out of the tidy table, which must not change from run to run; here they belong.
    seconds = [v.seconds for v in outcome.valuations] + [None] * len(outcome.refusals)
    valuations["seconds"] = seconds
    # Its place in print tells why there is no value; the plain table keeps methods and reasons apart.
    missing = valuations["status"] == Status.NOT_PRICED
    valuations.loc[missing, "method"] = [short_reason(item) for item in without_value(outcome)]
    checks, causes, problems = frames["cross_check"], frames["refusal_causes"], frames["problems"]
    return [
        events_table(outcome, frames["events"]),
        Table(
            "Valuations",
            "Valuations",
            _valuations_note(whole),
            valuations_columns(valuations),
            valuations,
            [_STATUS_MARKS.get(status, Mark.NONE) for status in valuations["status"]],
            empty="The book has no trades.",
        ),
        Table(
            "Deltas by trade",
            "Deltas by trade",
            "One row a priced trade and underlying. A marked row lacks delta or vega.",
            columns.DELTAS,
            frames["deltas"],
            _marks_of_gaps(frames["deltas"], "delta", "vega_per_vol_point"),
            empty="No priced trade has sensitivities.",
            frozen=2,
        ),
        Table(
            "Deltas by underlying",
            "Deltas by underlying",
            "Sums over priced trades, largest cash delta first; errors in quadrature, none for the total: see Run. "
            "A marked row lacks a sum, because a trade lacks the number.",
            underlying_columns(frames["underlying_deltas"]),
            frames["underlying_deltas"],
            _marks_of_gaps(frames["underlying_deltas"], *_ADDABLE),
            empty="No priced trade has sensitivities.",
            total=_underlying_total(frames["underlying_deltas"]),
        ),
        Table(
            "Cross-check",
            "Cross-check",
            _cross_check_note(outcome),
            columns.CROSS_CHECK,
            checks,
            [Mark.LOOK if verdict in ALARMS else Mark.NONE for verdict in checks["verdict"]],
            empty="No cross-checks were made in this run.",
        ),
        Table(
            "Why not priced",
            "Why not priced",
            _causes_note(whole, causes),
            columns.REFUSAL_CAUSES,
            causes,
            [Mark.NONE] * len(causes),
            empty="Every trade was priced.",
        ),
        Table(
            "Problems",
            "Problems",
            ", ".join(f"{severity} {int((problems['severity'] == severity).sum()):,}" for severity in Severity),
            columns.PROBLEMS,
            problems,
            [_SEVERITY_MARKS[Severity(severity)] for severity in problems["severity"]],
            empty="No problems were found.",
        ),
    ]


_ADDABLE = ("reporting_cash_delta", "reporting_vega_per_vol_point")  # across underlyings
_KNOWN = ("known_reporting_cash_delta", "known_reporting_vega_per_vol_point")  # these too
_STATUS_MARKS = {
    Status.DISPUTED: Mark.LOOK,
    Status.FAILING_SURFACE: Mark.LOOK,
    Status.PRECISION_NOT_REACHED: Mark.LOOK,
    Status.NOT_PRICED: Mark.REFUSED,
}
_SEVERITY_MARKS = {Severity.FATAL: Mark.LOOK, Severity.ERROR: Mark.LOOK, Severity.WARNING: Mark.NONE}


def _marks_of_gaps(frame: pandas.DataFrame, *needed: str) -> list[Mark]:
    """A row that lacks one of the ``needed`` numbers is marked."""
    return [Mark.LOOK if gap else Mark.NONE for gap in frame[list(needed)].isna().any(axis=1)]


def _valuations_note(whole: Total) -> str:
    note = f"{whole.trades:,} trades: {whole.priced:,} priced, {whole.precision_not_reached:,} precision not reached"
    note = f"{note}, {whole.disputed:,} disputed, {whole.failing_surface:,} from a failing surface"
    note = f"{note}, {whole.not_priced:,} not priced"
    return f"{note}. More columns on screen, right of what prints."


def _causes_note(whole: Total, causes: pandas.DataFrame) -> str:
    if causes.empty:
        return ""
    n = len(causes)
    return (
        f"{whole.not_priced:,} trades have no price, for {n:,} cause{'s' if n > 1 else ''}; a trade counts with each "
        "of its own. The sheet Problems has every one at its cell."
    )


def _cross_check_note(outcome: Outcome) -> str:
    parts = []
    for model, mine in by_model(outcome.cross_checks):
        found = "; ".join(f"{name} {len(checks):,}" for name, _, checks in by_verdict(mine) if checks)
        parts.append(f"Under {model}: {found}.")
    order = "Disagreements first, approximations last; more columns on screen, right of what prints."
    return " ".join([*parts, order]) if parts else ""


def _with_clouds(checks: pandas.DataFrame) -> pandas.DataFrame:
    """The table with the differences from exact and sampled references in a column for each cloud of the chart."""
    models, verdicts, differences = checks["model"], checks["verdict"], checks["difference_tolerances"]
    agree = verdicts == Verdict.AGREES
    return checks.assign(
        agrees_local_volatility=differences.where(agree & (models == Model.LOCAL_VOLATILITY)),
        agrees_lognormal=differences.where(agree & (models == Model.LOGNORMAL)),
        differs=differences.where(verdicts == Verdict.DIFFERS),
    )


def _underlying_total(frame: pandas.DataFrame) -> dict[str, object] | None:
    """Sums of amounts in the reporting currency; without errors, as underlyings of one trade share their draws."""
    if frame.empty:
        return None
    amounts = {name: total(frame[name].tolist()) for name in (*_ADDABLE, *_KNOWN)}
    numbers = {name: None if math.isnan(number) else number for name, number in amounts.items()}
    return {"underlying": "total", **numbers}
