"""What the terminal shows: problems, progress and the closing summary."""

from __future__ import annotations

import math
import sys
import time
from collections import Counter, defaultdict
from collections.abc import Sequence
from threading import Lock

from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, TextColumn, TimeElapsedColumn, TimeRemainingColumn
from rich.progress import Progress as Bar
from rich.table import Table

from pricer.core.issues import Issue, Severity
from pricer.core.progress import Progress, Silent
from pricer.engines.cross_check import ALARMS
from pricer.report.reference_coverage import checked_total
from pricer.report.surface_fits import TARGET, Reach, all_quotes, reach, smiles
from pricer.report.totals import Total, book_total, group_totals
from pricer.report.verdicts import by_model
from pricer.run.market_outline import AtTheForward, UnderlyingOutline
from pricer.run.outcome import Outcome

#: Problems of one kind that are printed before the rest is only counted.
SHOWN_OF_A_KIND = 8

_ORDER = (Severity.FATAL, Severity.ERROR, Severity.WARNING)

out = Console(highlight=False, soft_wrap=True)
err = Console(stderr=True, highlight=False, soft_wrap=True)


def show_problems(issues: Sequence[Issue], *, every: bool = False) -> None:
    """Print problems on standard error, the gravest first, those of inputs before those of trades, by kind."""
    if not issues:
        return
    counts = Counter(issue.severity for issue in issues)
    err.print(
        f"{len(issues)} problem{'s' if len(issues) != 1 else ''}: " + _counted(counts), style="bold", markup=False
    )
    groups: dict[tuple[Severity, bool, str], list[Issue]] = defaultdict(list)
    for issue in issues:
        groups[issue.severity, issue.trade_id is not None, issue.code].append(issue)
    # Faults of the inputs come before those of trades, which may follow from them; the sort keeps the rest in order.
    for key in sorted(groups, key=lambda key: (_ORDER.index(key[0]), key[1])):
        (severity, _, code), members = key, groups[key]
        err.print(f"\n{severity}: {code.replace('-', ' ')} ({len(members)})", style="bold", markup=False)
        shown = members if every else members[:SHOWN_OF_A_KIND]
        for issue in shown:
            err.print(f"  {issue}", markup=False)
        if len(shown) < len(members):
            err.print(f"  ... and {len(members) - len(shown)} more of this kind", markup=False)


def _counted(counts: Counter[Severity]) -> str:
    def words(severity: Severity) -> str:
        plural = "s" if counts[severity] > 1 and severity is not Severity.FATAL else ""
        return f"{counts[severity]} {severity}{plural}"

    return ", ".join(words(severity) for severity in _ORDER if counts[severity])


def progress(*, quiet: bool) -> Progress:
    """A bar on a terminal, dated lines in a log, nothing when quiet."""
    if quiet:
        return Silent()
    return _BarProgress() if err.is_terminal else _LoggedProgress()


class _BarProgress:
    """A bar with the trade in hand and the time left."""

    def __init__(self) -> None:
        self._bar = Bar(
            TextColumn("pricing"),
            BarColumn(),
            MofNCompleteColumn(),
            TextColumn("elapsed"),
            TimeElapsedColumn(),
            TextColumn("left"),
            TimeRemainingColumn(),
            TextColumn("{task.description}"),
            console=err,
            transient=True,
        )
        self._task = self._bar.add_task("")

    def start(self, total: int) -> None:
        self._bar.update(self._task, total=total)
        self._bar.start()

    def advance(self, label: str) -> None:
        self._bar.update(self._task, advance=1, description=label)

    def finish(self) -> None:
        self._bar.stop()


class _LoggedProgress:
    """A line at every tenth of the work, for output that goes to a file."""

    def __init__(self) -> None:
        self._lock = Lock()
        self._done = self._total = 0
        self._began = time.monotonic()

    def start(self, total: int) -> None:
        self._total = total
        self._began = time.monotonic()
        self._say(f"pricing {total} trades")

    def advance(self, label: str) -> None:
        with self._lock:
            self._done += 1
            tenths = (10 * self._done) // max(self._total, 1)
            if tenths > (10 * (self._done - 1)) // max(self._total, 1):
                elapsed = time.monotonic() - self._began
                left = elapsed / self._done * (self._total - self._done)
                self._say(f"priced {self._done} of {self._total}, last {label}, about {left:.0f} s left")

    def finish(self) -> None:
        self._say(f"pricing took {time.monotonic() - self._began:.1f} s")

    @staticmethod
    def _say(text: str) -> None:
        err.print(f"{time.strftime('%Y-%m-%d %H:%M:%S')} {text}", markup=False)


