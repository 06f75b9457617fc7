"""The summary's block of what is due: what is overdue, triggers that are near, what happens by tomorrow."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from pricer.report.cells import put_number, put_text, workbook_of
from pricer.report.columns import Kind
from pricer.report.contract_frames import Due, due, in_order
from pricer.report.layout import LAST, LEFT, ROW_HEIGHT, Canvas
from pricer.report.styles import Mark, body_style
from pricer.report.text import shorten
from pricer.run.outcome import EventRow, Outcome

SHOWN = 8  # lines
#: A trigger within so many standard deviations counts as near.
NEAR = 1.0
#: Triggers that end a trade or change what it redeems: told even where they are met from afar.
DECISIVE = ("call", "knock-in", "knock-out")
#: What somebody has to enter.
TO_ENTER = "fixing "


@dataclass(frozen=True, slots=True)
class _Group:
    """Equal events of one day; ``first`` is the nearest of them."""

    first: EventRow
    trades: int
    is_soon: bool


def add_events(canvas: Canvas, outcome: Outcome) -> None:
    """A section over the whole width; none without an event."""
    rows = in_order(outcome.events)
    if not rows:
        return
    today = outcome.facts.valuation_date
    soon = sum(due(row, today) is not Due.LATER for row in rows)
    groups = _groups(outcome, rows)
    shown = groups[:SHOWN]
    canvas.reserve(ROW_HEIGHT * (4 + len(shown)))
    title = (
        f"What is due: {soon:,} by tomorrow, {len(rows) - soon:,} later; triggers within {NEAR:g} standard deviation, "
        f"and calls and barriers met: {sum(map(_is_near, rows)):,}"
    )
    canvas.section(canvas.take(), LEFT, title, LAST - LEFT + 1)
    _heading(canvas)
    for group in shown:
        _line(canvas, group)
    rest = len(rows) - sum(group.trades for group in shown)
    if rest:
        put_text(canvas.sheet, canvas.take(), LEFT, f"and {rest:,} more: sheet Events", "note")
    canvas.take(8.0)


def _groups(outcome: Outcome, rows: Sequence[EventRow]) -> list[_Group]:
    """Overdue events, fixings to enter, near triggers one by one, events by tomorrow, later ones.

    Trades share the line of an event.
    """
    today = outcome.facts.valuation_date
    members: dict[tuple[object, ...], list[EventRow]] = {}
    for row in rows:
        alone = row.trade_id if _is_near(row) else ""
        members.setdefault((row.day, row.what, row.last_day, alone), []).append(row)
    groups = [_Group(found[0], len(found), due(found[0], today) is not Due.LATER) for found in members.values()]

    def key(group: _Group) -> tuple[bool, bool, bool, bool]:
        first = group.first
        is_overdue = due(first, today) is Due.OVERDUE
        return not is_overdue, not first.what.startswith(TO_ENTER), not _is_near(first), not group.is_soon

    return sorted(groups, key=key)


def _is_near(row: EventRow) -> bool:
    is_close = row.deviations is not None and abs(row.deviations) <= NEAR
    return is_close or (bool(row.met_today) and row.what in DECISIVE)


def _heading(canvas: Canvas) -> None:
    row = canvas.take()
    texts = {
        LEFT: "day",
        LEFT + 1: "trades",
        LEFT + 3: "what",
        LEFT + 5: "counterparty",
        LEFT + 7: "underlyings",
        LAST - 2: "met today",
        LAST - 1: "move left (%)",
        LAST: "(st. dev.)",
    }
    for column in range(LEFT, LAST + 1):
        style = "heading number" if column >= LAST - 1 else "heading"
        put_text(canvas.sheet, row, column, texts.get(column, ""), style)


def _line(canvas: Canvas, group: _Group) -> None:
    row, book, event = canvas.take(), workbook_of(canvas.sheet), group.first
    mark = Mark.LOOK if group.is_soon else Mark.NONE
    others = group.trades - 1
    until = f" to {event.last_day}" if event.last_day else ""
    texts = {
        LEFT: f"{event.day}{until}",
        LEFT + 1: shorten(event.trade_id, 14 if others else 24) + (f" and {others:,} more" if others else ""),
        LEFT + 3: shorten(event.what, 36),
    }
    if not others:
        texts |= {
            LEFT + 5: shorten(event.counterparty, 20),
            LEFT + 7: shorten(", ".join(event.underlyings), 54),
            LAST - 2: "" if event.met_today is None else "yes" if event.met_today else "no",
        }
    for column in range(LEFT, LAST - 1):
        style = body_style(book, Kind.STATUS if column == LEFT else Kind.TEXT, mark=mark)
        put_text(canvas.sheet, row, column, texts.get(column, ""), style)
    distance = math.nan if event.distance is None or others else 100.0 * event.distance
    put_number(canvas.sheet, row, LAST - 1, distance, Kind.FIXED, mark=mark)
    deviations = math.nan if event.deviations is None or others else event.deviations
    put_number(canvas.sheet, row, LAST, deviations, Kind.FIXED, mark=mark)