def show_outcome(outcome: Outcome) -> None:
    """The short table at the end of a run."""
    facts = outcome.facts
    table = Table(title=f"{facts.book_name}, {facts.valuation_date:%d %B %Y}", title_justify="left", min_width=60)
    table.add_column("currency")
    table.add_column("trades", justify="right")
    table.add_column("value", justify="right")
    table.add_column("standard error", justify="right")
    for group in sorted(group_totals(outcome, "currency"), key=lambda each: each.group):
        priced = group.trades - group.not_priced
        if priced:
            table.add_row(group.group, str(priced), _amount(group.own_value), _amount(group.own_standard_error))
    table.add_section()
    whole = book_total(outcome).total
    row = (str(whole.trades - whole.not_priced), _amount(whole.value), _amount(whole.standard_error))
    table.add_row(f"total in {facts.reporting_currency}", *row, style="bold")
    out.print(table)

    alarms = sum(check.verdict in ALARMS for check in outcome.cross_checks)
    lines = [
        f"priced {len(outcome.valuations)}, not priced {len(outcome.refusals)}",
        f"less precise than asked: {whole.precision_not_reached}",
        f"cross-checks: {_by_model(outcome)}, of which disagree: {alarms}",
        *_checked_lines(outcome),
        *_model_lines(outcome, whole),
    ]
    for line in lines:
        out.print(line, markup=False)


def _by_model(outcome: Outcome) -> str:
    """How many cross-checks were made under which model."""
    parts = [f"{len(checks)} under {model}" for model, checks in by_model(outcome.cross_checks)]
    return f"{len(outcome.cross_checks)} ({', '.join(parts)})" if parts else "0"


def _checked_lines(outcome: Outcome) -> list[str]:
    """What the cross-checks say of the values that lead; nothing without a value."""
    found = checked_total(outcome)
    parts = ", ".join(f"{kind} {count}" for kind, count in found.by.items())
    return [f"leading values checked under their own model, of {found.trades}: {parts}"] if found.trades else []


def show_market(rows: Sequence[UnderlyingOutline]) -> None:
    """Forwards and volatilities at the forward, at the first and last quoted date of each underlying.

    In plain columns, which neither a narrow terminal nor a log cuts short.
    """
    heading = ("underlying", "spot", "", *("quoted", "forward", "volatility") * 2)
    lines: list[Sequence[str]] = [heading]
    for row in rows:
        ends = [cell for end in (row.first, row.last) for cell in _at_the_forward(end)]
        lines.append((row.underlying, f"{row.spot:,.6g}", row.currency, *ends))
    widths = [max(len(line[i]) for line in lines) for i in range(len(heading))]
    out.print("first and last quoted date, with the forward and the volatility at the forward", markup=False)
    for line in lines:
        cells = [
            cell.rjust(width) if name in ("spot", "forward", "volatility") else cell.ljust(width)
            for cell, width, name in zip(line, widths, heading, strict=True)
        ]
        out.print("  ".join(cells).rstrip(), markup=False)


def _at_the_forward(end: AtTheForward | None) -> tuple[str, str, str]:
    return ("-", "-", "-") if end is None else (str(end.day), f"{end.forward:,.6g}", f"{100.0 * end.volatility:.2f} %")


def _model_lines(outcome: Outcome, whole: Total) -> list[str]:
    """What the choice of model is worth, and how the volatility surfaces stand; nothing where neither is known."""
    lines = []
    compared = whole.trades - whole.not_priced - whole.without_model_difference
    if compared:
        difference, error = _amount(whole.model_difference), _amount(whole.model_difference_standard_error)
        currency = outcome.facts.reporting_currency
        lines.append(
            f"local volatility less lognormal: {difference} {currency}, standard error {error}, trades: {compared}"
        )
    surfaces = smiles(outcome.market.surfaces)
    if surfaces:
        failing = sum(not surface.passes for surface in surfaces)
        reached = [reach(quote) for quote in all_quotes(surfaces) if quote.counts and quote.simulated is not None]
        lines.append(
            f"volatility surfaces: {len(surfaces)}, of which fail: {failing}, trades priced from these: "
            f"{whole.failing_surface}"
        )
        if reached:
            lines.append(
                f"simulated quotes between 10 and 90 delta: {len(reached)}, of which off by more than {TARGET:g} vol "
                f"points: {reached.count(Reach.BEYOND)}"
            )
    return lines


def _amount(amount: float) -> str:
    return "-" if math.isnan(amount) else f"{amount:,.2f}"


def say(text: str) -> None:
    """A plain line on standard output."""
    out.print(text, markup=False)


def complain(text: str) -> None:
    """A plain line on standard error."""
    err.print(text, markup=False)
    sys.stderr.flush()
